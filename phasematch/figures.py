"""Figures of modes, dispersion, channel maps and ring alignment, at one-column size.

Colour maps are perceptually uniform and readable by the colour-blind: cividis, whose
lightness rises all the way, so that it also survives a grey print. Signed quantities use
it with zero in the middle and the zero line drawn. Error bars are drawn to scale; where
none is seen, it is thinner than the line.
"""

from __future__ import annotations

import os
from collections.abc import Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

import matplotlib as mpl
import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import Normalize, SymLogNorm
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator

from materials.common.files import whole_file
from materials.common.results import format_number
from phasematch.conversion import sampled_band
from phasematch.reasons import OUTSIDE_BAND

if TYPE_CHECKING:
    from modesolve import Mode
    from modesolve.tables import DispersionTable
    from phasematch.channel_results import ChannelMap
    from phasematch.ring_results import DetuningMap, PairTable

#: Width of a column, inches.
COLUMN_IN = 3.4

#: Colours that the colour-blind can tell apart (after Okabe and Ito, 2008).
BLUE, ORANGE, GREY = "#0072B2", "#D55E00", "#6E6E6E"
COLOUR_MAP = "cividis"
_NO_VALUE = "#E4E4E4"
_ANOMALOUS = "#FAEBDF"  # ORANGE at 12 % on white

_STYLE: Any = {
    "font.size": 8.0,
    "axes.linewidth": 0.6,
    "axes.titlesize": 8.0,
    "lines.linewidth": 1.2,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "legend.frameon": False,
    "legend.fontsize": 7.0,
    "svg.fonttype": "none",
    "pdf.fonttype": 42,
    "axes.formatter.useoffset": False,
    "image.cmap": COLOUR_MAP,
}


@contextmanager
def _figure(height_in: float) -> Iterator[Figure]:
    """A figure one column wide, in the house style and without pyplot's global state."""
    with mpl.rc_context(_STYLE):
        figure = Figure(figsize=(COLUMN_IN, height_in), layout="constrained")
        FigureCanvasAgg(figure)
        yield figure


def save_figure(figure: Figure, path: str | os.PathLike[str], *, dpi: int = 300) -> None:
    """Write a figure, whole or not at all; the suffix is the format (png, pdf, svg)."""
    suffix = os.fspath(path).rpartition(".")[2]
    about = {"Software": None} if suffix == "png" else {"Creator": None, "CreationDate": None}
    if suffix == "svg":
        about = {"Creator": None, "Date": None}
    with mpl.rc_context(_STYLE), whole_file(path) as temporary, open(temporary, "wb") as file:
        figure.savefig(file, format=suffix, dpi=dpi, metadata=about)


# ---------------------------------------------------------------- mode


def mode_field_figure(mode: Mode) -> Figure:
    """The dominant electric component of a mode over the cross-section."""
    field, section = mode.fields(), mode.section
    name = "x" if mode.te_fraction >= 0.5 else "y"
    values = np.real(getattr(field, f"e_{name}"))
    inside = np.where(_in_core(field.x_um, field.y_um, section), values, 0.0)
    peak = inside.flat[np.argmax(np.abs(inside))]  # walls may carry more, beside the core
    values = values / (peak or 1.0)
    signed = values.min() < -0.1
    index = format_number(mode.n_eff, mode.error.get("n_eff"), most=10)
    half, low, high = _window(field.x_um, field.y_um, values, section)
    with _figure(min(3.6, 0.75 + 2.1 * (high - low) / (2 * half))) as figure:
        axes = figure.add_subplot()
        shown = axes.pcolormesh(
            field.x_um,
            field.y_um,
            values.T,
            shading="gouraud",
            norm=Normalize(-1.0 if signed else 0.0, 1.0),
            rasterized=True,
        )
        if signed:
            axes.contour(field.x_um, field.y_um, values.T, [0.0], colors="white", linewidths=0.5)
        _draw_section(axes, section, half)
        axes.set(xlim=(-half, half), ylim=(low, high), aspect="equal")
        axes.set(xlabel="x (µm)", ylabel="y (µm)")
        axes.set_title(f"{mode.label}, {mode.wavelength_um:.4g} µm, $n_{{\\rm eff}}$ = {index}")
        beside = axes.inset_axes((1.04, 0.0, 0.05, 1.0))  # as tall as the axes are
        over = values.max() > 1.005, values.min() < -1.005
        extend = {(1, 0): "max", (0, 1): "min", (1, 1): "both"}.get(over, "neither")
        bar = figure.colorbar(shown, cax=beside, extend=extend)
        bar.ax.yaxis.set_major_locator(MaxNLocator(2))
        bar.set_label(f"$E_{name}$ / its peak in the core")
    return figure


