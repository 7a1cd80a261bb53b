"""The ladder of grids: one mode to extrapolated accuracy, with its error bar.

With graded walls every quantity of a mode is a clean series in 1/m^2, m the refinement.
Neville's scheme on the grids m = 3, 4, 5, 6 takes out its first three terms. The changes
against the same scheme a grid lower, m = 2, 3, 4, 5, and against one with a grid less,
m = 4, 5, 6, bound the error of the result; the effect of the box's outer walls, seen by turning them from electric to magnetic on one
grid, and a rounding floor are added. These changed versions of a mode are kept
as alternates, so that the bar of any derived figure follows by computing it from them.

References
----------
L. F. Richardson, Phil. Trans. R. Soc. A 226, 299 (1927): extrapolation to zero cell size.
J. Stoer and R. Bulirsch, Introduction to Numerical Analysis, section 3.5: Neville's scheme.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np

from materials.common import series
from materials.common.constants import C_UM_PER_PS
from materials.common.errors import InputError, NoGuidedMode, NotConverged, TooCloseToCutoff
from modesolve.eigen import Pencil, RawMode, nearest_modes, polish
from modesolve.grid import Grid, Margins
from modesolve.integrals import mode_series
from modesolve.jets import Jet, mode_jet
from modesolve.layout import Layout, decay_constant
from modesolve.operators import Operators, Walls

__all__ = ["LADDER", "Resolved", "Seed", "SolveReport", "find_seeds", "refine", "solve_level"]

#: Refinements of the default ladder: all but the first give the value, the first only
#: serves the error bar.
LADDER = (2, 3, 4, 5, 6)

#: Order of the frequency series.
ORDER = 4

#: Margins in decay lengths of the field, and the widest allowed, um.
MARGIN_DECAYS = 11.0
WIDEST_MARGIN_UM = 50.0
MOST_MARGIN_DECAYS = 30.0

#: Share of each of the ladder's two changes that goes into the error bar, by how many
#: media meet in a corner: the more, the slower the last term left. Calibrated on 80 modes
#: (11 quantities each) of nitride and silicon guides against ladders up to m = 14: 97 % of
#: the errors lie inside their bars, 61 % of the bars are below thirty errors.
BAR_SHARES = {1: 0.2, 2: 0.4, 3: 0.8, 4: 0.8}

#: Place in the ladder of the grid on which the outer walls are turned.
WALL_LEVEL = 2

#: Relative rounding floor of beta; order k of its series is less exact by (4/omega)^k.
ROUNDING = 2e-12

#: Modes sought near the shift and Krylov basis, widened until the mode is recognised. The
#: shift is so close that the first search takes nine solves.
SEARCHES = ((1, 8), (4, 20), (16, 40))

#: A shift lies this factor above the eigenvalue expected.
ABOVE = 1.0 + 1e-4

#: Least overlap of a mode with itself on another grid or at another frequency.
LEAST_OVERLAP = 0.7


@dataclass(frozen=True, slots=True, eq=False)
class Seed:
    """A mode as first seen: enough to find it again on any grid.

    Attributes
    ----------
    n_eff : float
        Estimate of the effective index.
    walls : Walls
        The parity it belongs to.
    fingerprint : ndarray
        Transverse field on the blocks of the unit grid, normalised.
    te_fraction : float
    """

    n_eff: float
    walls: Walls
    fingerprint: np.ndarray
    te_fraction: float


@dataclass(frozen=True, slots=True)
class SolveReport:
    """What a solve cost and how well it closed."""

    ladder: tuple[int, ...]
    unknowns: int
    factorisations: int
    residual: float
    jet_residual: float
    margins: Margins
    truncation: float
    seconds: float


@dataclass(frozen=True, slots=True, eq=False)
class Alternate:
    """What a mode's series would be under one change that its error bar stands for.

    The error bar of any figure F derived from a mode, or from a curve of modes, is the sum
    over its alternates of ``weight`` times |F(alternate) - F|.
    """

    name: str
    weight: float
    values: dict[str, np.ndarray]


@dataclass(frozen=True, slots=True, eq=False)
class Resolved:
    """Extrapolated frequency series of a mode with their error bars.

    Attributes
    ----------
    omega : float, rad/ps
    values : dict of str to ndarray, shape (order + 1,)
        Taylor coefficients of every quantity.
    alternates : tuple of Alternate
        The same quantities as they would be a grid lower, with other outer walls, with
        a fitted medium's constant moved by one standard deviation.
    seed : Seed
        With the resolved index, to find the mode again elsewhere.
    finest : tuple of (Operators, Jet)
        Fields of the finest grid.
    """

    omega: float
    values: dict[str, np.ndarray]
    alternates: tuple[Alternate, ...]
    seed: Seed
    finest: tuple[Operators, Jet]
    report: SolveReport

    def bar(self, quantity: Callable[[dict[str, np.ndarray]], np.ndarray]) -> np.ndarray:
        """Error bar of anything computed from ``values``.

        The sum over the alternates of weight times |quantity(alternate) - quantity(values)|,
        and the rounding floor where the quantity is a series of its own.
        """
        value = quantity(self.values)
        return sum(a.weight * np.abs(quantity(a.values) - value) for a in self.alternates)


def neville(ladder: tuple[int, ...], values: list[np.ndarray]) -> np.ndarray:
    """Extrapolate values on grids m to infinite m, as a polynomial in 1/m^2."""
    steps = [1.0 / m**2 for m in ladder]
    table = [np.asarray(v) for v in values]
    for k in range(1, len(table)):
        for i in range(len(table) - k):
            weight = steps[i] / (steps[i] - steps[i + k])
            table[i] = weight * table[i + 1] + (1.0 - weight) * table[i]
    return table[0]


def fingerprint(operators: Operators, right: np.ndarray, refinement: int) -> np.ndarray:
    """Transverse field averaged over the blocks of the unit grid, unit norm.

    Grids of one layout have the same logical segments, so a block of m x m cells of the
    grid m covers the same logical square on each of them; a mode is recognised by it.
    """
    topology, metric = operators.topology, operators.grid.metric
    u_x, u_y, v_x, v_y = metric.inverse
    e_u, e_v = topology.to_quarters(right)
    area = np.sqrt(np.abs(metric.det))
    parts = []
    n_u, n_v = topology.shape
    rows = _blocks(n_u, refinement)
    columns = _blocks(n_v, refinement)
    for component in (u_x * e_u + v_x * e_v, u_y * e_u + v_y * e_v):
        cells = (component * area).sum(axis=(2, 3))
        parts.append(np.add.reduceat(np.add.reduceat(cells, rows, axis=0), columns, axis=1))
    out = np.stack(parts)
    return out / np.linalg.norm(out)


def _blocks(cells: int, refinement: int) -> np.ndarray:
    return np.arange(0, cells, refinement) if cells >= refinement else np.array([0])


def overlap(a: np.ndarray, b: np.ndarray) -> float:
    """Overlap of two fingerprints, 0 to 1."""
    return float(abs(np.vdot(a, b)))


def cutoff_index(layout: Layout, omega: float) -> float:
    """Index below which a mode is no longer guided: the highest of every open side.

    Beside the core this is a slab mode's index where the stack there guides one.
    """
    return max(_backgrounds(layout, omega).values(), default=0.0)


def _backgrounds(layout: Layout, omega: float) -> dict[str, float]:
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
    for walls in (Walls(), Walls(left="magnetic", right="magnetic")):
        polarised = replace(stack, walls=walls)
        seeds = find_seeds(polarised, omega, 1, background)
        if seeds:
            try:
                resolved = refine(polarised, omega, seeds[0], order=0)
            except NoGuidedMode:
                continue
            best = max(best, float(resolved.values["beta"][0]) * C_UM_PER_PS / omega)
    return best


def margins_for(backgrounds: dict[str, float], omega: float, n_eff: float) -> Margins:
    """Margins wide enough for the field of index ``n_eff`` to die away.

    Raises
    ------
    TooCloseToCutoff
        When a margin would exceed ``WIDEST_MARGIN_UM``.
    """
    out = {}
    for side, background in backgrounds.items():
        gamma = decay_constant(omega, n_eff, background)
        if gamma * WIDEST_MARGIN_UM < MARGIN_DECAYS:
            raise TooCloseToCutoff(
                f"index {n_eff:.6f} is too close to cut-off: to the {side} the field decays "
                f"towards index {background:.6f} over more than "
                f"{WIDEST_MARGIN_UM / MARGIN_DECAYS:.1f} um; widen or thicken the core, "
                "or use a shorter wavelength"
            )
        out[side] = MARGIN_DECAYS / gamma
    return Margins(**out)


def find_seeds(
    layout: Layout,
    omega: float,
    count: int,
    cutoff: float,
    refinement: int = 3,
    floor: float | None = None,
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
    slack = 0.03 * (top - cutoff)
    reach = cutoff + max(slack, 2e-3)
    margins = Margins(
        **{
            side: min(MARGIN_DECAYS / decay_constant(omega, reach, cutoff), WIDEST_MARGIN_UM)
            for side in layout.open_sides()
        }
    )
    grid = layout.grid(margins, refinement)
    permittivity = layout.permittivity(omega, 0)[:, 0]
    shift = (k0 * top) ** 2
    seeds = []
    for walls in layout.parities():
        operators = layout.operators(grid, walls)
        pencil = Pencil(operators, k0, permittivity)
        found = nearest_modes(pencil, pencil.factorise(shift), shift, count + 3)
        seeds += [_seed(operators, mode, k0, walls, refinement) for mode in found]
    seeds.sort(key=lambda s: -s.n_eff)
    return [s for s in seeds if s.n_eff > cutoff - slack]


def material_alternates(
    layout: Layout, omega: float, values: dict[str, np.ndarray]
) -> list[Alternate]:
    """One alternate for every independent constant of a fitted medium, one sigma off.

    First order: delta beta = k0 sum over media of (dn_eff/dn) delta n, all as series, so
    that the derivatives of beta vary along. The areas are left as they are.
    """
    order = values["beta"].size - 1
    k0 = series.variable(omega, order) / C_UM_PER_PS
    out = []
    for i, medium in enumerate(layout.media):
        index = series.sqrt(medium.permittivity_series(omega, order))
        scale = series.multiply(k0, series.divide(values[f"weight_{i}"], 2.0 * index))
        for j, change in enumerate(medium.variation_series(omega, order)):
            moved = {**values, "beta": values["beta"] + series.multiply(scale, change)}
            out.append(Alternate(f"{medium.key}, constant {j + 1}", 1.0, moved))
    return out


def _seed(
    operators: Operators, mode: RawMode, k0: float, walls: Walls, refinement: int
) -> Seed:
    print_ = fingerprint(operators, mode.right, refinement)
    share = float(np.sum(np.abs(print_[0]) ** 2))
    n_eff = float(np.sqrt(max(np.real(mode.eigenvalue), 0.0)) / k0)
    return Seed(n_eff, walls, print_, share)


def _recognise(
    pencil: Pencil, shift: float, seed: Seed, refinement: int
) -> tuple[RawMode, object, list[RawMode]]:
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


def refine(
    layout: Layout,
    omega: float,
    seed: Seed,
    ladder: tuple[int, ...] = LADDER,
    order: int = ORDER,
    margins: Margins | None = None,
) -> Resolved:
    """Resolve one mode on a ladder of grids.

    Parameters
    ----------
    layout : Layout
    omega : float, rad/ps
    seed : Seed
    ladder : tuple of int
        Refinements, rising, at least four: the value is extrapolated from all but the
        first; the first serves the error bar.
    order : int
        Order of the frequency series.
    margins : Margins, optional
        Box to solve in; sized from the decay of the field by default. Solves that are to
        be interpolated share one box, so that their errors are one smooth function; that
        a box is too small for one of them shows in the error bar.

    Raises
    ------
    TooCloseToCutoff
        When the field decays too slowly for the margins allowed.
    NoGuidedMode
        When the resolved index falls below the cut-off.
    NotConverged
        When a residual stays too large or the mode is not recognised.
    """
    if len(ladder) < 4 or any(a >= b for a, b in pairwise(ladder)):
        raise InputError(f"ladder = {ladder}: give at least four rising refinements")
    started = time.perf_counter()
    climb = _Climb(layout, omega, seed, order, margins)
    for refinement in ladder:
        climb.step(refinement)
    return climb.result(ladder, started)


def solve_level(
    layout: Layout,
    omega: float,
    seed: Seed,
    refinement: int,
    margins: Margins | None = None,
    order: int = ORDER,
) -> Jet:
    """One mode on one grid, without extrapolation: for order tests and cost figures."""
    climb = _Climb(layout, omega, seed, order, margins)
    climb.step(refinement)
    return climb.finest[1]


class _Climb:
    """State of one climb of the ladder."""

    def __init__(
        self, layout: Layout, omega: float, seed: Seed, order: int, margins: Margins | None
    ) -> None:
        self.layout = layout
        self.omega = omega
        self.k0 = omega / C_UM_PER_PS
        self.seed = seed
        self.backgrounds = _backgrounds(layout, omega)
        self.cutoff = max(self.backgrounds.values(), default=0.0)
        self.permittivity = layout.permittivity(omega, order)
        self.margins = margins
        self.levels: list[dict[str, np.ndarray]] = []
        self.refinements: list[int] = []
        self.finest: tuple[Operators, Jet] | None = None
        self.unknowns = self.factorisations = 0
        self.residual = self.jet_residual = 0.0

    def step(self, refinement: int) -> None:
        """Solve one more grid; the first one also settles the margins."""
        if self.margins is None:
            self.margins = self._settle(refinement)
        shift = self._predicted(refinement)
        self.levels.append(self._solve(refinement, shift, self.seed.walls, keep=True))
        self.refinements.append(refinement)

    def _settle(self, refinement: int) -> Margins:
        """Margins from the decay at the index that the coarsest grid itself gives."""
        for _ in range(2):
            least = self.cutoff + 1.2e-3
            margins = margins_for(self.backgrounds, self.omega, max(self.seed.n_eff, least))
            pencil = self._pencil(margins, refinement, self.seed.walls)
            shift = (self.k0 * max(self.seed.n_eff, least)) ** 2 * ABOVE
            mode, _, _ = _recognise(pencil, shift, self.seed, refinement)
            self.factorisations += pencil.factorisations
            self.seed = _seed(pencil.operators, mode, self.k0, self.seed.walls, refinement)
        return margins_for(
            self.backgrounds, self.omega, max(self.seed.n_eff, self.cutoff + 1.2e-3)
        )

    def _pencil(self, margins: Margins, refinement: int, walls: Walls) -> Pencil:
        grid: Grid = self.layout.grid(margins, refinement)
        operators = self.layout.operators(grid, walls)
        return Pencil(operators, self.k0, self.permittivity[:, 0])

    def _predicted(self, refinement: int) -> float:
        """A shift close above the eigenvalue expected on the next grid."""
        if not self.levels:
            squared = (self.k0 * self.seed.n_eff) ** 2
        else:
            squares = [float(np.real(level["beta"][0])) ** 2 for level in self.levels]
            squared = squares[-1]
            if len(squares) > 1:
                a, b = (1.0 / m**2 for m in self.refinements[-2:])
                slope = (squares[-1] - squares[-2]) / (b - a)
                squared = squares[-1] + slope * (1.0 / refinement**2 - b)
        return squared * ABOVE

    def _solve(self, refinement: int, shift: float, walls: Walls, keep: bool) -> dict:
        pencil = self._pencil(self.margins, refinement, walls)
        mode, factorisation, others = _recognise(pencil, shift, self.seed, refinement)
        mode = polish(pencil, factorisation, mode)
        allowed = pencil.residual_limit(mode.eigenvalue)
        if mode.residual > allowed:
            raise NotConverged(
                f"eigenpair residual {mode.residual:.1e} on the grid m = {refinement} "
                f"(allowed {allowed:.0e}); change the wavelength or geometry slightly"
            )
        jet = self._jet(pencil, factorisation, mode, shift, others)
        self.factorisations += pencil.factorisations
        self.residual = max(self.residual, mode.residual)
        self.jet_residual = max(self.jet_residual, jet.residual)
        if keep:
            self.unknowns += pencil.matrix.shape[0]
            self.finest = (pencil.operators, jet)
            # the look of the mode here and now, for the next grid
            self.seed = _seed(pencil.operators, mode, self.k0, walls, refinement)
        return mode_series(self.layout, pencil.operators, jet)

    def _jet(self, pencil, factorisation, mode, shift, others) -> Jet:
        """Frequency series; where another mode is too near for the iteration, name it first."""
        try:
            return mode_jet(pencil, factorisation, mode, self.omega, self.permittivity, others)
        except NotConverged:
            count, basis = SEARCHES[1]
            near = nearest_modes(pencil, factorisation, shift, count, basis=basis)
            near.sort(key=lambda m: abs(m.eigenvalue - mode.eigenvalue))
            return mode_jet(
                pencil, factorisation, mode, self.omega, self.permittivity, near[1:]
            )

    def _wall_step(self) -> dict[str, np.ndarray]:
        """What changes when the outer walls turn from electric to magnetic.

        Seen on the third grid: coarser ones carry the field so badly across the last,
        wide cells that they overstate it tens of times.
        """
        level, refinement = self.levels[WALL_LEVEL], self.refinements[WALL_LEVEL]
        sides = self.layout.open_sides()
        if not sides:
            return {key: np.zeros_like(value) for key, value in level.items()}
        walls = replace(self.seed.walls, **dict.fromkeys(sides, "magnetic"))
        shift = float(np.real(level["beta"][0])) ** 2 * ABOVE
        other = self._solve(refinement, shift, walls, keep=False)
        return {key: other[key] - value for key, value in level.items()}

    def result(self, ladder: tuple[int, ...], started: float) -> Resolved:
        """Extrapolate, with bars; refuse a mode that is not guided after all."""
        keys = self.levels[0].keys()
        levels = self.levels
        values = {k: neville(ladder[1:], [level[k] for level in levels[1:]]) for k in keys}
        lower = {k: neville(ladder[:-1], [level[k] for level in levels[:-1]]) for k in keys}
        fewer = {k: neville(ladder[2:], [level[k] for level in levels[2:]]) for k in keys}
        n_eff = float(np.real(values["beta"][0])) / self.k0
        if n_eff <= self.cutoff:
            raise NoGuidedMode(
                f"the mode near index {n_eff:.6f} lies below the cut-off {self.cutoff:.6f}"
            )
        step = self._wall_step()
        walls = {k: values[k] + step[k] for k in keys}
        report = SolveReport(
            ladder,
            self.unknowns,
            self.factorisations,
            self.residual,
            self.jet_residual,
            self.margins,
            0.5 * float(abs(step["beta"][0])) / self.k0,
            time.perf_counter() - started,
        )
        share = BAR_SHARES[self.layout.corner_media()]
        alternates = (
            Alternate("ladder a grid lower", share, lower),
            Alternate("ladder with a grid less", share, fewer),
            # the true error of an electric wall is half the step to a magnetic one
            Alternate("outer walls", 0.5, walls),
            Alternate("rounding", 1.0, self._rounded(values)),
            *material_alternates(self.layout, self.omega, values),
        )
        seed = replace(self.seed, n_eff=n_eff)
        return Resolved(self.omega, values, alternates, seed, self.finest, report)

    def _rounded(self, values: dict[str, np.ndarray]) -> dict[str, np.ndarray]:
        """Beta off by its rounding; each order of the series loses a factor 4/omega."""
        beta = values["beta"]
        floor = ROUNDING * abs(beta[0]) * (4.0 / self.omega) ** np.arange(beta.size)
        return {**values, "beta": beta + floor}
