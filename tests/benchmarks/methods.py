"""Three ways to the index of TE0, each from nothing but the guide and its symmetry class.

Each finds the mode on a coarse grid or mesh first, from the core's index, and puts the shift
there for the next. Every one counts its seconds in the same four stages.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import scipy.sparse as sp
from cases import TE_BOUNDARY, TE_QUARTER, Case, forget
from harness import Stages
from meshes import COARSE, Mesh
from reference import finite_elements
from reference.finite_element_guides import pencil_of
from scipy.sparse.linalg import eigs

from modesolve import eigen
from modesolve.eigen import Pencil, dissection_order, nearest_modes
from modesolve.grid import Grid
from modesolve.layout import Layout
from modesolve.maps import EVEN, Box, Grading, ProductMap, Segment
from modesolve.operators import Boundary
from modesolve.refine import neville

MESH, ASSEMBLY, FACTORISATION, ITERATION = "mesh", "assembly", "factorisation", "iteration"
STAGES = (MESH, ASSEMBLY, FACTORISATION, ITERATION)

#: Krylov basis where the shift is the core's index; where it is close to the mode.
FAR_BASIS, NEAR_BASIS = 12, 8

#: Decay lengths in the margins of the plain even grid, whose cells cost the same everywhere:
#: just enough for the errors it can reach.
EVEN_DECAYS = 7.0


@dataclass(frozen=True)
class Ladder:
    """Grids to extrapolate from, and how they lie in the guide.

    As the package lays them by default; ``lean`` ones are chosen as the meshes of the finite
    elements are: both mirror planes, margins no wider than needed, a grading that suits.
    ``decays`` is the width of the margins in decay lengths.
    """

    refinements: tuple[int, ...]
    lean: bool = False
    decays: float = 11.0

    def layout(self, case: Case) -> Layout:
        """The guide it is laid in."""
        if not self.lean:
            return case.layout
        quarter = case.quarter_layout
        across, up = (replace(axis, grading=LEAN) for axis in (quarter.across, quarter.up))
        return replace(quarter, across=across, up=up)

    @property
    def boundary(self) -> Boundary:
        """Symmetry class of TE0."""
        return TE_QUARTER if self.lean else TE_BOUNDARY

    @classmethod
    def lean_of(cls, refinements: tuple[int, ...]) -> Ladder:
        """A lean ladder; the more grids, the smaller the error and the wider the margins."""
        return cls(refinements, True, 8.0 if len(refinements) <= 3 else 11.0)

    def box(self, case: Case) -> Box:
        """The box solved in."""
        return case.box(self.decays)

    def finer(self) -> tuple[Ladder, Ladder]:
        """The same one grid higher, and with one grid more."""
        m = self.refinements
        higher, longer = tuple(i + 1 for i in m), (*m, m[-1] + 1)
        return replace(self, refinements=higher), replace(self, refinements=longer)

    def unknowns(self, case: Case) -> int:
        """Unknowns of all grids together."""
        layout, box = self.layout(case), self.box(case)
        shapes = [layout.grid(box, m).shape for m in self.refinements]
        return sum(len(dissection_order(shape, self.boundary)) for shape in shapes)

    def __str__(self) -> str:
        return ":".join(map(str, self.refinements)) + (", lean" if self.lean else "")


LEAN = Grading(between=3.0, outwards=3.0, far_share=0.4)


def ladder_index(case: Case, ladder: Ladder, stages: Stages) -> float:
    """Index from a ladder of graded grids, every grid factorised in its own order."""
    layout, boundary, box = ladder.layout(case), ladder.boundary, ladder.box(case)
    permittivity = layout.permittivity(case.omega, 0)[:, 0]
    forget()
    squares: list[float] = []
    with stages.inside((eigen, "splu", FACTORISATION)):
        for level, refinement in enumerate(ladder.refinements):
            with stages(MESH):
                grid = layout.grid(box, refinement)
                dissection_order(grid.shape, boundary)
            with stages(ASSEMBLY):
                pencil = Pencil(layout.operators(grid, boundary), case.k0, permittivity)
                shift = _next_shift(ladder.refinements, squares)
                shift = shift or case.k0**2 * permittivity.max()
                factor = pencil.factorise(shift)
            with stages(ITERATION):
                basis = NEAR_BASIS if level else FAR_BASIS
                mode = nearest_modes(pencil, factor, shift, 1, basis=basis)[0]
            squares.append(mode.eigenvalue)
    return float(neville(ladder.refinements, [math.sqrt(s) / case.k0 for s in squares]))


def _next_shift(ladder: Sequence[int], squares: list[float]) -> float | None:
    """What the grids so far foretell of the next, a little above."""
    if len(squares) < 2:
        return squares[0] if squares else None
    a, b, c = (1.0 / m**2 for m in ladder[len(squares) - 2 : len(squares) + 1])
    slope = (squares[-1] - squares[-2]) / (b - a)
    return (squares[-1] + slope * (c - b)) * (1.0 + 1e-4)


def plain_eigenvalue(pencil: Pencil, shift: float) -> float:
    """beta^2 nearest to a shift by SciPy's ordinary generalised route, all defaults."""
    values, _ = eigs(sp.csc_array(pencil.matrix), k=1, M=sp.csc_array(pencil.mass), sigma=shift)
    return float(values[0].real)