def _in_core(x: Any, y: Any, section: Any) -> np.ndarray:
    """Where a grid lies in the core, the film beside a rib left out."""
    line = section.wall_line()
    half = np.interp(y, [line.bottom_um, line.top_um], [line.half_bottom_um, line.half_top_um])
    between = (y >= 0.0) & (y <= section.height_um)
    return np.asarray((np.abs(x)[:, None] <= half) & between)


def _window(x: Any, y: Any, values: Any, section: Any) -> tuple[float, float, float]:
    """Half width, bottom and top of the part worth showing, um."""
    strong = np.abs(values) > 0.02
    columns, rows = np.flatnonzero(strong.any(axis=1)), np.flatnonzero(strong.any(axis=0))
    margin = 0.15 * (section.width_um + section.height_um)
    half = max(abs(x[columns[0]]), abs(x[columns[-1]]), 0.5 * section.width_um + margin)
    low = min(y[rows[0]], -margin)
    high = max(y[rows[-1]], section.height_um + margin)
    return float(min(half, abs(x[-1]))), float(max(low, y[0])), float(min(high, y[-1]))


def _draw_section(axes: Any, section: Any, half: float) -> None:
    """Outlines of the core and the flat films."""
    line, slab, height = section.wall_line(), section.slab_um, section.height_um
    bottom, top = line.half_bottom_um, line.half_top_um
    style: dict[str, Any] = {"color": "white", "linewidth": 0.8}
    if slab > 0:
        xs = [-half, -bottom, -top, top, bottom, half]
        axes.plot(xs, [slab, slab, height, height, slab, slab], **style)
        axes.axhline(0.0, **style)
    else:
        xs = [-bottom, -top, top, bottom, -bottom]
        axes.plot(xs, [0.0, height, height, 0.0, 0.0], **style)
    below = [-float(t) for t in np.cumsum([t for _, t in section.layers_below])]
    above = [height + float(t) for t in np.cumsum([t for _, t in section.layers_above])]
    for face in [*([0.0] if below else []), *below, *above]:
        axes.axhline(face, linestyle=":", **style)


# ---------------------------------------------------------------- dispersion


def dispersion_figure(table: DispersionTable) -> Figure:
    """Effective index, group index and D against wavelength, zero dispersion marked."""
    panels = (
        ("n_eff", "$n_{\\rm eff}$"),
        ("n_group", "$n_{\\rm g}$"),
        ("dispersion_ps_per_nm_km", "D (ps nm$^{-1}$ km$^{-1}$)"),
    )
    x = table.wavelength_um
    with _figure(4.4) as figure:
        rows = figure.subplots(3, 1, sharex=True, height_ratios=(1, 1, 1.5))
        for axes, (name, label) in zip(rows, panels, strict=True):
            values, bar = getattr(table, name), table.error[name]
            axes.fill_between(x, values - bar, values + bar, color=BLUE, alpha=0.3, linewidth=0)
            axes.plot(x, values, color=BLUE)
            axes.set_ylabel(label)
            axes.yaxis.set_major_locator(MaxNLocator(5, steps=[1, 2, 5, 10], min_n_ticks=3))
        last = rows[-1]
        last.axhline(0.0, color=GREY, linewidth=0.6)
        anomalous = table.dispersion_ps_per_nm_km > 0
        if anomalous.any():
            last.fill_between(
                x, 0, 1, where=anomalous, transform=last.get_xaxis_transform(),
                color=_ANOMALOUS, linewidth=0, zorder=0, label="anomalous",
            )  # fmt: skip
            # above the panel, where no curve runs
            last.legend(loc="lower left", bbox_to_anchor=(0.0, 1.0), borderaxespad=0.2)
        slope = np.gradient(table.dispersion_ps_per_nm_km, x)
        bars = np.broadcast_to(
            table.error.get("zero_dispersion_um", np.nan), np.shape(table.zero_dispersion_um)
        )
        for zero, bar in zip(table.zero_dispersion_um, bars, strict=True):
            last.plot(zero, 0.0, "o", color=ORANGE, markersize=4)
            beside = (5, 5) if np.interp(zero, x, slope) < 0 else (5, -10)  # off the curve
            name = f"{format_number(zero, bar, digits=5)} µm"
            last.annotate(name, (zero, 0.0), beside, textcoords="offset points")
        last.set_xlabel("wavelength (µm)")
        last.set_xlim(x[0], x[-1])
        rows[0].set_title(f"{table.mode}")
    return figure


