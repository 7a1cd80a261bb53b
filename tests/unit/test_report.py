"""Reports fit 80 columns, show bars, and say "none" with the reason where nothing is."""

from types import SimpleNamespace

import numpy as np
import pytest

from materials.common.results import ErrorBars
from modesolve.tables import DispersionTable, ModeTable
from phasematch import report
from phasematch.caution import LASER_CAUTION
from phasematch.channel_results import ConversionBand, PairFlux
from phasematch.design_tables import ChannelKeys, RingKeys
from phasematch.ring import Ring

from ..synthetic_curve import curve, with_bars


def mode_table():
    big = np.array([-12345.678901])
    names = [
        "n_eff", "dispersion_ps_per_nm_km", "gamma_per_w_m", "effective_area_um2",
        "loss_db_per_cm", "n_group", "beta2_ps2_per_km", "beta3_ps3_per_km",
        "beta4_ps4_per_km", "te_fraction",
    ]  # fmt: skip
    bars = ErrorBars({name: np.array([1.2e-6]) for name in names})
    return ModeTable(1.55, np.array(["TE12"]), **dict.fromkeys(names, big), error=bars)


def test_no_number_is_cut():
    text = report.as_text(report.modes_report(mode_table()))
    assert "…" not in text
    assert text.count("-12345.6789") == 5
    assert max(map(len, text.splitlines())) <= 80


@pytest.mark.parametrize(
    ("numbers", "words"),
    [
        ([], ""),
        ([3], "3"),
        ([1, 2, 3], "1 to 3"),
        ([1, 2, 5, 7, 8], "1 to 2, 5, 7 to 8"),
        ([1, 3, 5, 7, 9], "1, 3, 5, 7 ..."),
    ],
)
def test_ranges(numbers, words):
    assert report.in_words(np.array(numbers, dtype=int)) == words


def test_zero_dispersion_with_its_bar():
    w = np.linspace(1.2, 2.0, 5)
    names = (
        "n_eff", "n_group", "dispersion_ps_per_nm_km", "beta2_ps2_per_km", "beta3_ps3_per_km",
        "beta4_ps4_per_km", "effective_area_um2", "gamma_per_w_m",
    )  # fmt: skip
    columns = dict.fromkeys(names, np.ones(5))
    table = DispersionTable(
        mode="TE0",
        wavelength_um=w,
        **columns,
        zero_dispersion_um=np.array([1.5302507]),
        error=ErrorBars(zero_dispersion_um=np.array([6e-7])),
    )
    text = report.as_text(report.dispersion_report(table, rows=3))
    assert "Zero dispersion: 1.5302507(6) um" in text
    assert [line.split()[0] for line in text.splitlines()[2:5]] == ["1.2", "1.6", "2"]


def test_missing_edges_are_none_with_the_reason():
    nan = float("nan")
    band = ConversionBand(
        1.55, 0.1, -3.0, 1.56, -20.0, 1.5, nan, nan, 200.0, nan, True, "low edge outside the band"
    )
    flux = PairFlux(1.55, 0.1, "pairs", 1.5e9, 1.0, 190.0, 200.0, "")
    table = ChannelKeys(length_mm=1.0, pump_um=1.55, pump_w=0.1)
    text = report.as_text(report.channel_report(table, band, flux))
    assert "nan" not in text
    assert text.splitlines()[-1] == "none: low edge outside the band"


def test_notes_once_each_and_the_caution_apart():
    assert report.notes_lines(["a", LASER_CAUTION, "b", "a"]) == ["note: a", "note: b"]


def test_ring_table_cuts_no_number():
    """Seven columns with the widest numbers there are; unknown pairs are told apart."""
    ring = Ring(
        with_bars(curve(gamma=1.0, half_band_thz=3.0), n_eff=1e-8, n_group=1e-5, beta2=0.01),
        radius_um=115,
        q_intrinsic=3e6,
        q_coupling=3e6,
    )
    results = SimpleNamespace(
        pairs=ring.pairs(1.55, 20),
        dispersion=ring.dispersion_coefficients(1.55),
        rates=ring.spontaneous(1.55, 1e-3, 20),
    )
    keys = RingKeys(radius_um=115, q_intrinsic=3e6, q_coupling=3e6, pump_um=1.55)
    text = report.as_text(*report.ring_report(keys, results, rows=20))
    assert "…" not in text and " nan" not in text
    assert max(map(len, text.splitlines())) <= 80
    assert "unknown pairs" in text and text.endswith("unknown: outside the solved band\n")
