"""A design, run: modes, dispersion curve, channel and ring, then files and figures.

`run_design` computes and writes; `solve_design` computes only. Everything is written to a
staging folder that takes its place at the end, so an output folder is whole or absent.
"""

from __future__ import annotations

import os
import time
from collections.abc import Callable, Iterable
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any, TypeVar

import numpy as np

import materials
from materials.common.errors import DesignFileError
from materials.common.files import write_text
from materials.common.folders import whole_folder
from materials.common.results import FullResult, Provenance, make_provenance
from modesolve.cross_section import CrossSection
from modesolve.curve import DispersionCurve
from modesolve.dispersion import dispersion
from modesolve.mode import Mode, find_mode, solve_modes
from modesolve.tables import (
    DispersionTable,
    ModeTable,
    dispersion_table,
    mode_table,
)
from phasematch.caution import LASER_CAUTION
from phasematch.channel import Channel
from phasematch.channel_results import ChannelMap, ConversionBand, PairFlux
from phasematch.design_file import Design
from phasematch.outputs import check_output
from phasematch.ring import Ring
from phasematch.ring_results import DetuningMap, PairRates, PairTable, RingDispersion

Progress = Callable[[str], None]
ResultType = TypeVar("ResultType", bound=FullResult)


@dataclass(frozen=True, slots=True, eq=False)
class ChannelResults:
    """What a design's channel gives."""

    map: ChannelMap
    band: ConversionBand
    flux: PairFlux

    @property
    def parts(self) -> tuple[FullResult, ...]:
        """All of them."""
        return self.map, self.band, self.flux

    @property
    def notes(self) -> tuple[str, ...]:
        """Notes of all parts, once each."""
        return _notes(self.parts)


@dataclass(frozen=True, slots=True, eq=False)
class RingResults:
    """What a design's ring gives; no rates without a pump power."""

    pairs: PairTable
    detuning: DetuningMap
    dispersion: RingDispersion
    rates: PairRates | None

    @property
    def parts(self) -> tuple[FullResult, ...]:
        """All there are."""
        rates = () if self.rates is None else (self.rates,)
        return self.pairs, self.detuning, self.dispersion, *rates

    @property
    def notes(self) -> tuple[str, ...]:
        """Notes of all parts, once each."""
        return _notes(self.parts)


@dataclass(frozen=True, slots=True, eq=False)
class Outcome:
    """All results of a design; what it does not ask for is None."""

    design: Design
    mode: Mode
    modes: ModeTable
    curve: DispersionCurve
    table: DispersionTable
    channel: ChannelResults | None
    ring: RingResults | None
    provenance: Provenance

    @property
    def results(self) -> tuple[Any, ...]:
        """Every result with numbers in it."""
        parts = [part.parts for part in (self.channel, self.ring) if part is not None]
        return (self.modes, self.table, *(result for some in parts for result in some))

    @property
    def notes(self) -> tuple[str, ...]:
        """What to know about the results, once each."""
        return _notes(self.results)


def _notes(results: Iterable[Any]) -> tuple[str, ...]:
    """Notes of several results, once each."""
    return tuple(dict.fromkeys(note for result in results for note in result.notes))


def section_of(design: Design) -> CrossSection:
    """The cross-section of a design, its media extrapolated where it says so."""
    given = design.tables.cross_section.model_dump()
    if design.tables.band.extrapolate:
        for name in ("core", "cladding", "substrate"):
            given[name] = materials.load(given[name]).allow_extrapolation()
        for name in ("layers_below", "layers_above"):
            given[name] = tuple(
                (materials.load(key).allow_extrapolation(), thickness)
                for key, thickness in given[name]
            )
    return CrossSection(**given)


def solve_curve(design: Design, progress: Progress) -> DispersionCurve:
    """The dispersion curve of the design's mode over its band."""
    return _solve_curve(design, section_of(design), progress)


