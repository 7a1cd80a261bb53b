"""Candidates for guided modes: found on a coarse grid, recognised on any other.

A mode is known by its seed: an estimate of its index, its parity, and what its
transverse field looks like on the blocks of the unit grid. The cut-off is the highest
index with which a field can run away through an open side of the box; beside a slab that
is a slab mode's.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from materials.common.constants import C_UM_PER_PS
from materials.common.errors import NotConverged, TooCloseToCutoff
from modesolve.eigen import Factorisation, Pencil, RawMode, nearest_modes
from modesolve.layout import Finer, Layout, decay_constant
from modesolve.maps import Box
from modesolve.operators import Boundary, Operators

__all__ = [
    "Seed",
    "box_for",
    "cutoff_index",
    "find_seeds",
    "make_seed",
    "near_cutoff",
    "overlap",
    "recognise",
    "side_backgrounds",
]

#: Box in decay lengths of the field, and the widest allowed, um.
MARGIN_DECAYS = 11.0
WIDEST_BOX_UM = 50.0

#: How the outer coordinates of a bend turn complex, by how faint the field is where it
#: begins to travel away, exp(-tunnelled): share of the thickness that goes into the
#: imaginary, and wavelengths in the background beyond the turning point. A strong turn
#: takes a strong wave in; a faint one is told better from the tail of the mode by a weak
#: turn. Beyond the last bound nothing is lost that could be seen, and all stays real.
ABSORBERS = ((15.0, 0.6, 4.0), (30.0, 0.3, 2.0))

#: Share of the way to the bend's axis that the inward margin may take.
INWARD_SHARE = 0.8

#: Modes sought near the shift and Krylov basis, widened until the mode is recognised. The
#: shift is so close that the first search takes seven solves.
SEARCHES = ((1, 6), (4, 20), (16, 40))

#: A shift lies this factor above the eigenvalue expected.
ABOVE = 1.0 + 1e-4

#: Least overlap of a mode with itself on another grid or at another frequency.
LEAST_OVERLAP = 0.7


#: Share of the index step below the cut-off, and above it, within which a coarse grid can
#: not tell a guided mode from a mode of the numerical box. Below the cut-off a candidate
#: must have a share of its field between the walls to be worth a ladder.
COARSE_SLACK, NEAR_CUTOFF, LEAST_INNER_SHARE = 0.03, 0.08, 0.05

#: Eigenpairs sought beyond those wanted: modes of the box come among them, and in a
#: leaking bend many waves of the absorbing region.
SPARE, SPARE_BENT = 3, 30

#: Share of its field that a mode of a leaking bend must have between the walls.
LEAST_BENT_SHARE = 0.3

#: Grids of the slab problem beside a core; their Richardson value is good to some 1e-6.
STACK_GRIDS = (6, 12)


@dataclass(frozen=True, slots=True, eq=False)
class Seed:
    """A mode as first seen: enough to find it again on any grid.

    Attributes
    ----------
    n_eff : float
        Estimate of the effective index.
    boundary : Boundary
        The parity it belongs to.
    fingerprint : ndarray, shape (2, blocks across, blocks up)
        Transverse field on the blocks of the unit grid, normalised.
    te_fraction : float
    finer : pair of tuple of int
        Factors for the cells of the inner segments that the mode needs.
    """

    n_eff: float
    boundary: Boundary
    fingerprint: np.ndarray
    te_fraction: float
    finer: Finer = ((), ())


def fingerprint(operators: Operators, right: np.ndarray, refinement: int) -> np.ndarray:
    """Transverse field averaged over the blocks of the unit grid, unit norm.

    Grids of one layout have the same logical segments, so a block of m x m cells of the
    grid m covers the same logical square on each of them; a mode is recognised by it.
    """
    det = operators.grid.metric.det
    # in an absorbing outer region the field depends on how far its coordinate turns
    area = np.sqrt(np.abs(det)) * (np.imag(det) == 0.0)
    parts = []
    n_u, n_v = operators.topology.shape
    rows = _blocks(n_u, refinement)
    columns = _blocks(n_v, refinement)
    for component in operators.transverse(right):
        cells = (component * area).sum(axis=(2, 3))
        parts.append(np.add.reduceat(np.add.reduceat(cells, rows, axis=0), columns, axis=1))
    out = np.stack(parts)
    return out / np.linalg.norm(out)


def field_share(operators: Operators, right: np.ndarray, cells: np.ndarray) -> float:
    """Share of int |E_t|^2 dA in a set of cells."""
    e_x, e_y = operators.transverse(right)
    density = (np.abs(e_x) ** 2 + np.abs(e_y) ** 2) * np.abs(operators.grid.metric.det)
    density = density.sum(axis=(2, 3))
    return float(density[cells].sum() / density.sum())


def _blocks(cells: int, refinement: int) -> np.ndarray:
    return np.arange(0, cells, refinement) if cells >= refinement else np.array([0])


def _thinned(layout: Layout, omega: float, seed: Seed) -> Seed:
    """The seed on no more blocks than the mode itself needs; the search may take more."""
    needed = layout.finer(omega, seed.n_eff)
    finer = tuple(
        tuple(have if want > 1 else 1 for have, want in zip(*pair, strict=True))
        for pair in zip(seed.finer, needed, strict=True)
    )
    look = seed.fingerprint
    for axis, which, chosen in ((1, layout.across, finer[0]), (2, layout.up, finer[1])):
        fine = which.segments(1.0, 1.0, 1, 0.0, seed.finer[axis - 1])
        thin = which.segments(1.0, 1.0, 1, 0.0, chosen)
        starts, first = [], 0
        for a, b in zip(fine, thin, strict=True):
            starts += list(range(first, first + a.cells, a.cells // b.cells))
            first += a.cells
        look = np.add.reduceat(look, starts, axis=axis)
    look = look / np.linalg.norm(look)
    return replace(seed, fingerprint=look, finer=(finer[0], finer[1]))


def overlap(a: np.ndarray, b: np.ndarray) -> float:
    """Overlap of two fingerprints, 0 to 1; 0 where their blocks differ."""
    if a.shape != b.shape:
        return 0.0
    return float(abs(np.vdot(a, b)))


def make_seed(
    operators: Operators,
    mode: RawMode,
    k0: float,
    boundary: Boundary,
    refinement: int,
    finer: Finer,
) -> Seed:
    """The seed of a mode on a grid of the given refinement."""
    look = fingerprint(operators, mode.right, refinement)
    share = float(np.sum(np.abs(look[0]) ** 2))
    n_eff = float(np.sqrt(max(np.real(mode.eigenvalue), 0.0)) / k0)
    return Seed(n_eff, boundary, look, share, finer)


def recognise(
    pencil: Pencil, shift: float, seed: Seed, refinement: int
) -> tuple[RawMode, Factorisation, list[RawMode]]:
    """The mode of the pencil that looks like the seed, its factorisation, the others."""
    factorisation = pencil.factorise(shift)
    for count, basis in SEARCHES:
        found = nearest_modes(pencil, factorisation, shift, count, basis=basis)
        marks = [
            overlap(fingerprint(pencil.operators, mode.right, refinement), seed.fingerprint)
            for mode in found
        ]
        best = int(np.argmax(marks)) if marks else 0
        if marks and marks[best] >= LEAST_OVERLAP:
            mode = found.pop(best)
            return mode, factorisation, found
    raise NotConverged(
        f"the mode near index {seed.n_eff:.5f} could not be recognised on the grid "
        f"m = {refinement} (best overlap {max(marks, default=0.0):.2f}); "
        "two modes may be crossing here: move the wavelength or the width slightly"
    )


def cutoff_index(layout: Layout, omega: float) -> float:
    """Index below which a mode is no longer guided: the highest of every open side.

    Beside the core this is a slab mode's index where the stack there guides one.
    """
    return max(side_backgrounds(layout, omega).values(), default=0.0)


def side_backgrounds(layout: Layout, omega: float) -> dict[str, float]:
    """Index of the background that the field decays towards on each open side."""
    out = {}
    for side in layout.open_sides():
        index = layout.side_background(side, omega)
        if side in ("left", "right"):
            index = max(index, _stack_index(layout, 0 if side == "left" else -1, omega, index))
        out[side] = index
    return out


def _stack_index(layout: Layout, column: int, omega: float, background: float) -> float:
    """Index of the best guided slab mode of a column, or the background's."""
    n = layout.indices(omega)
    if max(n[i] for i in layout.fill[column]) <= background:
        return background
    stack = layout.column(column)
    best = background
    for boundary in (Boundary(), Boundary(left="magnetic", right="magnetic")):
        polarised = replace(stack, boundary=boundary)
        coarse, fine = (
            find_seeds(polarised, omega, 1, background, refinement) for refinement in STACK_GRIDS
        )
        if coarse and fine:
            step = (STACK_GRIDS[1] / STACK_GRIDS[0]) ** 2 - 1.0
            best = max(best, fine[0].n_eff + (fine[0].n_eff - coarse[0].n_eff) / step)
    return best


