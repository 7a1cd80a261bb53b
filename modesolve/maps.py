"""Coordinate maps: from the logical tensor grid to the cross-section.

A cross-section is laid out on two axes. Each axis is a chain of segments between
walls (flat material interfaces); inside a segment one analytic function takes the
logical coordinate to the physical one and gathers the grid lines algebraically at the
walls, where fields are singular at corners. The grid lines therefore always lie on the
walls and nothing is ever averaged across one.

Everything the solver knows of the geometry is where a ``CoordinateMap`` puts the nodes
and its arc-length factor. `ProductMap` is the plain product of two axes; other shapes
wrap it: `SlopedWalls` shears the rows of an etched core, `Bend` adds the arc-length
factor of a bend. Absorbing layers are outer segments whose coordinate turns complex.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from itertools import pairwise
from typing import Literal, Protocol

import numpy as np
from scipy.special import betainc

__all__ = [
    "EVEN",
    "Axis",
    "Bend",
    "Box",
    "CoordinateMap",
    "Grading",
    "ProductMap",
    "Segment",
    "SlopedWalls",
    "WallLine",
]

End = Literal["wall", "mirror", "open"]
Kind = Literal["inner", "from_mirror", "outer_low", "outer_high"]


@dataclass(frozen=True, slots=True)
class Grading:
    """How grid lines gather at walls.

    ``between`` is q of the regularised incomplete beta function I_s(q, q) between two
    walls; outwards a segment runs as (1 - far_share) s^outwards + far_share s^6.
    ``cells`` is the number of cells of a segment a unit of refinement: a full segment
    between two walls has twice as many as a half one or an outer one.
    """

    between: float = 3.5
    outwards: float = 3.5
    far_share: float = 0.4
    cells: int = 4


#: Half waves of a field across a full segment that its usual cells carry.
HALF_WAVES = 4.0

#: Equal cells, for closed boxes and comparisons.
EVEN = Grading(between=1.0, outwards=1.0, far_share=0.0)


@dataclass(frozen=True, slots=True)
class Box:
    """How far the box reaches beyond the last walls: thickness of the outer segments, um.

    ``turn`` above 0 makes the outer segments absorb: their coordinate turns complex from
    the wall on, its imaginary part growing as s^4 to ``turn`` times the thickness.
    """

    left: float = 0.0
    right: float = 0.0
    bottom: float = 0.0
    top: float = 0.0
    turn: float = 0.0


@dataclass(frozen=True, slots=True)
class Axis:
    """A chain of segments along one direction.

    Parameters
    ----------
    walls : tuple of float, um
        Positions of the walls, rising. With ``low="mirror"`` the first one is the
        mirror plane.
    low, high : {"wall", "mirror", "open"}
        What lies at the ends: a wall of the box, a mirror plane (no grading towards
        it), or an outer segment as thick as the margin.
    uniform : bool
        One cell from the first wall to the last whatever the refinement: nothing
        varies along this axis.
    """

    walls: tuple[float, ...]
    low: End = "open"
    high: End = "open"
    uniform: bool = False
    grading: Grading = field(default_factory=Grading)

    @property
    def segment_count(self) -> int:
        """Number of segments, outer ones included."""
        return len(self.walls) - 1 + (self.low == "open") + (self.high == "open")

    def finer(self, transverse_per_um: float) -> tuple[int, ...]:
        """Factor for the cells of each inner segment that a mode's half waves ask for.

        Parameters
        ----------
        transverse_per_um : float, rad/um
            Largest transverse wavenumber of the mode.
        """
        if self.uniform:
            return (1,) * (len(self.walls) - 1)
        out = []
        for i, (a, b) in enumerate(pairwise(self.walls)):
            length = 2.0 * (b - a) if i == 0 and self.low == "mirror" else b - a
            half_waves = transverse_per_um * length / math.pi
            out.append(max(1, math.ceil(half_waves / HALF_WAVES)))
        return tuple(out)

    def segments(
        self,
        low_margin: float,
        high_margin: float,
        refinement: int,
        turn: float = 0.0,
        finer: tuple[int, ...] = (),
    ) -> list[Segment]:
        """The segments from low to high, with their cell counts."""
        grading = self.grading
        factors = finer or (1,) * (len(self.walls) - 1)
        out: list[Segment] = []
        if self.low == "open":
            outer = grading.cells * refinement
            out.append(Segment("outer_low", self.walls[0], -low_margin, outer, grading, turn))
        for i, (a, b) in enumerate(pairwise(self.walls)):
            mirrored = i == 0 and self.low == "mirror"
            cells = (grading.cells if mirrored else 2 * grading.cells) * refinement * factors[i]
            kind: Kind = "from_mirror" if mirrored else "inner"
            out.append(Segment(kind, a, b - a, 1 if self.uniform else cells, grading))
        if self.high == "open":
            outer = grading.cells * refinement
            out.append(Segment("outer_high", self.walls[-1], high_margin, outer, grading, turn))
        return out


@dataclass(frozen=True, slots=True)
class Segment:
    """One analytic piece of an axis: the position as a function of s in 0..1."""

    kind: Kind
    start: float
    length: float
    cells: int
    grading: Grading
    turn: float = 0.0

    def position(self, s: np.ndarray) -> np.ndarray:
        """Coordinate, um; ``start`` is the segment's wall, s = 0 its low end.

        Waves go as exp(+i k x) outwards, so a positive imaginary part along the outward
        direction makes them die away.
        """
        q = self.grading.between
        if self.kind == "inner":
            return self.start + self.length * betainc(q, q, s)
        if self.kind == "from_mirror":
            return self.start + self.length * (2.0 * betainc(q, q, 0.5 * (1.0 + s)) - 1.0)
        t = 1.0 - s if self.kind == "outer_low" else s
        p, a = self.grading.outwards, self.grading.far_share
        outwards = (1.0 - a) * t**p + a * t**6
        if self.turn == 0.0:
            return self.start + self.length * outwards
        return self.start + self.length * (outwards + 1j * self.turn * t**4)


class CoordinateMap(Protocol):
    """A map from the logical grid to the cross-section; one cell is a unit square."""

    shape: tuple[int, int]

    def position(self, u: np.ndarray, v: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """x and y in um at logical points; ``u`` and ``v`` broadcast."""
        ...

    def arc(self, x: np.ndarray) -> np.ndarray:
        """Arc-length factor h at ``x``: 1 in a straight guide, 1 + x/R in a bend."""
        ...


class ProductMap:
    """x a function of u alone, y of v alone: vertical walls, straight guide.

    Parameters
    ----------
    along_u, along_v : list of Segment
        Chains of segments along the two logical axes.
    """

    def __init__(self, along_u: list[Segment], along_v: list[Segment]) -> None:
        self._along_u = along_u
        self._along_v = along_v
        self.shape = (sum(s.cells for s in along_u), sum(s.cells for s in along_v))

    def position(self, u: np.ndarray, v: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """x and y in um at logical points; ``u`` and ``v`` broadcast."""
        x = _follow(self._along_u, np.asarray(u, dtype=float))
        y = _follow(self._along_v, np.asarray(v, dtype=float))
        x, y = np.broadcast_arrays(x, y)
        return x, y

    def arc(self, x: np.ndarray) -> np.ndarray:
        """1: the guide is straight."""
        return np.ones_like(x)


def _follow(segments: list[Segment], u: np.ndarray) -> np.ndarray:
    """Position along a chain at logical coordinates ``u`` (cells count from 0)."""
    turned = any(segment.turn for segment in segments)
    position = np.empty(u.shape, complex if turned else float)
    first = 0
    for i, segment in enumerate(segments):
        last = first + segment.cells
        inside = (u >= first) & ((u < last) if i + 1 < len(segments) else (u <= last))
        position[inside] = segment.position((u[inside] - first) / segment.cells)
        first = last
    return position


@dataclass(frozen=True, slots=True)
class WallLine:
    """The etched wall of a core: half its width at two heights, straight between them.

    Parameters
    ----------
    bottom_um, top_um : float
        Heights of the wall's ends.
    half_bottom_um, half_top_um : float
        Distance of the wall from the core's middle there.
    """

    bottom_um: float
    top_um: float
    half_bottom_um: float
    half_top_um: float

    def half_width(self, y: np.ndarray) -> np.ndarray:
        """Distance of the wall from the core's middle; beyond the ends it stays."""
        ends = (self.half_bottom_um, self.half_top_um)
        return np.interp(np.real(y), (self.bottom_um, self.top_um), ends)