def solve_ring_curve(design: Design, progress: Progress) -> DispersionCurve:
    """The same for the guide bent at the ring's radius.

    A bend radius stated for the cross-section itself stands.
    """
    section = section_of(design)
    if design.tables.ring is not None and section.bend_radius_um is None:
        section = replace(section, bend_radius_um=design.tables.ring.radius_um)
    return _solve_curve(design, section, progress)


def _solve_curve(design: Design, section: CrossSection, progress: Progress) -> DispersionCurve:
    band, mode = design.tables.band, design.tables.mode
    radius = section.bend_radius_um
    bent = "" if radius is None else f", bent at {radius:g} um"
    progress(f"dispersion of {mode.label} from {band.from_um:g} to {band.to_um:g} um{bent}")
    return dispersion(
        section,
        band.from_um,
        band.to_um,
        mode=mode.label,
        reference_um=design.reference_um,
    )


def curve_table(design: Design, curve: DispersionCurve) -> DispersionTable:
    """The curve at as many wavelengths as the design asks for."""
    band = design.tables.band
    return dispersion_table(curve, _axis(band.from_um, band.to_um, band.points), design.as_dict())


def _axis(start: float, stop: float, points: int) -> np.ndarray:
    """Evenly spaced points of 12 digits, so that files hold 1.897 and not 1.8969999999999998."""
    between = [float(f"{x:.12g}") for x in np.linspace(start, stop, points)[1:-1]]
    return np.array([start, *between, stop])


def solve_channel(design: Design, curve: DispersionCurve) -> ChannelResults:
    """Map, conversion band and pair flux of a design's channel."""
    table = design.tables.channel
    if table is None or table.map_pump_um is None or table.map_signal_um is None:
        raise missing_table(design, "channel")
    channel = Channel(curve, length_mm=table.length_mm, loss_db_per_cm=table.loss_db_per_cm)
    pumps = _axis(*table.map_pump_um, table.map_points)
    signals = _axis(*table.map_signal_um, table.map_points)
    return ChannelResults(
        map=_of(design, channel.map(pumps, signals, table.pump_w)),
        band=_of(design, channel.conversion_band(table.pump_um, table.pump_w)),
        flux=_of(design, channel.pair_flux(table.pump_um, table.pump_w)),
    )


def solve_ring(design: Design, curve: DispersionCurve) -> RingResults:
    """Pairs, detuning map, D1 to D4 and, with a pump power, pair rates of a design's ring."""
    table = design.tables.ring
    if table is None:
        raise missing_table(design, "ring")
    ring = Ring(
        curve,
        radius_um=table.radius_um,
        q_intrinsic=table.q_intrinsic,
        q_coupling=table.q_coupling,
    )
    rates = None
    if table.pump_w > 0:
        rates = _of(design, ring.spontaneous(table.pump_um, table.pump_w, table.pairs))
    return RingResults(
        pairs=_of(design, ring.pairs(table.pump_um, table.pairs)),
        detuning=_of(design, ring.detuning_map(table.map_pump_um, table.pairs)),
        dispersion=_of(design, ring.dispersion_coefficients(table.pump_um)),
        rates=rates,
    )


def _of(design: Design, result: ResultType) -> ResultType:
    """The result with the whole design among its inputs, so that its file stands alone."""
    return replace(result, inputs={**result.inputs, "design": design.as_dict()})


def missing_table(design: Design, name: str) -> DesignFileError:
    """The error of a design that lacks a table it is asked about."""
    return DesignFileError((f"{design.source}: [{name}]: this table is missing; add it",))