def near_cutoff(layout: Layout, omega: float, n_eff: float, cutoff: float) -> bool:
    """Whether a coarse index lies so near the cut-off that it may be a mode of the box."""
    return n_eff < cutoff + NEAR_CUTOFF * (float(layout.indices(omega).max()) - cutoff)


def box_for(layout: Layout, backgrounds: dict[str, float], omega: float, n_eff: float) -> Box:
    """Box wide enough for the field of index ``n_eff`` to die away.

    In a bend the field beyond x_c = R (n_eff/n - 1) travels away again: the outward margin
    then reaches past x_c and the outer coordinates turn complex, unless the field is so
    faint there that nothing is lost; the margin inwards ends before the axis.

    Raises
    ------
    TooCloseToCutoff
        When a margin would exceed ``WIDEST_BOX_UM``.
    """
    out: dict[str, float] = {}
    for side, background in backgrounds.items():
        gamma = decay_constant(omega, n_eff, background)
        if gamma * WIDEST_BOX_UM < MARGIN_DECAYS:
            raise TooCloseToCutoff(
                f"index {n_eff:.6f} is too close to cut-off: to the {side} the field decays "
                f"towards index {background:.6f} over more than "
                f"{WIDEST_BOX_UM / MARGIN_DECAYS:.1f} um; widen or thicken the core, "
                "or use a shorter wavelength"
            )
        out[side] = MARGIN_DECAYS / gamma
    if layout.bend_radius_um is not None:
        return _bent_box(layout, out, backgrounds[layout.outward], omega, n_eff)
    return Box(**out)


