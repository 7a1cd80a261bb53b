"""Short tables for the terminal: every number with its error bar, 80 columns wide."""

from __future__ import annotations

import io
from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from rich.console import Console, Group
from rich.table import Table
from rich.text import Text

from materials.common.results import format_number
from phasematch.caution import LASER_CAUTION

if TYPE_CHECKING:
    from modesolve.tables import DispersionTable, ModeTable
    from phasematch.channel_results import ConversionBand, PairFlux
    from phasematch.design_tables import ChannelKeys, RingKeys
    from phasematch.ring_results import PairTable
    from phasematch.study import Outcome, RingResults

#: Width of a report, columns.
WIDTH = 80


def _table(title: str, *columns: str, gap: int = 2) -> Table:
    table = Table(
        title=title,
        title_justify="left",
        title_style="bold",
        box=None,
        padding=(0, gap, 0, 0),
        pad_edge=False,
    )
    for i, column in enumerate(columns):
        table.add_column(column, justify="left" if i == 0 else "right", no_wrap=True)
    return table


def _cells(result: Any, names: Iterable[str], index: int, most: int = 9) -> list[str]:
    """Values of some columns of a result at one row, with their bars, ``most`` digits."""
    out = []
    for name in names:
        value, bar = getattr(result, name)[index], result.error.get(name)
        missing = np.isnan(value)
        out.append("none" if missing else format_number(value, _entry(bar, index), most=most))
    return out


def _entry(bar: Any, index: int) -> float | None:
    return None if bar is None else float(np.atleast_1d(bar)[index])


def modes_report(result: ModeTable) -> Table:
    """Label, n_eff, D, gamma, area, loss of each mode."""
    table = _table(
        f"Modes at {result.wavelength_um:g} um",
        "mode", "n_eff", "D ps/(nm km)", "gamma 1/(W m)", "area um2", "loss dB/cm",
    )  # fmt: skip
    names = (
        "dispersion_ps_per_nm_km", "gamma_per_w_m", "effective_area_um2", "loss_db_per_cm",
    )  # fmt: skip
    for i, label in enumerate(result.mode):
        index = _cells(result, ["n_eff"], i, most=10)
        table.add_row(str(label), *index, *_cells(result, names, i))
    return table


def dispersion_report(result: DispersionTable, rows: int = 7) -> Group:
    """A few rows of a dispersion curve and its zero-dispersion wavelengths."""
    table = _table(
        f"Dispersion of {result.mode}",
        "um", "n_eff", "n_g", "D ps/(nm km)", "gamma 1/(W m)",
    )  # fmt: skip
    names = ("n_eff", "n_group", "dispersion_ps_per_nm_km", "gamma_per_w_m")
    length = len(result.wavelength_um)
    for i in np.unique(np.linspace(0, length - 1, min(rows, length)).round().astype(int)):
        table.add_row(f"{result.wavelength_um[i]:.4g}", *_cells(result, names, int(i), most=10))
    zeros = [
        format_number(zero, _entry(result.error.get("zero_dispersion_um"), i), most=9)
        for i, zero in enumerate(result.zero_dispersion_um)
    ]
    line = "Zero dispersion: " + (", ".join(zeros) + " um" if zeros else "none in this band")
    return Group(table, Text(line))


def value_lines(title: str, rows: Sequence[tuple[str, str, str]]) -> Group:
    """Named values one below the other: name, value with bar, unit."""
    table = Table(box=None, show_header=False, padding=(0, 2, 0, 0), pad_edge=False)
    for name, value, unit in rows:
        table.add_row(name, value, unit)
    return Group(Text(title, style="bold"), table)


def scalar_row(result: Any, name: str, label: str, unit: str) -> tuple[str, str, str]:
    """One scalar of a result for `value_lines`."""
    value = getattr(result, name)
    if np.isnan(value):
        return label, "none", ""
    return label, format_number(value, result.error.get(name), most=9), unit


def channel_report(table: ChannelKeys, band: ConversionBand, flux: PairFlux) -> Group:
    """Best conversion, its band and the pair flux of a channel."""
    rows = [
        ("pump", f"{table.pump_um:g}", "um"),
        scalar_row(band, "peak_um", "best signal", "um"),
        scalar_row(band, "peak_efficiency_db", "idler out / signal in, best", "dB"),
        scalar_row(band, "short_um", "-3 dB band from", "um"),
        scalar_row(band, "long_um", "-3 dB band to", "um"),
        scalar_row(band, "width_thz", "-3 dB band, width", "THz"),
        scalar_row(flux, "flux_per_s", f"{flux.counted}, whole band", "1/s"),
    ]
    reasons = dict.fromkeys(r for r in (band.reason, flux.reason) if r)
    lines = value_lines(f"Channel, {table.length_mm:g} mm, {table.pump_w:g} W", rows)
    return Group(lines, *(Text(f"none: {reason}") for reason in reasons))


