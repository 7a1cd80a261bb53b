"""Figures: what they show, in which units, at which size, and that they can be read in grey."""

from dataclasses import replace
from types import SimpleNamespace

import matplotlib as mpl
import numpy as np
import pytest
from PIL import Image

from materials.common.errors import StorageError
from materials.common.results import ErrorBars
from modesolve import CrossSection
from modesolve.tables import DispersionTable
from phasematch import figures
from phasematch.channel_results import ChannelMap
from phasematch.ring_results import DetuningMap, PairTable


def dispersion_table():
    w = np.linspace(1.2, 2.0, 81)
    d = 60.0 - 300.0 * (w - 1.4) ** 2  # zeros at 1.4 +- sqrt(0.2)
    one = np.ones_like(w)
    names = ("n_eff", "n_group", "dispersion_ps_per_nm_km")
    return DispersionTable(
        mode="TE0",
        wavelength_um=w,
        n_eff=1.9 - 0.1 * w,
        n_group=2.1 * one,
        dispersion_ps_per_nm_km=d,
        beta2_ps2_per_km=-d,
        beta3_ps3_per_km=one,
        beta4_ps4_per_km=one,
        effective_area_um2=one,
        gamma_per_w_m=one,
        zero_dispersion_um=np.array([1.4 + np.sqrt(0.2)]),
        error=ErrorBars({name: 0.01 * one for name in names}),
    )


def channel_map():
    pump, signal = np.linspace(1.5, 1.6, 21), np.linspace(1.4, 1.7, 31)
    level = -1e4 * (pump[:, None] - signal) ** 2
    level[:, -5:] = np.nan
    return ChannelMap(
        pump, signal, level, level, level, level, level.astype(str), 0.1, inputs={"length_mm": 5.0}
    )


def pair_table(sign=1.0):
    mu = np.arange(1, 21)
    miss = sign * 2.0 * mu**2
    width = np.full(20, 200.0)
    columns = {f"{k}_{u}": width for k in ("signal", "idler") for u in ("um", "thz")}
    return PairTable(
        mu=mu,
        misalignment_mhz=miss,
        misalignment_linewidths=miss / width,
        linewidth_mhz=width,
        aligned=np.abs(miss) <= width,
        reason=np.full(20, ""),
        pump_order=900,
        pump_um=1.55,
        pump_thz=193.4,
        error=ErrorBars(misalignment_mhz=np.full(20, 50.0)),
        **columns,
    )


def detuning_map():
    mu, pump = np.arange(1, 31), np.linspace(1.5, 1.6, 11)
    miss = np.linspace(-1.0, 1.0, 11)[:, None] * mu**2 * 5.0
    width = np.full(miss.shape, 200.0)
    return DetuningMap(
        pump_order=np.arange(11),
        mu=mu,
        pump_um=pump,
        misalignment_mhz=miss,
        linewidth_mhz=width,
        misalignment_linewidths=miss / width,
        aligned=np.abs(miss) <= width,
        reason=np.full(miss.shape, ""),
    )


def mode(te_fraction=0.99, odd=False, slab_um=0.0):
    x, y = np.linspace(-2, 2, 41), np.linspace(-1.5, 2.5, 39)
    shape = np.exp(-(x[:, None] ** 2) - (y - 0.4) ** 2)
    if odd:
        shape = shape * x[:, None]
    field = SimpleNamespace(x_um=x, y_um=y, e_x=shape, e_y=shape, e_z=1j * shape)
    section = CrossSection(
        core="Si3N4-Luke2015", cladding="SiO2-Malitson1965", substrate="SiO2-Malitson1965",
        width_um=1.6, height_um=0.8, slab_um=slab_um, sidewall_deg=80.0, width_at=1.0,
        layers_below=(("air", 0.3), ("air", 0.2)),
    )  # fmt: skip
    return SimpleNamespace(
        te_fraction=te_fraction, fields=lambda: field, section=section, label="TE0",
        wavelength_um=1.55, n_eff=1.83, error={"n_eff": 2e-7},
    )  # fmt: skip


ALL = {
    "dispersion": lambda: figures.dispersion_figure(dispersion_table()),
    "channel": lambda: figures.channel_map_figure(channel_map()),
    "ring": lambda: figures.ring_figure(pair_table()),
    "detuning": lambda: figures.detuning_figure(detuning_map()),
    "mode": lambda: figures.mode_field_figure(mode()),
    "odd mode": lambda: figures.mode_field_figure(mode(odd=True, slab_um=0.2)),
}