# ---------------------------------------------------------------- channel


def channel_map_figure(result: ChannelMap, *, span_db: float = 40.0) -> Figure:
    """Idler efficiency of a channel over pump and signal wavelength."""
    values = result.efficiency_db
    known = values[np.isfinite(values)]
    top = float(known.max()) if known.size else 0.0
    with _figure(2.7) as figure:
        axes = figure.add_subplot()
        axes.set_facecolor(_NO_VALUE)
        shown = axes.pcolormesh(
            result.signal_um,
            result.pump_um,
            np.ma.masked_invalid(values),
            norm=Normalize(top - span_db, top),
            shading="nearest",
            rasterized=True,
        )
        limits = axes.axis()
        _marked_level(axes, result, values)
        axes.axis(limits)
        axes.set(xlabel="signal wavelength (µm)", ylabel="pump wavelength (µm)")
        axes.set_title(_channel_title(result))
        bar = figure.colorbar(shown, ax=axes, extend="min")
        bar.set_label("idler out / signal in (dB)")
        if known.size < values.size:
            _name_grey(axes)
    return figure


def _name_grey(axes: Any) -> None:
    """Say below a map what its grey means."""
    axes.plot([], [], "s", color=_NO_VALUE, label=OUTSIDE_BAND)
    axes.legend(loc="upper left", bbox_to_anchor=(0.0, -0.2), borderpad=0.0)


def _channel_title(result: ChannelMap) -> str:
    length = result.inputs.get("length_mm")
    about = "" if length is None else f"{length:g} mm; "
    return f"{about}line: $-$3 dB about the pump"


def _marked_level(axes: Any, result: ChannelMap, values: np.ndarray) -> None:
    """Where the efficiency has fallen by 3 dB within the lobe about each pump.

    A lobe that is phase-matched far from the pump has no part in it, as for
    `phasematch.Channel.conversion_band`.
    """
    edges = [
        sampled_band(result.signal_um, row, int(np.argmin(np.abs(result.signal_um - pump))), 3.0)
        for pump, row in zip(result.pump_um, values, strict=True)
    ]
    for side in np.transpose(edges):
        axes.plot(side, result.pump_um, color="black", linewidth=0.6)


# ---------------------------------------------------------------- ring