class SlopedWalls:
    """A map whose core wall follows a line: rows are stretched inside, shifted outside.

    The line has its kinks at the wall's two ends only, which are grid lines, so the map
    is analytic in every segment.

    Parameters
    ----------
    inner : ProductMap
        A section symmetric about x = 0, or its half.
    half_width_um : float
        Where ``inner`` has the core's wall.
    line : WallLine
    """

    def __init__(self, inner: ProductMap, half_width_um: float, line: WallLine) -> None:
        self._inner = inner
        self._half_width = half_width_um
        self._line = line
        self.shape = inner.shape

    def position(self, u: np.ndarray, v: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """x and y in um at logical points; ``u`` and ``v`` broadcast."""
        x, y = self._inner.position(u, v)
        wall = self._line.half_width(y)
        stretched = x * (wall / self._half_width)
        shifted = x + np.sign(np.real(x)) * (wall - self._half_width)
        return np.where(np.abs(np.real(x)) <= self._half_width, stretched, shifted), y

    def arc(self, x: np.ndarray) -> np.ndarray:
        """1: the guide is straight."""
        return np.ones_like(x)


class Bend:
    """A map bent about an axis at x = -radius: exact cylindrical coordinates.

    Only the arc-length factor changes, h = 1 + x/R; a negative radius bends the other way.

    Parameters
    ----------
    inner : CoordinateMap
        The same section, straight.
    radius_um : float
        Radius of the line x = 0, the core's middle.
    """

    def __init__(self, inner: CoordinateMap, radius_um: float) -> None:
        self._inner = inner
        self._radius = radius_um
        self.shape = inner.shape

    def position(self, u: np.ndarray, v: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """x and y in um at logical points; ``u`` and ``v`` broadcast."""
        return self._inner.position(u, v)

    def arc(self, x: np.ndarray) -> np.ndarray:
        """h = 1 + x/R."""
        return 1.0 + x / self._radius
