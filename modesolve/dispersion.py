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
from dataclasses import replace
from functools import partial
from typing import Any

import numpy as np

from materials.common import series
from materials.common.alternates import Alternate
from materials.common.constants import (
    C_UM_PER_PS,
    PER_UM_TO_PER_KM,
    omega_from_um,
    um_from_omega,
)
from materials.common.errors import (
    NoGuidedMode,
    NotConverged,
    OutOfRange,
    OutsideMaterialRange,
)
from materials.common.results import (
    make_provenance,
)
from modesolve.band import Band, BandFunction, leja_nodes
from modesolve.cross_section import CrossSection
from modesolve.curve import CurveReport, DispersionCurve
from modesolve.layout import Layout
from modesolve.maps import Box
from modesolve.mode import section_notes
from modesolve.refine import LADDER, Resolved, refine
from modesolve.scan import check_core, checked_wavelength, find_labelled
from modesolve.seeds import cutoff_index, near_cutoff

__all__ = ["dispersion"]

#: Least width of the band that nodes are laid over, as a share of the frequency.
NARROWEST_SHARE = 0.04

#: Fewest and most nodes of a curve.
FEWEST_NODES, MOST_NODES = 3, 9

#: Most coefficients of an interpolant. Beyond, the highest derivatives are left out: they
#: are the noisiest, and nodes close together multiply their noise.
MOST_COEFFICIENTS = 25

#: Two interpolants, from full series and from series an order shorter, may differ by so
#: many of the grids' bars before a node is added; the share of their difference that goes
#: into the bar. The true error was 0.001 to 0.6 of the difference over a dozen curves.
INTERPOLATION_BARS, INTERPOLATION_SHARE = 1.2, 0.6

#: Points at which two interpolants are compared.
CHECK_POINTS = 201


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
    check_core(layout, omega_from_um(reference))
    # the search only has to tell the modes apart: few grids and a short series will do
    start = find_labelled(layout, omega_from_um(reference), mode, ladder[:4], order=1)
    build = _Build(layout, _solved_band(layout, band), start, ladder, progress)
    build.run()
    return build.curve(section, mode, reference, band, started)


def _solved_band(layout: Layout, band: Band) -> Band:
    """The band that nodes are laid over: a narrow one is widened.

    Derivatives of an interpolant on nodes a fraction f of the frequency apart carry the
    noise of the nodes over f squared; where a medium's table ends, the band stays.
    """
    least = 0.5 * NARROWEST_SHARE * band.centre
    if band.half_width >= least:
        return band
    wide = Band(band.centre - least, band.centre + least)
    try:
        for end in (wide.low, wide.high):
            layout.permittivity(end, 0)
    except OutsideMaterialRange:
        return band
    return wide


def _checked_band(from_um: float, to_um: float) -> Band:
    short, long = sorted(
        (checked_wavelength(from_um, "from_um"), checked_wavelength(to_um, "to_um"))
    )
    if long / short < 1.0 + 1e-6:
        raise OutOfRange(f"band {short:g} to {long:g} um: the ends must differ; widen the band")
    return Band(omega_from_um(long), omega_from_um(short))