@pytest.mark.parametrize("name", ALL)
def test_size_and_units(name):
    figure = ALL[name]()
    assert figure.get_size_inches()[0] == figures.COLUMN_IN == 3.4
    labels = [axes.get_xlabel() for axes in figure.axes] + [a.get_ylabel() for a in figure.axes]
    pure = ("pair index µ", "$n_{\\rm eff}$", "$n_{\\rm g}$", "$E_x$ / its peak in the core", "")
    for label in labels:
        assert label in pure or label.endswith(")"), label
    for axes in figure.axes:
        for text in [axes.title, axes.xaxis.label, axes.yaxis.label]:
            assert text.get_fontsize() >= 7.0
    figure.canvas.draw()
    box = figure.get_tightbbox()
    assert box.width <= 3.4 + 0.05  # nothing runs over the edge of the column


def test_dispersion_shows_zero_bars_and_anomalous_band():
    figure = ALL["dispersion"]()
    panel = figure.axes[-1]
    assert "1.8472 µm" in [t.get_text() for t in panel.texts]
    band = figure.axes[0].collections[0].get_paths()[0].vertices
    at = np.abs(band[:, 0] - 1.2) < 1e-9
    assert np.ptp(band[at, 1]) == pytest.approx(0.02)  # twice the bar of 0.01
    assert [t.get_text() for t in panel.get_legend().get_texts()] == ["anomalous"]
    (patch,) = panel.get_legend().get_patches()
    shade = panel.collections[-1].get_facecolor()[0]
    np.testing.assert_allclose(patch.get_facecolor(), shade)
    figure.canvas.draw()
    legend, frame = panel.get_legend().get_window_extent(), panel.get_window_extent()
    assert legend.y0 >= frame.y1 - 1  # above the panel: no curve crosses it
    plain = dispersion_table()
    everywhere = replace(plain, dispersion_ps_per_nm_km=np.full(81, 5.0))
    assert figures.dispersion_figure(everywhere).axes[-1].get_legend() is not None


def test_mode_is_scaled_to_its_peak_in_the_core_and_the_bar_is_as_tall_as_the_axes():
    strong = mode()
    field = strong.fields()
    outside = np.abs(field.x_um) > 1.2
    e_x = np.where(outside[:, None], 3.0, 0.5 * field.e_x)
    strong.fields = lambda: SimpleNamespace(**{**vars(field), "e_x": e_x})
    figure = figures.mode_field_figure(strong)
    axes = figure.axes[0]
    drawn = axes.collections[0].get_array().reshape(39, 41).T
    x, y = np.abs(field.x_um)[:, None], field.y_um
    core = (x <= 0.8) & (y >= 0.0) & (y <= 0.8)
    assert drawn[core].max() == pytest.approx(1.0) and drawn.max() > 5.0
    plain = ALL["mode"]()  # where the bar has no arrow
    axes, bar = plain.axes[0], plain.axes[0].child_axes[0]
    plain.canvas.draw()
    heights = [a.get_window_extent().height for a in (axes, bar)]
    assert heights[0] == pytest.approx(heights[1], rel=1e-3)


def test_channel_map_marks_3_db_of_each_pump_and_what_is_missing():
    figure = ALL["channel"]()
    axes = figure.axes[0]
    for line, sign in zip(axes.lines[:2], (-1.0, 1.0), strict=True):
        away = line.get_xdata() - line.get_ydata()  # signal minus pump; peak at signal = pump
        # 1e4 d^2 = 3 dB at d = 17.3 nm, the grid is 10 nm wide
        assert np.all(np.abs(sign * away - 0.0173) < 0.006)
    assert "outside the solved band" in [t.get_text() for t in axes.get_legend().get_texts()]
    assert axes.get_title().startswith("5 mm; ") and "W" not in axes.get_title()


def test_the_line_about_the_pump_takes_no_notice_of_a_higher_far_lobe():
    plain = channel_map()
    far = plain.efficiency_db.copy()
    far[::2, :3] = 20.0  # every other pump is phase-matched far away as well
    lines = [
        figures.channel_map_figure(replace(plain, efficiency_db=db)).axes[0].lines[:2]
        for db in (plain.efficiency_db, far)
    ]
    for one, other in zip(*lines, strict=True):
        np.testing.assert_array_equal(one.get_xdata(), other.get_xdata())
        assert np.isfinite(one.get_xdata()).all()