def ring_figure(pairs: PairTable) -> Figure:
    """Misalignment of each resonance pair, the loaded linewidth shaded."""
    miss, width = pairs.misalignment_mhz, pairs.linewidth_mhz
    bar = np.asarray(pairs.error["misalignment_mhz"])
    unit = _linear_part(width)
    with _figure(2.5) as figure:
        axes = figure.add_subplot()
        ends = pairs.mu[0] - 0.5 - 0.02 * len(width), pairs.mu[-1] + 0.5 + 0.02 * len(width)
        known = np.isfinite(width)
        across = np.array([ends[0], *pairs.mu, ends[1]])
        # held constant beyond the first and last pair, so that the band spans the axes
        if known.any():
            band = np.interp(across, pairs.mu[known], width[known])
            axes.fill_between(
                across, -band, band, color=GREY, alpha=0.25, linewidth=0,
                label="within a linewidth",
            )  # fmt: skip
        else:
            said = f"no pair has a value:\n{pairs.reason[0]}"
            axes.text(0.5, 0.7, said, transform=axes.transAxes, ha="center", va="center")
        axes.axhline(0.0, color=GREY, linewidth=0.6)
        style: dict[str, Any] = {
            "fmt": "o",
            "markersize": 2.5,
            "elinewidth": 0.8,
            "linestyle": "none",
        }
        for chosen, colour, fill, label in (
            (pairs.aligned, BLUE, BLUE, "aligned"),
            (~pairs.aligned & np.isfinite(miss), ORANGE, "white", "not aligned"),
        ):
            if chosen.any():
                axes.errorbar(
                    pairs.mu[chosen], miss[chosen], bar[chosen], color=colour,
                    markerfacecolor=fill, label=label, **style,
                )  # fmt: skip
        axes.set_yscale("symlog", linthresh=unit, linscale=1.0)
        axes.set_ylim(*_symlog_limits(miss, unit))
        axes.set(xlabel="pair index µ", ylabel="misalignment (MHz)", xlim=ends)
        axes.xaxis.set_major_locator(MaxNLocator(6, integer=True))
        pump = format_number(float(pairs.pump_um), pairs.error.get("pump_um"), digits=5, most=9)
        axes.set_title(f"pump {pump} µm")
        upwards = np.nanmax(miss, initial=0.0) >= -np.nanmin(miss, initial=0.0)
        if known.any():
            axes.legend(loc="lower right" if upwards else "upper right")
    return figure


def _linear_part(width: np.ndarray) -> float:
    """Where the axis turns from linear to logarithmic: the usual linewidth, MHz."""
    known = width[np.isfinite(width) & (width > 0)]
    return float(np.median(known)) if known.size else 1.0


def _symlog_limits(values: np.ndarray, unit: float) -> tuple[float, float]:
    """Limits that hold all values and at least two linewidths to either side."""
    known = values[np.isfinite(values)]
    low, high = (float(known.min()), float(known.max())) if known.size else (0.0, 0.0)
    return min(1.6 * low, -2.0 * unit), max(1.6 * high, 2.0 * unit)


def detuning_figure(result: DetuningMap) -> Figure:
    """Misalignment over pump resonance and pair index, aligned region outlined."""
    miss = result.misalignment_mhz
    unit = _linear_part(np.asarray(result.linewidth_mhz))
    reach = float(np.nanmax(np.abs(miss), initial=2.0 * unit))
    with _figure(2.7) as figure:
        axes = figure.add_subplot()
        axes.set_facecolor(_NO_VALUE)
        norm = SymLogNorm(unit, linscale=1.0, vmin=-reach, vmax=reach)
        shown = axes.pcolormesh(
            result.mu,
            result.pump_um,
            np.ma.masked_invalid(miss),
            norm=norm,
            shading="nearest",
            rasterized=True,
        )
        limits = axes.axis()
        if min(miss.shape) > 1:
            # masked, so that no line runs along the edge of what is known
            widths = np.ma.masked_invalid(np.abs(result.misalignment_linewidths))
            axes.contour(result.mu, result.pump_um, widths, [1.0], colors="white", linewidths=0.8)
        axes.axis(limits)
        axes.set(xlabel="pair index µ", ylabel="pump resonance (µm)")
        axes.set_title("line: a linewidth; within it towards 0 MHz")
        axes.xaxis.set_major_locator(MaxNLocator(6, integer=True))
        bar = figure.colorbar(shown, ax=axes)
        ticks = _decades(norm, reach)
        bar.set_ticks(ticks, labels=[_power_of_ten(tick) for tick in ticks])
        bar.minorticks_off()
        bar.set_label("misalignment (MHz)")
        if not np.isfinite(miss).all():
            _name_grey(axes)
    return figure


def _decades(norm: Any, reach: float) -> list[float]:
    """Zero and the powers of ten, of either sign, that a colour bar has room for."""
    ticks, above = [], 1.5
    power = 10.0 ** np.floor(np.log10(reach))
    while norm(power) - norm(0.0) > 0.06:
        if above - norm(power) > 0.06:
            ticks.append(float(power))
            above = norm(power)
        power /= 10.0
    return [-tick for tick in ticks] + [0.0] + ticks[::-1]


def _power_of_ten(value: float) -> str:
    if value == 0.0:
        return "0"
    sign = "-" if value < 0 else ""
    return f"${sign}10^{{{round(np.log10(abs(value)))}}}$"