def even_index(case: Case, step_um: float, stages: Stages) -> tuple[float, int]:
    """Index from one even grid in the plain way, and its unknowns."""
    permittivity = case.layout.permittivity(case.omega, 0)[:, 0]
    shift = case.k0**2 * permittivity.max()
    unknowns = 0
    for step in (max(4.0 * step_um, 0.1 * case.section.height_um), step_um):
        forget()
        with stages(MESH):
            grid = even_grid(case, step, case.box(EVEN_DECAYS))
        with stages(ASSEMBLY):
            pencil = Pencil(case.layout.operators(grid, TE_BOUNDARY), case.k0, permittivity)
        with stages(ITERATION):
            shift = plain_eigenvalue(pencil, shift)
        unknowns = pencil.matrix.shape[0]
    return math.sqrt(shift) / case.k0, unknowns


def even_grid(case: Case, step_um: float, box: Box) -> Grid:
    """Grid of equal cells, as near to ``step_um`` as whole numbers of them allow."""
    half, height = 0.5 * case.section.width_um, case.section.height_um

    def segment(kind, start, length) -> Segment:
        return Segment(kind, start, length, max(2, round(abs(length) / step_um)), EVEN)

    across = [segment("from_mirror", 0.0, half), segment("outer_high", half, box.right)]
    up = [
        segment("outer_low", 0.0, -box.bottom),
        segment("inner", 0.0, height),
        segment("outer_high", height, box.top),
    ]
    labels = [np.repeat(np.arange(len(c)), [s.cells for s in c]) for c in (across, up)]
    return Grid.on(ProductMap(across, up), *labels)


def elements_index(case: Case, mesh: Mesh, stages: Stages) -> tuple[float, int]:
    """Index from vector finite elements on a quarter of the guide, and their unknowns.

    A coarse mesh of order 2 finds the mode; one factorisation of the fine one, the inside of
    every element eliminated first, and a few passes of inverse iteration give its index.
    """
    inside = (
        (finite_elements.spla, "splu", FACTORISATION),
        (finite_elements.Pencil, "factorise", ASSEMBLY),
    )
    near = None
    with stages.inside(*inside):
        for one in (COARSE, mesh):
            with stages(MESH):
                pencil, region = pencil_of(case.elements_guide, "TE", one.resolution(case.decay_um))
            with stages(ASSEMBLY):
                core = (case.k0 * case.section.core.index(case.wavelength_um)) ** 2
                silica = (case.k0 * case.section.cladding.index(case.wavelength_um)) ** 2
                weight = np.where(region == "core", core, silica)
            with stages(ITERATION):
                if near is None:
                    near = pencil.eigenpairs(weight, core, 1, 1e-3)[0][0]
                else:
                    near, _ = pencil.nearest(weight, near, rtol=1e-10)
    return math.sqrt(near) / case.k0, pencil.unknowns


def lasting_ladder_error(case: Case, ladder: Ladder) -> float:
    """Error of a ladder or, if larger, of the next finer ones."""
    tried = (ladder, *ladder.finer())
    return max(abs(ladder_index(case, one, Stages()) - case.n_eff) for one in tried)


def lasting_mesh_error(case: Case, mesh: Mesh) -> float:
    """Error of a mesh or, if larger, of one of its refinements.

    A mesh whose errors happen to cancel is not exact for that: who does not know the answer
    cannot tell it from others, and refining it makes it worse.
    """
    tried = (mesh, *mesh.refinements())
    return max(abs(elements_index(case, one, Stages())[0] - case.n_eff) for one in tried)
