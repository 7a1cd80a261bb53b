"""A dispersion curve: one mode over a band from a handful of frequency series.

Nodes are added one by one (ends, centre, widest gaps) until the curve and the one built
from series an order shorter agree within the grids' own error bar. All nodes share one
box, sized at the long-wavelength end where the field reaches out furthest, so that the
grids' error is itself a smooth function of frequency. Each node follows the mode by
overlap with its nearest solved neighbour, so a label stays with its mode.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass, field
from functools import partial
from typing import Any

import numpy as np

from materials.common.constants import (
    C_UM_PER_PS,
    PER_UM_TO_PER_KM,
    dispersion_from_beta2,
    omega_from_um,
    um_from_omega,
)
from materials.common import series
from materials.common.errors import (
    InputError,
    NoGuidedMode,
    NotConverged,
    OutOfRange,
    UnknownName,
)
from materials.common.results import (
    ErrorBars,
    Provenance,
    Result,
    Variable,
    make_provenance,
)
from modesolve.band import Band, BandFunction, leja_nodes
from modesolve.cross_section import CrossSection
from modesolve.grid import Margins
from modesolve.layout import Layout
from modesolve.mode import (
    check_core,
    checked_wavelength,
    label_modes,
    near_cutoff,
    resolve_modes,
    section_notes,
)
from modesolve.refine import LADDER, Alternate, Resolved, Seed, cutoff_index, find_seeds, refine

__all__ = ["CurveReport", "DispersionCurve", "dispersion"]

#: Fewest and most nodes of a curve.
FEWEST_NODES, MOST_NODES = 3, 9

#: Share of the grids' bar that the interpolation error may reach before a node is added.
INTERPOLATION_SHARE = 0.5

#: Points at which two interpolants are compared, and points of a written table.
CHECK_POINTS, TABLE_POINTS = 201, 201

#: Most modes searched for a label.
MOST_MODES = 40

#: Methods of a curve that give one number a wavelength: long name, unit.
COLUMNS = {
    "n_eff": ("effective index", "1"),
    "n_group": ("group index", "1"),
    "beta2_ps2_per_km": ("group-velocity dispersion", "ps2/km"),
    "beta3_ps3_per_km": ("third-order dispersion", "ps3/km"),
    "beta4_ps4_per_km": ("fourth-order dispersion", "ps4/km"),
    "dispersion_ps_per_nm_km": ("dispersion D", "ps/(nm km)"),
    "effective_area_um2": ("effective area", "um2"),
    "intensity_area_um2": ("intensity-form area", "um2"),
    "power_area_um2": ("power-form area", "um2"),
    "gamma_per_w_m": ("nonlinear coefficient", "1/(W m)"),
    "te_fraction": ("TE fraction", "1"),
    "core_power_fraction": ("power in the core", "1"),
}


@dataclass(frozen=True, slots=True)
class CurveReport:
    """What a curve cost and how well it closed.

    ``held_out_n_eff`` and ``held_out_beta2_ps2_per_km`` are the largest differences
    between the last node's solution and what the curve without it foretold there.
    """

    nodes_um: tuple[float, ...]
    factorisations: int
    unknowns: int
    residual: float
    held_out_n_eff: float
    held_out_beta2_ps2_per_km: float
    seconds: float


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class DispersionCurve(Result):
    """Effective index, dispersion, areas and gamma of one mode over a band.

    The methods take vacuum wavelengths in um, scalars or arrays, and raise `OutOfRange`
    outside the band. ``error`` has the same keys as the methods; each entry is a
    function of wavelength that gives the absolute error bar.

    Attributes
    ----------
    mode : str
        Label, given at ``reference_um``; it stays with the mode.
    band_um : tuple of float
        Shortest and longest wavelength.
    alternates : tuple of (name, weight, DispersionCurve)
        The curve under each change its error bar stands for. The bar of any figure F
        derived from a curve is the sum of weight times |F(alternate) - F(curve)|.
    """

    mode: str
    band: Band
    functions: dict[str, BandFunction]
    section: CrossSection
    reference_um: float
    report: CurveReport
    alternates: tuple[tuple[str, float, DispersionCurve], ...] = ()
    notes: tuple[str, ...] = ()
    provenance: Provenance | None = None
    label: str = field(default="", kw_only=True)

    @property
    def inputs(self) -> dict[str, Any]:
        """What was asked for, as plain values."""
        short, long = self.band_um
        return {
            **self.section.describe(),
            "mode": self.mode,
            "band_um": [short, long],
            "reference_um": self.reference_um,
        }

    @property
    def band_um(self) -> tuple[float, float]:
        """Shortest and longest wavelength, um."""
        return um_from_omega(self.band.high), um_from_omega(self.band.low)

    @property
    def band_rad_per_ps(self) -> tuple[float, float]:
        """Lowest and highest angular frequency, rad/ps."""
        return self.band.low, self.band.high

    @property
    def bend_radius_um(self) -> float | None:
        """Bend radius of the section the curve was solved for."""
        return self.section.bend_radius_um

    @property
    def error(self) -> ErrorBars:
        """Error bars by method name, as functions of wavelength in um."""
        bars: dict[str, Any] = {key: partial(self._bar, key) for key in COLUMNS}
        bars["zero_dispersion_um"] = self._zero_dispersion_bar
        return ErrorBars(bars)

    def beta_rad_per_um(self, omega_rad_per_ps, derivative: int = 0):
        """Propagation constant, or its k-th derivative, in rad/um ps^k; NaN outside the band.

        beta = n omega/c, so beta^(k) = (omega n^(k) + k n^(k-1))/c, exact for the curve.
        """
        omega = np.asarray(omega_rad_per_ps, dtype=float)
        n = self.functions["n_eff"]
        value = omega * n(omega, derivative)
        if derivative:
            value = value + derivative * n(omega, derivative - 1)
        slack = 1e-12 * self.band.high
        inside = (omega >= self.band.low - slack) & (omega <= self.band.high + slack)
        return _like(omega, np.where(inside, value / C_UM_PER_PS, np.nan))

    def n_eff(self, wavelength_um):
        """Effective index."""
        return self._direct("n_eff", wavelength_um)

    def n_group(self, wavelength_um):
        """Group index, c dbeta/domega."""
        return C_UM_PER_PS * self._beta(wavelength_um, 1)

    def beta2_ps2_per_km(self, wavelength_um):
        """Group-velocity dispersion, ps2/km."""
        return PER_UM_TO_PER_KM * self._beta(wavelength_um, 2)

    def beta3_ps3_per_km(self, wavelength_um):
        """Third-order dispersion, ps3/km."""
        return PER_UM_TO_PER_KM * self._beta(wavelength_um, 3)

    def beta4_ps4_per_km(self, wavelength_um):
        """Fourth-order dispersion, ps4/km."""
        return PER_UM_TO_PER_KM * self._beta(wavelength_um, 4)

    def dispersion_ps_per_nm_km(self, wavelength_um):
        """Dispersion D = -(2 pi c/lambda^2) beta2, ps/(nm km)."""
        wavelength = np.asarray(wavelength_um, dtype=float)
        return _like(
            wavelength, dispersion_from_beta2(self.beta2_ps2_per_km(wavelength), wavelength)
        )

    def effective_area_um2(self, wavelength_um):
        """Nonlinear effective area 2 pi n2_core/(lambda gamma), um2."""
        return self._direct("effective_area_um2", wavelength_um)

    def intensity_area_um2(self, wavelength_um):
        """Area in intensity form, (int |e|^2)^2 / int |e|^4, um2."""
        return self._direct("intensity_area_um2", wavelength_um)

    def power_area_um2(self, wavelength_um):
        """Area in power form, (int Sz)^2 / int Sz^2, um2."""
        return self._direct("power_area_um2", wavelength_um)

    def gamma_per_w_m(self, wavelength_um):
        """Nonlinear coefficient, 1/(W m); NaN where the core has no n2."""
        return self._direct("gamma_per_w_m", wavelength_um)

    def te_fraction(self, wavelength_um):
        """int |Ex|^2 over int (|Ex|^2 + |Ey|^2)."""
        return self._direct("te_fraction", wavelength_um)

    def core_power_fraction(self, wavelength_um):
        """Share of the power that flows in the core."""
        return self._direct("core_power_fraction", wavelength_um)

    def zero_dispersion_um(self) -> np.ndarray:
        """Wavelengths in the band where beta2 vanishes, rising; empty where it does not."""
        omega = self.band.frequency(np.linspace(1.0, -1.0, 2001))
        beta2 = self.beta_rad_per_um(omega, 2)
        roots = []
        for i in np.flatnonzero(np.sign(beta2[:-1]) * np.sign(beta2[1:]) < 0):
            roots.append(self._beta2_root(omega[i + 1], omega[i]))
        return um_from_omega(np.array(roots))

    def _beta2_root(self, low: float, high: float) -> float:
        from scipy.optimize import brentq

        return brentq(lambda w: float(self.beta_rad_per_um(w, 2)), low, high, xtol=1e-10)

    def _zero_dispersion_bar(self) -> np.ndarray:
        """Error bars of the zero-dispersion wavelengths: that of beta2 over its slope."""
        zeros = self.zero_dispersion_um()
        omega = omega_from_um(zeros)
        slope = PER_UM_TO_PER_KM * self.beta_rad_per_um(omega, 3) * omega / zeros
        return np.abs(self._bar("beta2_ps2_per_km", zeros) / slope)

    def _bar(self, key: str, wavelength_um):
        """Error bar of a method at wavelengths in um."""
        value = np.asarray(getattr(self, key)(wavelength_um))
        bar = np.zeros(value.shape)
        for _, weight, other in self.alternates:
            bar = bar + weight * np.abs(getattr(other, key)(wavelength_um) - value)
        return _like(value, bar)

    def _omega(self, wavelength_um) -> np.ndarray:
        wavelength = np.asarray(wavelength_um, dtype=float)
        short, long = self.band_um
        slack = 1e-9
        ok = (wavelength >= short * (1 - slack)) & (wavelength <= long * (1 + slack))
        if not np.all(ok):
            wrong = np.atleast_1d(wavelength)[~np.atleast_1d(ok)][0]
            raise OutOfRange(
                f"wavelength {wrong:g} um lies outside the solved band {short:g} to {long:g} um; "
                "solve the curve over a wider band"
            )
        return omega_from_um(wavelength)

    def _beta(self, wavelength_um, derivative: int):
        omega = self._omega(wavelength_um)
        clipped = np.clip(omega, self.band.low, self.band.high)
        return _like(omega, self.beta_rad_per_um(clipped, derivative))

    def _direct(self, key: str, wavelength_um):
        omega = self._omega(wavelength_um)
        return _like(omega, self.functions[key](omega))

    def variables(self) -> list[Variable]:
        """The curve as a table over the band, with error bars."""
        short, long = self.band_um
        wavelength = np.linspace(short, long, TABLE_POINTS)
        dims = ("wavelength_um",)
        out = [Variable("wavelength_um", wavelength, dims, "um", "vacuum wavelength", None)]
        for key, (long_name, unit) in COLUMNS.items():
            values = getattr(self, key)(wavelength)
            out.append(Variable(key, values, dims, unit, long_name, self._bar(key, wavelength)))
        return out


def _like(template, value):
    """Scalars in, scalars out."""
    return float(value) if np.ndim(template) == 0 else np.asarray(value)


def dispersion(
    section: CrossSection,
    from_um: float,
    to_um: float,
    mode: str = "TE0",
    *,
    reference_um: float | None = None,
    ladder: tuple[int, ...] = LADDER,
    progress: Callable[[int, str], None] | None = None,
) -> DispersionCurve:
    """Dispersion curve of one mode.

    Parameters
    ----------
    section : CrossSection
    from_um, to_um : float, um
        Ends of the band, in either order.
    mode : str
        "TE0", "TM0", "TE1" ..., the label at ``reference_um``.
    reference_um : float, um, optional
        Where the label holds; the middle of the band in frequency by default.
    ladder : tuple of int
        Refinements of the ladder of grids.
    progress : callable(count, text), optional
        Called after each node.

    Raises
    ------
    NoGuidedMode
        When the mode is cut off somewhere in the band; the message says where.
    UnknownName
        When ``mode`` is no label.
    OutsideMaterialRange
        When a medium's table does not cover the band.
    """
    started = time.perf_counter()
    band = _checked_band(from_um, to_um)
    centre = um_from_omega(band.centre)
    reference = centre if reference_um is None else checked_wavelength(reference_um, "reference_um")
    layout = section.layout()
    for end in (band.low, band.high):
        layout.permittivity(end, 0)  # a medium whose table ends inside the band speaks now
    start = find_mode(section, layout, omega_from_um(reference), mode, ladder)
    build = _Build(layout, band, start, ladder, progress)
    build.run()
    return build.curve(section, mode, reference, started)


def _checked_band(from_um: float, to_um: float) -> Band:
    short, long = sorted(
        (checked_wavelength(from_um, "from_um"), checked_wavelength(to_um, "to_um"))
    )
    if long / short < 1.0 + 1e-6:
        raise OutOfRange(f"band {short:g} to {long:g} um: the ends must differ; widen the band")
    return Band(omega_from_um(long), omega_from_um(short))


def find_mode(
    section: CrossSection, layout: Layout, omega: float, label: str, ladder: tuple[int, ...]
) -> Resolved:
    """The mode that carries ``label`` at ``omega``.

    Raises
    ------
    UnknownName
        When the text is no label.
    NoGuidedMode
        When no mode there carries it.
    """
    if label[:2] not in ("TE", "TM") or not label[2:].isdigit():
        raise UnknownName(f"mode = {label!r}: give a label such as TE0, TM0 or TE1")
    check_core(section, layout, omega)
    seeds = find_seeds(layout, omega, MOST_MODES // 4, cutoff_index(layout, omega))
    coarse = label_modes([s.te_fraction for s in seeds])
    count = coarse.index(label) + 1 if label in coarse else len(seeds) + 1
    labels: list[str] = []
    while count <= MOST_MODES:
        scan = resolve_modes(layout, omega, count, ladder)
        labels = label_modes([float(r.values["te_fraction"][0]) for r in scan.modes])
        if label in labels:
            return scan.modes[labels.index(label)]
        if len(scan.modes) < count:
            break
        count += 2
    raise NoGuidedMode(
        f"no guided mode {label} at {um_from_omega(omega):g} um: guided there "
        f"{'are ' + ', '.join(labels) if labels else 'is none'}; "
        "enlarge the core, shorten the wavelength or name another mode"
    )


class _Build:
    """A curve while its nodes are being added."""

    def __init__(self, layout, band, start: Resolved, ladder, progress) -> None:
        self.layout = layout
        self.band: Band = band
        self.ladder = ladder
        self.progress = progress
        self.start = start
        self.margins: Margins | None = None
        self.nodes: list[float] = []
        self.resolved: list[Resolved] = []
        self.held_out = (np.nan, np.nan)

    def run(self) -> None:
        """Add nodes until interpolation no longer matters beside the grids' error."""
        for t in leja_nodes()[:MOST_NODES]:
            node = self._solve(float(self.band.frequency(t)))
            if len(self.nodes) >= FEWEST_NODES:
                self.held_out = self._surprise(node)
            self.margins = node.report.margins
            self.nodes.append(t)
            self.resolved.append(node)
            if self.progress is not None:
                self.progress(len(self.nodes), f"{um_from_omega(node.omega):.4f} um")
            if len(self.nodes) >= FEWEST_NODES and self._settled():
                return

    def _solve(self, omega: float) -> Resolved:
        known = [self.start, *self.resolved]
        nearest = min(known, key=lambda r: abs(r.omega - omega))
        beta = float(np.real(series.evaluate(nearest.values["beta"], omega - nearest.omega)))
        top = float(self.layout.indices(omega).max())
        n_eff = min(beta * C_UM_PER_PS / omega, top)
        seed = Seed(n_eff, nearest.seed.walls, nearest.seed.fingerprint, nearest.seed.te_fraction)
        try:
            return refine(self.layout, omega, seed, self.ladder, margins=self.margins)
        except (NoGuidedMode, NotConverged) as exc:
            where = f"the mode can not be followed to {um_from_omega(omega):.4f} um"
            cutoff = cutoff_index(self.layout, omega)
            if near_cutoff(self.layout, omega, n_eff, cutoff):
                raise NoGuidedMode(
                    f"{where}: its index comes down to the cut-off {cutoff:.4f} there "
                    f"(last solved at {um_from_omega(nearest.omega):.4f} um); shorten the band"
                ) from exc
            raise type(exc)(f"{where}: {exc.args[0]}") from exc

    def _function(self, values: list[dict], key: str, orders: int | None = None) -> BandFunction:
        taylor = np.array([v[key][:orders] for v in values])
        return BandFunction.from_series(self.band, tuple(self.nodes), taylor)

    def _functions(self, values: list[dict], orders: int | None = None) -> dict[str, BandFunction]:
        with_index = [{**v, "n_eff": _index_series(r, v)} for r, v in zip(self.resolved, values, strict=True)]
        keys = [k for k in with_index[0] if k != "beta"]
        return {k: self._function(with_index, k, orders) for k in keys}

    def _values(self) -> list[dict]:
        return [r.values for r in self.resolved]

    def _gap(self, omega: np.ndarray, a: BandFunction, b: BandFunction) -> tuple[float, float]:
        """Largest differences of two index functions in n_eff and in omega n'' + 2 n' (c beta2)."""
        second = omega * (a(omega, 2) - b(omega, 2)) + 2.0 * (a(omega, 1) - b(omega, 1))
        return float(np.max(np.abs(a(omega) - b(omega)))), float(np.max(np.abs(second)))

    def _settled(self) -> bool:
        omega = self.band.frequency(np.linspace(-1.0, 1.0, CHECK_POINTS))
        full = self._functions(self._values())["n_eff"]
        short = self._functions(self._values(), -1)["n_eff"]
        n_gap, beta2_gap = self._gap(omega, full, short)
        allowed = np.max([r.bar(partial(_curve_figures, r.omega)) for r in self.resolved], axis=0)
        return n_gap <= INTERPOLATION_SHARE * allowed[0] and (
            beta2_gap <= INTERPOLATION_SHARE * allowed[1]
        )

    def _surprise(self, node: Resolved) -> tuple[float, float]:
        """What the curve so far misses at a node that it has not seen."""
        full = self._functions(self._values())["n_eff"]
        told = np.array([full(node.omega), node.omega * full(node.omega, 2) + 2 * full(node.omega, 1)])
        miss = np.abs(told - _curve_figures(node.omega, node.values))
        return float(miss[0]), float(miss[1] / C_UM_PER_PS * PER_UM_TO_PER_KM)

    def curve(self, section: CrossSection, mode: str, reference_um: float, started: float):
        """The finished curve with its alternates."""
        reports = [r.report for r in self.resolved]
        report = CurveReport(
            tuple(float(um_from_omega(r.omega)) for r in self.resolved),
            sum(r.factorisations for r in reports),
            sum(r.unknowns for r in reports),
            max(r.residual for r in reports),
            *self.held_out,
            time.perf_counter() - started,
        )
        keys = [m.key for m in self.layout.media]
        common = dict(mode=mode, band=self.band, section=section, reference_um=reference_um)

        def made(functions, **more) -> DispersionCurve:
            return DispersionCurve(**common, functions=functions, report=report, **more)

        alternates = [
            (a.name, a.weight, made(self._functions([r.alternates[i].values for r in self.resolved])))
            for i, a in enumerate(self.resolved[0].alternates)
        ]
        shorter = made(self._functions(self._values(), -1))
        alternates.append(("interpolation", 1.0, shorter))
        return made(
            self._functions(self._values()),
            alternates=tuple(alternates),
            notes=section_notes(self.layout),
            provenance=make_provenance(
                keys,
                f"ladder {':'.join(map(str, self.ladder))}, {report.unknowns} unknowns, "
                f"{len(self.nodes)} frequency nodes",
                seconds=report.seconds,
            ),
            label=mode,
        )


def _index_series(resolved: Resolved, values: dict[str, np.ndarray]) -> np.ndarray:
    """n_eff = c beta/omega as a series."""
    beta = np.real(values["beta"])
    omega = series.variable(resolved.omega, beta.size - 1)
    return C_UM_PER_PS * series.divide(beta, omega)


def _curve_figures(omega: float, values: dict[str, np.ndarray]) -> np.ndarray:
    """n_eff and c beta2 of a node."""
    beta = np.real(values["beta"])
    return np.array([C_UM_PER_PS * beta[0] / omega, C_UM_PER_PS * 2.0 * beta[2]])