def _bent_box(
    layout: Layout, straight: dict[str, float], background: float, omega: float, n_eff: float
) -> Box:
    """Box of a bend from those of the straight guide."""
    radius = abs(layout.bend_radius_um or 0.0)
    half = layout.across.walls[-1]
    inward = "left" if layout.outward == "right" else "right"
    out = dict(straight)
    out[inward] = min(out[inward], INWARD_SHARE * (radius - half))
    turning = max(radius * (n_eff / background - 1.0) - half, 0.0)
    x = np.linspace(0.0, turning, 201)
    local = n_eff / (1.0 + (half + x) / radius)
    decay = np.sqrt(np.maximum(local**2 - background**2, 0.0))
    tunnelled = 2.0 * omega / C_UM_PER_PS * float(np.trapezoid(decay, x))
    wavelength = 2.0 * np.pi * C_UM_PER_PS / omega / background
    for bound, turn, waves in ABSORBERS:
        if tunnelled < bound:
            out[layout.outward] = float(turning + waves * wavelength)
            return Box(**out, turn=turn)
    return Box(**out)


def find_seeds(
    layout: Layout,
    omega: float,
    count: int,
    cutoff: float,
    refinement: int = 4,
) -> list[Seed]:
    """Candidates for guided modes on one coarse grid, highest index first.

    Modes of the numerical box lie below the cut-off; those within the coarse grid's
    error below it are kept for the ladder to decide.
    """
    indices = layout.indices(omega)
    top = float(indices.max())
    if top <= cutoff:
        return []
    k0 = omega / C_UM_PER_PS
    finer = layout.finer(omega, cutoff)
    slack = COARSE_SLACK * (top - cutoff)
    reach = cutoff + max(slack, 2e-3)
    if layout.bend_radius_um is None:
        box = Box(
            **{
                side: min(MARGIN_DECAYS / decay_constant(omega, reach, cutoff), WIDEST_BOX_UM)
                for side in layout.open_sides()
            }
        )
    else:
        middle = 0.5 * (cutoff + top)
        box = box_for(layout, side_backgrounds(layout, omega), omega, middle)
    grid = layout.grid(box, refinement, finer)
    permittivity = layout.permittivity(omega, 0)[:, 0]
    # in a bend a mode may hug the outer wall, with an index above the core's own
    crest = top * (1.0 + layout.across.walls[-1] / abs(layout.bend_radius_um or np.inf))
    shift = (k0 * crest) ** 2
    seeds = []
    spare = SPARE_BENT if box.turn else SPARE
    for boundary in layout.parities():
        operators = layout.operators(grid, boundary)
        pencil = Pencil(operators, k0, permittivity)
        inner = layout.inner_cells(grid)
        for mode in nearest_modes(pencil, pencil.factorise(shift), shift, count + spare):
            seed = make_seed(operators, mode, k0, boundary, refinement, finer)
            share = field_share(operators, mode.right, inner)
            if box.turn and share < LEAST_BENT_SHARE:
                continue  # a wave of the absorbing region
            if seed.n_eff > (cutoff - slack if share > LEAST_INNER_SHARE else cutoff):
                seeds.append(_thinned(layout, omega, seed))
    return sorted(seeds, key=lambda s: -s.n_eff)
