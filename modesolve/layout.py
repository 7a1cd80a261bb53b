"""A cross-section as the solver sees it: two axes of walls and a medium in every cell between.

``CrossSection`` is what a user states; ``Layout`` is what is solved. A layout also
serves slabs (one cell wide), closed boxes and the stack beside a core, so all of them
run through the same grid, operators and ladder.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from enum import IntEnum
from functools import lru_cache

import numpy as np

from materials.common.constants import C_UM_PER_PS
from materials.medium import Medium
from modesolve.grid import Grid
from modesolve.maps import (
    EVEN,
    Axis,
    Bend,
    Box,
    CoordinateMap,
    ProductMap,
    SlopedWalls,
    WallLine,
)
from modesolve.operators import Boundary, Operators

__all__ = ["SLAB_WIDTH_UM", "Corners", "Layout", "decay_constant", "operators_on"]

#: Width of the single cell that stands for an infinitely wide slab, um. It is narrow, so
#: that what varies across it lies far below every cut-off.
SLAB_WIDTH_UM = 0.01


#: Factors for the cells of the inner segments, across and up.
Finer = tuple[tuple[int, ...], tuple[int, ...]]


class Corners(IntEnum):
    """How fast the error at a section's corners falls: hard ones leave a slower term.

    Hard is a corner that touches three media, or the foot of a rib, which the core fills
    from three sides.
    """

    NONE = 0
    PLAIN = 1
    HARD = 2


@dataclass(frozen=True, slots=True)
class Layout:
    """Axes, media and boundary.

    Parameters
    ----------
    across, up : Axis
        Chains of segments along x and y.
    media : tuple of Medium
        The media present, each once.
    fill : tuple of tuple of int
        ``fill[i][j]`` is the index into ``media`` of segment i across and j up.
    core : int
        Index of the medium that counts as the core.
    boundary : Boundary
        Boundary conditions of the box.
    mirror : bool
        True when the low end across is the mirror plane of a symmetric section, so that
        every integral stands for half the section and both parities are wanted.
    etched_wall : WallLine or None
        Line of the etched wall where it is not vertical.
    bend_radius_um : float or None
        Radius of the line x = 0; None for a straight guide.
    """

    across: Axis
    up: Axis
    media: tuple[Medium, ...]
    fill: tuple[tuple[int, ...], ...]
    core: int
    boundary: Boundary = field(default_factory=Boundary)
    mirror: bool = False
    etched_wall: WallLine | None = None
    bend_radius_um: float | None = None

    def grid(self, box: Box, refinement: int, finer: Finer = ((), ())) -> Grid:
        """The grid of one refinement."""
        return Grid.build(self.across, self.up, box, refinement, self._shaped, finer)

    def finer(self, omega: float, n_eff: float) -> Finer:
        """Factors for the cells that a mode of index ``n_eff`` asks for across and up."""
        top = float(self.indices(omega).max())
        transverse = omega / C_UM_PER_PS * float(np.sqrt(max(top**2 - n_eff**2, 0.0)))
        return self.across.finer(transverse), self.up.finer(transverse)

    def _shaped(self, chart: ProductMap) -> CoordinateMap:
        """The plain map with this section's slopes and bend."""
        out: CoordinateMap = chart
        if self.etched_wall is not None:
            out = SlopedWalls(chart, self.across.walls[-1], self.etched_wall)
        if self.bend_radius_um is not None:
            out = Bend(out, self.bend_radius_um)
        return out

    @property
    def outward(self) -> str:
        """The side that points away from the bend's axis."""
        return "left" if (self.bend_radius_um or 0.0) < 0.0 else "right"

    def operators(self, grid: Grid, boundary: Boundary) -> Operators:
        """Matrices on a grid of this layout; `operators_on` keeps them."""
        filled = np.array(self.fill)[grid.segment_u[:, None], grid.segment_v[None, :]]
        return Operators(grid, boundary, filled, len(self.media))

    def parities(self) -> tuple[Boundary, ...]:
        """Boundaries to solve with: both kinds of mirror plane, or the one there is."""
        if not self.mirror:
            return (self.boundary,)
        return (replace(self.boundary, left="electric"), replace(self.boundary, left="magnetic"))

    def indices(self, omega: float) -> np.ndarray:
        """Refractive index of each medium at ``omega`` (rad/ps)."""
        return np.sqrt(self.permittivity(omega, 0)[:, 0])

    def permittivity(self, omega: float, order: int) -> np.ndarray:
        """Taylor coefficients of each medium's permittivity, shape (media, order + 1)."""
        return np.array([m.permittivity_series(omega, order) for m in self.media])

    def open_sides(self) -> tuple[str, ...]:
        """Sides where the field decays into an outer segment."""
        ends = {
            "left": self.across.low,
            "right": self.across.high,
            "bottom": self.up.low,
            "top": self.up.high,
        }
        return tuple(side for side, end in ends.items() if end == "open")

    def inner_cells(self, grid: Grid) -> np.ndarray:
        """Cells that lie between walls, not in an outer segment, shape (n_u, n_v)."""
        masks = []
        for axis, segment in ((self.across, grid.segment_u), (self.up, grid.segment_v)):
            first = 1 if axis.low == "open" else 0
            last = axis.segment_count - (1 if axis.high == "open" else 0)
            masks.append((segment >= first) & (segment < last))
        return masks[0][:, None] & masks[1][None, :]

    def corners(self) -> Corners:
        """The most troublesome kind of corner in the section."""
        fill = np.array(self.fill)
        worst = Corners.NONE
        for i in range(fill.shape[0] - 1):
            for j in range(fill.shape[1] - 1):
                block = fill[i : i + 2, j : j + 2]
                media = np.unique(block).size
                if media == 1 or np.all(block[0] == block[1]) or np.all(block[:, 0] == block[:, 1]):
                    continue  # flat films run through
                foot = int(np.sum(block == self.core)) == 3
                worst = max(worst, Corners.HARD if media > 2 or foot else Corners.PLAIN)
        return worst

    def column(self, index: int) -> Layout:
        """The stack of column ``index``, uniform across: a slab one cell wide."""
        across = Axis((0.0, SLAB_WIDTH_UM), "wall", "wall", uniform=True, grading=EVEN)
        return replace(
            self,
            across=across,
            fill=(self.fill[index],),
            mirror=False,
            etched_wall=None,
            bend_radius_um=None,
        )

    def side_background(self, side: str, omega: float) -> float:
        """Highest index that a field can run away with through an open side.

        Above and below that is the outer medium; to the left and right it is the
        highest index of the outer media of the stack there, raised by
        ``modesolve.seeds.cutoff_index`` to a slab mode's where the stack guides one.
        """
        n = self.indices(omega)
        if side == "bottom":
            return max(n[column[0]] for column in self.fill)
        if side == "top":
            return max(n[column[-1]] for column in self.fill)
        stack = self.fill[0 if side == "left" else -1]
        return max(n[stack[0]], n[stack[-1]])


@lru_cache(maxsize=8)
def operators_on(
    layout: Layout, box: Box, refinement: int, finer: Finer, boundary: Boundary
) -> Operators:
    """Matrices of one grid, kept: the nodes of a curve share them, only permittivity moves."""
    return layout.operators(layout.grid(box, refinement, finer), boundary)


def decay_constant(omega: float, n_eff: float, background: float) -> float:
    """Decay constant of a field of index ``n_eff`` in a background, 1/um."""
    return omega / C_UM_PER_PS * float(np.sqrt(max(n_eff**2 - background**2, 0.0)))