@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_ring_shows_bars_linewidth_and_alignment(sign):
    axes = figures.ring_figure(pair_table(sign)).axes[0]
    names = [t.get_text() for t in axes.get_legend().get_texts()]
    assert names == ["within a linewidth", "aligned", "not aligned"]
    first = axes.containers[0]
    low, high = first[2][0].get_segments()[0][:, 1]
    assert (high - low) == pytest.approx(100.0)  # 50 MHz either way
    assert len(first[2][0].get_segments()) == 10  # 2 mu^2 <= 200 up to mu = 10
    band = axes.collections[0].get_paths()[0].vertices[:, 0]
    assert (band.min(), band.max()) == axes.get_xlim()
    bottom, top = axes.get_ylim()
    assert bottom < -200.0 and top > 200.0 and max(abs(bottom), abs(top)) > 800.0


def test_ring_without_a_known_pair_says_why():
    nothing = np.full(20, np.nan)
    lost = replace(
        pair_table(),
        misalignment_mhz=nothing,
        linewidth_mhz=nothing,
        aligned=np.zeros(20, bool),
        reason=np.full(20, "outside the solved band"),
    )
    axes = figures.ring_figure(lost).axes[0]
    (said,) = axes.texts
    assert said.get_text() == "no pair has a value:\noutside the solved band"
    assert axes.get_legend() is None


def test_detuning_line_keeps_off_the_edge_of_the_band_and_grey_is_named():
    table = detuning_map()
    assert ALL["detuning"]().axes[0].get_legend() is None
    miss = table.misalignment_mhz.copy()
    miss[:, 20:] = np.nan  # ends where every pump of a small misalignment is still aligned
    linewidths = miss / table.linewidth_mhz
    figure = figures.detuning_figure(
        replace(table, misalignment_mhz=miss, misalignment_linewidths=linewidths)
    )
    axes = figure.axes[0]
    assert [t.get_text() for t in axes.get_legend().get_texts()] == ["outside the solved band"]
    (line,) = [c for c in axes.collections if hasattr(c, "levels")]
    points = np.concatenate([path.vertices for path in line.get_paths()])
    spread = np.interp(points[:, 1], table.pump_um, np.linspace(-1.0, 1.0, 11))
    # on the line |miss| is a linewidth, 200 MHz; interpolation between rows is coarse
    ratio = np.abs(spread) * points[:, 0] ** 2 * 5.0 / 200.0
    assert np.all(np.abs(ratio - 1.0) < 0.3)
    labels = [t.get_text() for t in figure.axes[1].get_yticklabels()]
    assert labels == ["$-10^{3}$", "$-10^{2}$", "0", "$10^{2}$", "$10^{3}$"]


def test_signed_maps_have_zero_in_the_middle():
    for name in ("detuning", "odd mode"):
        norm = ALL[name]().axes[0].collections[0].norm
        assert norm.vmin == -norm.vmax
        assert norm(0.0) == pytest.approx(0.5)


def test_colour_map_survives_grey():
    """Lightness rises all the way, in even steps: CIE L* of 64 samples."""
    rgb = mpl.colormaps[figures.COLOUR_MAP](np.linspace(0, 1, 64))[:, :3]
    linear = np.where(rgb <= 0.04045, rgb / 12.92, ((rgb + 0.055) / 1.055) ** 2.4)
    luminance = linear @ [0.2126, 0.7152, 0.0722]
    lightness = 116 * np.cbrt(luminance) - 16
    steps = np.diff(lightness)
    assert steps.min() > 0
    assert steps.max() < 1.6 * np.median(steps)


@pytest.mark.parametrize("suffix", ["png", "pdf", "svg"])
def test_saving(tmp_path, suffix):
    path = tmp_path / f"figure.{suffix}"
    figures.save_figure(ALL["ring"](), path, dpi=100)
    first = path.read_bytes()
    if suffix == "png":
        assert Image.open(path).size == (340, 250)
    assert len(first) > 2000
    assert [p.name for p in tmp_path.iterdir()] == [path.name]


def test_unwritable_place(tmp_path):
    with pytest.raises(StorageError, match="cannot write"):
        figures.save_figure(ALL["ring"](), tmp_path / "none" / "figure.png")


def test_a_map_without_any_value_is_drawn():
    empty = channel_map()
    nothing = np.full(empty.efficiency_db.shape, np.nan)
    fields = {n: getattr(empty, n) for n in ("pump_um", "signal_um", "reason", "pump_w")}
    rest = dict.fromkeys(("idler_um", "mismatch_per_m", "gain_db", "efficiency_db"), nothing)
    figures.channel_map_figure(ChannelMap(**fields, **rest)).canvas.draw()