def solve_design(design: Design, progress: Progress = lambda message: None) -> Outcome:
    """Compute everything a design asks for.

    Parameters
    ----------
    design : Design
    progress : callable, optional
        Told what is being done, one line at a time.

    Raises
    ------
    NoGuidedMode
        The mode does not exist, or not over the whole band.
    SolverError
        A mode could not be resolved.
    """
    started = time.perf_counter()
    tables = design.tables
    section = section_of(design)
    wavelength = design.reference_um
    progress(f"modes at {wavelength:g} um")
    modes = solve_modes(section, wavelength, tables.mode.count)
    mode = next((m for m in modes if m.label == tables.mode.label), None)
    if mode is None:
        mode = find_mode(section, wavelength, tables.mode.label)
    curve = solve_curve(design, progress)
    channel = ring = None
    if tables.channel is not None:
        progress("channel: pump x signal map, conversion band, pair flux")
        channel = solve_channel(design, curve)
    if tables.ring is not None:
        bent = solve_ring_curve(design, progress)
        progress("ring: resonance pairs and detuning map")
        ring = solve_ring(design, bent)
    keys = [m.key for m in section.media]
    return Outcome(
        design=design,
        mode=mode,
        modes=mode_table(modes),
        curve=curve,
        table=curve_table(design, curve),
        channel=channel,
        ring=ring,
        provenance=make_provenance(
            keys, mode.provenance.grid, seconds=time.perf_counter() - started
        ),
    )


def run_design(
    design: Design,
    folder: str | os.PathLike[str],
    *,
    replace: bool = False,
    progress: Progress = lambda message: None,
) -> Outcome:
    """Run a design and write its results into a folder, whole or not at all.

    Parameters
    ----------
    design : Design
    folder : path
        Missing or empty, unless ``replace``.
    replace : bool
        Replace what an earlier run wrote there; other files are kept.
    progress : callable, optional
        Told what is being done, one line at a time.

    Raises
    ------
    StorageError
        The folder cannot be written, or is not empty; found out before any work is done.
    NoGuidedMode, SolverError
        As `solve_design`.
    """
    check_output(design, folder, replace=replace)
    with whole_folder(folder, replace=replace) as staging:
        outcome = solve_design(design, progress)
        progress("tables")
        _write_tables(outcome, staging)
        if design.tables.output.figures != "none":
            progress("figures")
            _draw_figures(outcome, staging)
    return outcome


def _write_tables(outcome: Outcome, folder: Path) -> None:
    from phasematch.report import as_text, notes_lines, summary

    outcome.modes.to_csv(folder / "modes.csv")
    outcome.table.to_csv(folder / "dispersion.csv")
    outcome.table.to_hdf5(folder / "dispersion.h5")
    outcome.mode.fields().to_hdf5(folder / "mode_field.h5")
    if outcome.channel is not None:
        outcome.channel.map.to_hdf5(folder / "channel_map.h5")
        outcome.channel.band.to_csv(folder / "conversion_band.csv")
        outcome.channel.flux.to_csv(folder / "pair_flux.csv")
    if outcome.ring is not None:
        outcome.ring.pairs.to_csv(folder / "ring_pairs.csv")
        outcome.ring.pairs.to_hdf5(folder / "ring_pairs.h5")
        outcome.ring.detuning.to_hdf5(folder / "detuning_map.h5")
        outcome.ring.dispersion.to_csv(folder / "ring_dispersion.csv")
        if outcome.ring.rates is not None:
            outcome.ring.rates.to_csv(folder / "pair_rates.csv")
    write_text(folder / "design.toml", outcome.design.to_toml(outcome.provenance))
    parts = [as_text(*summary(outcome)), *notes_lines(outcome.notes)]
    if LASER_CAUTION in outcome.notes:
        parts.append("\n" + LASER_CAUTION)
    write_text(folder / "summary.txt", "\n".join(parts) + "\n")


def _draw_figures(outcome: Outcome, folder: Path) -> None:
    from phasematch import figures

    drawn = {
        "mode_field": figures.mode_field_figure(outcome.mode),
        "dispersion": figures.dispersion_figure(outcome.table),
    }
    if outcome.channel is not None:
        drawn["channel_map"] = figures.channel_map_figure(outcome.channel.map)
    if outcome.ring is not None:
        drawn["ring_misalignment"] = figures.ring_figure(outcome.ring.pairs)
        drawn["detuning_map"] = figures.detuning_figure(outcome.ring.detuning)
    output = outcome.design.tables.output
    for name, figure in drawn.items():
        path = folder / f"{name}.{output.figures}"
        figures.save_figure(figure, path, dpi=output.resolution_dpi)