def ring_report(table: RingKeys, results: RingResults, rows: int = 10) -> list[Any]:
    """Resonance, dispersion and linewidth of a ring, then its first pairs."""
    pairs, about, rates = results.pairs, results.dispersion, results.rates
    aligned = in_words(pairs.mu[pairs.aligned])
    lines: list[tuple[str, str, str]] = [
        scalar_row(pairs, "pump_um", "pump resonance", "um"),
        scalar_row(about, "d1_ghz", "D1/2pi (free spectral range)", "GHz"),
        scalar_row(about, "d2_mhz", "D2/2pi", "MHz"),
        ("loaded linewidth", _linewidth(pairs), "MHz"),
        ("aligned pairs", f"{int(pairs.aligned.sum())} of {len(pairs.mu)}", aligned),
    ]
    unknown = np.isnan(pairs.misalignment_mhz)
    if unknown.any():
        lines.append(("unknown pairs", str(int(unknown.sum())), in_words(pairs.mu[unknown])))
    if rates is not None:
        lines.append(("pump power in the bus", f"{rates.pump_w:g}", "W"))
    columns = ["pair", "signal um", "idler um", "misses MHz", "linewidths", "aligned"]
    last = [] if rates is None else ["pairs 1/s"]
    listed = _table("Pairs, cold", *columns, *last, gap=2 - len(last))
    for i in range(min(rows, len(pairs.mu))):
        cells = _cells(pairs, ("signal_um", "idler_um"), i, most=7)
        cells += _cells(pairs, ("misalignment_mhz", "misalignment_linewidths"), i)
        cells.append("unknown" if unknown[i] else "yes" if pairs.aligned[i] else "no")
        if rates is not None:
            cells += _cells(rates, ("coincidences_per_s",), i)
        listed.add_row(str(pairs.mu[i]), *cells)
    title = (
        f"Ring, radius {table.radius_um:g} um, Q {table.q_intrinsic:g} intrinsic, "
        f"{table.q_coupling:g} coupling"
    )
    texts = [f"unknown: {r}" for r in dict.fromkeys(pairs.reason) if r]
    if rates is not None:
        missing = dict.fromkeys(r for r in rates.reason[:rows] if r)
        texts += [f"none: {r}" for r in missing if r not in pairs.reason]
    return [value_lines(title, lines), Group(listed, *map(Text, texts))]


def _linewidth(pairs: PairTable) -> str:
    """Loaded linewidth of the first pair that has one; it hardly changes from pair to pair."""
    known = np.flatnonzero(np.isfinite(pairs.linewidth_mhz))
    return _cells(pairs, ["linewidth_mhz"], int(known[0]))[0] if known.size else "unknown"


def in_words(numbers: np.ndarray) -> str:
    """Whole numbers in words: "1 to 17, 19"; cut where it gets long."""
    groups = np.split(numbers, np.flatnonzero(np.diff(numbers) > 1) + 1)
    words = [f"{g[0]}" if len(g) == 1 else f"{g[0]} to {g[-1]}" for g in groups if len(g)]
    return ", ".join(words[:4]) + (" ..." if len(words) > 4 else "")


def summary(outcome: Outcome) -> list[Any]:
    """Everything worth a look after a run."""
    tables = outcome.design.tables
    parts: list[Any] = [modes_report(outcome.modes), dispersion_report(outcome.table)]
    if outcome.channel is not None and tables.channel is not None:
        parts.append(channel_report(tables.channel, outcome.channel.band, outcome.channel.flux))
    if outcome.ring is not None and tables.ring is not None:
        parts += ring_report(tables.ring, outcome.ring)
    return parts


def notes_lines(notes: Iterable[str]) -> list[str]:
    """Notes once each; the caution stands apart."""
    return [f"note: {note}" for note in dict.fromkeys(notes) if note != LASER_CAUTION]


def as_text(*parts: Any) -> str:
    """Render a report as plain text."""
    sink = io.StringIO()
    console = Console(file=sink, width=WIDTH, color_system=None, highlight=False)
    show(console, *parts)
    return "\n".join(line.rstrip() for line in sink.getvalue().splitlines()) + "\n"


def show(console: Console, *parts: Any) -> None:
    """Print parts of a report, a blank line between them."""
    for i, part in enumerate(parts):
        if i:
            console.print()
        console.print(part)