class _Build:
    """A curve while its nodes are being added."""

    def __init__(
        self,
        layout: Layout,
        band: Band,
        start: Resolved,
        ladder: tuple[int, ...],
        progress: Callable[[int, str], None] | None,
    ) -> None:
        self.layout = layout
        self.band = band
        self.ladder = ladder
        self.progress = progress
        self.start = start
        self.box: Box | None = None
        self.nodes: list[float] = []
        self.resolved: list[Resolved] = []
        self.held_out = (np.nan, np.nan)

    def run(self) -> None:
        """Add nodes until interpolation no longer matters beside the grids' error."""
        for t in leja_nodes()[:MOST_NODES]:
            node = self._solve(float(self.band.frequency(t)))
            if len(self.nodes) >= FEWEST_NODES:
                self.held_out = self._surprise(node)
            self.box = node.report.box
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
        seed = replace(nearest.seed, n_eff=n_eff)
        try:
            return refine(self.layout, omega, seed, self.ladder, box=self.box)
        except (NoGuidedMode, NotConverged) as exc:
            where = f"the mode can not be followed to {um_from_omega(omega):.4f} um"
            cutoff = cutoff_index(self.layout, omega)
            if near_cutoff(self.layout, omega, n_eff, cutoff):
                raise NoGuidedMode(
                    f"{where}: its index comes down to the cut-off {cutoff:.4f} there "
                    f"(last solved at {um_from_omega(nearest.omega):.4f} um); shorten the band"
                ) from exc
            raise type(exc)(f"{where}: {exc.args[0]}") from exc

    def _function(self, values: list[dict], key: str, shorter: int) -> BandFunction:
        orders = max(2, min(values[0][key].size, MOST_COEFFICIENTS // len(self.nodes))) - shorter
        taylor = np.array([v[key][:orders] for v in values])
        return BandFunction.from_series(self.band, tuple(self.nodes), taylor)

    def _functions(self, values: list[dict], shorter: int = 0) -> dict[str, BandFunction]:
        """Every function of the curve, from series ``shorter`` orders shorter than there are."""
        with_index = [
            {**v, "n_eff": _index_series(r, v)} for r, v in zip(self.resolved, values, strict=True)
        ]
        keys = [k for k in with_index[0] if k != "beta"]
        return {k: self._function(with_index, k, shorter) for k in keys}

    def _values(self) -> list[dict]:
        return [r.values for r in self.resolved]

    def _settled(self) -> bool:
        omega = self.band.frequency(np.linspace(-1.0, 1.0, CHECK_POINTS))
        full, short = (_index_figures(self._index(shorter), omega) for shorter in (0, 1))
        gaps = np.max(np.abs(full - short), axis=1)
        bars = [r.bar(partial(_node_figures, r.omega)) for r in self.resolved]
        return bool(np.all(gaps <= INTERPOLATION_BARS * np.max(bars, axis=0)))

    def _surprise(self, node: Resolved) -> tuple[float, float]:
        """What the curve so far misses at a node that it has not seen."""
        told = _index_figures(self._index(0), node.omega)
        miss = np.abs(told - _node_figures(node.omega, node.values))
        return float(miss[0]), float(miss[1] / C_UM_PER_PS * PER_UM_TO_PER_KM)

    def _index(self, shorter: int) -> BandFunction:
        return self._functions(self._values(), shorter)["n_eff"]

    def curve(
        self,
        section: CrossSection,
        mode: str,
        reference_um: float,
        band: Band,
        started: float,
    ) -> DispersionCurve:
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
        made = partial(
            DispersionCurve,
            mode=mode,
            band=band,
            section=section,
            reference_um=reference_um,
            report=report,
        )

        versions = []
        for i, first in enumerate(self.resolved[0].alternates):
            values = [r.alternates[i].version for r in self.resolved]
            versions.append(first._replace(version=made(functions=self._functions(values))))
        shorter = made(functions=self._functions(self._values(), 1))
        versions.append(Alternate("interpolation", INTERPOLATION_SHARE, shorter))
        return made(
            functions=self._functions(self._values()),
            alternates=tuple(versions),
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


def _node_figures(omega: float, values: dict[str, np.ndarray]) -> np.ndarray:
    """n_eff and c beta2 of a node."""
    beta = np.real(values["beta"])
    return np.array([C_UM_PER_PS * beta[0] / omega, C_UM_PER_PS * 2.0 * beta[2]])


def _index_figures(index: BandFunction, omega: Any) -> np.ndarray:
    """n_eff and c beta2 = omega n'' + 2 n' of an index function."""
    return np.array([index(omega), omega * index(omega, 2) + 2.0 * index(omega, 1)])
