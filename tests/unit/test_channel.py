"""A channel: mismatch, gain, conversion, pairs, maps and bands on a curve made of numbers."""

from __future__ import annotations

import dataclasses
import math
from types import SimpleNamespace

import numpy as np
import pytest
from scipy.integrate import solve_ivp

import materials
from materials.common.constants import TWO_PI, omega_from_um
from materials.common.errors import InputError, OutOfRange
from phasematch.caution import LASER_CAUTION
from phasematch.channel import Channel
from phasematch.mixing import idler_um
from phasematch.ring import Ring

from ..synthetic_curve import curve, with_bars


@pytest.fixture
def channel():
    return Channel(curve(beta2=-100.0, beta3=0.5, beta4=0.02, gamma=3.0), length_mm=20)


def test_scalars_in_scalars_out_and_arrays_broadcast(channel):
    for method in (channel.mismatch_per_m, channel.idler_efficiency, channel.signal_gain):
        assert type(method(1.55, 1.5, 0.1)) is float
        table = method(np.linspace(1.5, 1.6, 3)[:, None], np.linspace(1.4, 1.5, 4), 0.1)
        assert table.shape == (3, 4)
        assert table[1, 2] == method(1.55, np.linspace(1.4, 1.5, 4)[2], 0.1)
    assert type(channel.pair_flux_per_s(1.55, 0.1)) is float
    assert repr(channel) == "Channel(length_mm=20.0, loss_db_per_cm=0.0)"
    assert channel.pair_flux_per_s([1.54, 1.55], [[0.1], [0.2], [0.3]]).shape == (3, 2)


def test_signal_and_idler_may_be_exchanged(channel):
    signal = np.linspace(1.3, 1.54, 20)
    idler = idler_um(1.55, signal)
    for power in (0.0, 0.5, 50.0):
        np.testing.assert_allclose(
            channel.mismatch_per_m(1.55, signal, power),
            channel.mismatch_per_m(1.55, idler, power),
            rtol=1e-9,
            atol=3e-8,
        )
    np.testing.assert_allclose(
        channel.signal_gain(1.55, signal, 50.0), channel.signal_gain(1.55, idler, 50.0), rtol=1e-9
    )


@pytest.mark.parametrize("loss", [0.0, 2.0])
def test_signal_gain_and_idler_keep_photon_numbers(loss):
    c = Channel(curve(gamma=3.0), length_mm=20, loss_db_per_cm=loss)
    signal = np.linspace(1.3, 1.8, 11)
    photons = c.idler_efficiency(1.55, signal, 4.0) * idler_um(1.55, signal) / signal
    passed = 10 ** (-0.1 * loss * 2.0)  # equal loss takes photons evenly: the difference decays
    # the gain is about 1, so the difference is good to a few roundings of 1
    got = c.signal_gain(1.55, signal, 4.0) - passed
    np.testing.assert_allclose(got, photons, rtol=1e-11, atol=1e-15)


def test_gain_is_the_integral_of_the_coupled_equations():
    c = Channel(curve(beta2=-100.0, gamma=3.0), length_mm=200)
    pump, signal, power = omega_from_um(1.55), omega_from_um(1.5), 2.0
    g_s, g_i = 3.0 * signal / pump, 3.0 * (2 * pump - signal) / pump
    dbeta = c.mismatch_per_m(1.55, 1.5, 0.0)

    def slope(z, y):  # a_s, a_i in the notation of the coupled-amplitude equations, pump constant
        a_s, a_i = y[0] + 1j * y[1], y[2] + 1j * y[3]
        turn = np.exp(2j * 3.0 * power * z - 1j * dbeta * z) * power
        d_s = 1j * g_s * (2 * power * a_s + turn * np.conj(a_i))
        d_i = 1j * g_i * (2 * power * a_i + turn * np.conj(a_s))
        return [d_s.real, d_s.imag, d_i.real, d_i.imag]

    out = solve_ivp(slope, (0, 0.2), [1.0, 0, 0, 0], rtol=1e-11, atol=1e-13, method="DOP853").y
    # integrator tolerance 1e-11 over some 30 rad of phase
    assert c.signal_gain(1.55, 1.5, power) == pytest.approx(out[0, -1] ** 2 + out[1, -1] ** 2, 1e-8)
    want = out[2, -1] ** 2 + out[3, -1] ** 2
    assert c.idler_efficiency(1.55, 1.5, power) == pytest.approx(want, rel=1e-8)


def test_low_power_reaches_the_low_gain_form_in_first_order(channel):
    small = [channel.idler_efficiency(1.55, 1.5, p) for p in (2e-3, 1e-3, 5e-4)]
    weak = [channel.low_gain_efficiency(1.55, 1.5, p) for p in (2e-3, 1e-3, 5e-4)]
    miss = np.array(small) / weak - 1
    np.testing.assert_allclose(miss[:-1] / miss[1:], 2.0, rtol=1e-3)  # order gamma P L


def test_loss_form_reaches_the_lossless_one():
    for counted in ("singles", "coincidences"):
        c = Channel(curve(gamma=3.0), length_mm=20, loss_db_per_cm=1e-9)
        free = Channel(curve(gamma=3.0), length_mm=20)
        signal = np.linspace(1.4, 1.54, 5)
        # gamma P L = 6e-11, loss 2e-9 dB: both differ in first order, times 30 near a null
        got = c.pair_flux_density(1.55, signal, 1e-9, counted=counted)
        np.testing.assert_allclose(got, free.pair_flux_density(1.55, signal, 1e-9), rtol=1e-7)
        np.testing.assert_allclose(
            c.idler_efficiency(1.55, signal, 1e-9),
            free.idler_efficiency(1.55, signal, 1e-9),
            rtol=1e-7,
        )


def test_outside_the_band_is_nan_with_the_reason_kept(channel):
    short, long = channel.curve.band_um
    assert math.isnan(channel.mismatch_per_m(1.55, short * 0.99, 0.1))
    assert math.isnan(channel.mismatch_per_m(long * 1.01, 1.5, 0.1))
    assert math.isnan(channel.idler_efficiency(1.4, 2.0, 0.1))  # idler at 1.08 um
    table = channel.map([1.55, 1.4, 3.0], [1.5, 2.0, 0.5], 0.1)
    assert table.reason.tolist() == [
        ["", "", "signal outside the solved band"],
        ["", "idler outside the solved band", "signal outside the solved band"],
        ["pump outside the solved band"] * 3,
    ]
    lossy = dataclasses.replace(channel, loss_db_per_cm=1.0).map([1.55, 3.0], [1.5, 0.5], 0.1)
    assert np.array_equal(np.isnan(lossy.efficiency_db), lossy.reason != "")
    missing = np.isnan(table.mismatch_per_m)
    assert np.array_equal(missing, table.reason != "")
    assert np.array_equal(np.isnan(table.gain_db), missing)


def test_band_edges_themselves_are_inside():
    c = Channel(curve(), length_mm=1)
    short, long = c.curve.band_um
    assert np.all(np.isfinite(c.mismatch_per_m(1.55, [short, long], 0.1)))


def test_map_agrees_with_the_methods_and_carries_bars():
    best = curve(beta2=-100.0, gamma=3.0)
    c = Channel(with_bars(best, beta2=0.5), length_mm=20)
    pumps, signals = np.linspace(1.5, 1.6, 4), np.linspace(1.4, 1.7, 5)
    table = c.map(pumps, signals, 0.3)
    args = (pumps[:, None], signals, 0.3)
    np.testing.assert_allclose(table.mismatch_per_m, c.mismatch_per_m(*args), rtol=1e-15)
    gain = 10 * np.log10(c.signal_gain(*args))
    np.testing.assert_allclose(table.gain_db, gain, rtol=1e-12, atol=1e-14)
    eta = 10 * np.log10(c.idler_efficiency(*args))
    np.testing.assert_allclose(table.efficiency_db, eta, rtol=1e-12)
    # beta2 off by 0.5 ps2/km moves dbeta by 0.5e-3 Omega^2 per m
    offset = omega_from_um(signals) - omega_from_um(pumps)[:, None]
    np.testing.assert_allclose(
        table.error["mismatch_per_m"], 0.5e-3 * offset**2, rtol=1e-8, atol=1e-7
    )
    assert table.error["efficiency_db"].shape == (4, 5)
    assert LASER_CAUTION in table.notes
    assert not table.mismatch_per_m.flags.writeable
    with pytest.raises(dataclasses.FrozenInstanceError):
        table.pump_w = 1.0


def test_a_map_too_coarse_for_its_fringes_says_so():
    c = Channel(curve(beta2=-100.0, beta4=0.0), length_mm=20)
    fine = c.map([1.55], np.linspace(1.53, 1.57, 201), 0.1)
    assert not any("fringes" in note for note in fine.notes)
    coarse = c.map([1.55], np.linspace(1.3, 1.9, 11), 0.1)
    (said,) = [note for note in coarse.notes if "fringes" in note]
    factor = float(said.split("; about ")[1].split()[0])
    assert 2.0 < factor < 100.0
    points = int(11 * factor * 2.0) + 1  # the steepest of the coarse grid is a mean over a step
    again = c.map([1.55], np.linspace(1.3, 1.9, points), 0.1)
    assert not any("fringes" in note for note in again.notes)


def test_map_of_enormous_gain_stays_finite():
    table = Channel(curve(gamma=300.0), length_mm=1000).map([1.55], [1.29], 10.0)
    assert np.isfinite(table.gain_db).all()
    assert table.gain_db[0, 0] > 10_000


def test_without_power_the_mismatch_is_linear_and_needs_no_gamma():
    c = Channel(curve(beta2=-100.0, gamma=math.nan, notes=("no n2",)), length_mm=20)
    offset = omega_from_um(1.5) - omega_from_um(1.55)
    assert c.mismatch_per_m(1.55, 1.5, 0.0) == pytest.approx(-0.1 * offset**2, rel=1e-9)
    assert math.isnan(c.mismatch_per_m(1.55, 1.5, 0.1))
    table = c.map([1.55], [1.5], 0.1)
    assert table.reason[0, 0] == "gamma not known"
    assert "no n2" in table.notes
    still = c.map([1.55], [1.5], 0.0)
    assert still.reason[0, 0] == "no pump power: no idler"
    assert np.isfinite(still.mismatch_per_m).all()
    assert LASER_CAUTION not in still.notes
    flux = c.pair_flux(1.55, 0.1)
    assert math.isnan(flux.flux_per_s) and flux.reason == "gamma not known"
    assert c.conversion_band(1.55, 0.1).reason == "gamma not known"
    assert c.conversion_band(1.55, 0.0).reason == ""


def test_conversion_band_edges_lie_at_the_level_asked_for(channel):
    for pump, power, level in ((1.55, 0.1, -3.0), (1.53, 0.0, -10.0), (1.55, 3.0, -3.0)):
        band = channel.conversion_band(pump, power, level_db=level)
        assert band.reason == ""
        if power:
            edges = channel.idler_efficiency(pump, np.array([band.short_um, band.long_um]), power)
            got = 10 * np.log10(edges) - band.peak_efficiency_db
            np.testing.assert_allclose(got, level, atol=1e-8)
            nearby = np.linspace(band.short_um, band.long_um, 101)[1:-1]
            inner = 10 * np.log10(channel.idler_efficiency(pump, nearby, power))
            assert np.all(inner > band.peak_efficiency_db + level)
            assert np.all(inner <= band.peak_efficiency_db + 1e-9)
        assert band.width_thz == pytest.approx(band.high_thz - band.low_thz)
        assert band.contains_pump


def test_conversion_band_beside_the_pump_and_outside_the_solved_band():
    # strong pump, anomalous: kappa = 0 at Omega^2 = 2 gamma P/|beta2|, far from the pump
    c = Channel(curve(beta2=-10.0, gamma=100.0), length_mm=100)
    band = c.conversion_band(1.55, 5.0)
    want = math.sqrt(2 * 100.0 * 5.0 / 10e-3)
    assert abs(TWO_PI * 299.792458 / band.peak_um - c.curve.omega0) == pytest.approx(want, rel=0.05)
    assert not band.contains_pump
    assert any("beside the pump" in note for note in band.notes)
    flat = Channel(curve(beta2=-0.01), length_mm=1).conversion_band(1.55, 0.0)
    # omega_i/omega_s alone takes 3 dB off on the short side
    assert math.isnan(flat.long_um) and math.isnan(flat.width_thz)
    assert "outside the solved band" in flat.reason
    assert c.conversion_band(9.0, 0.1).reason == "pump outside the solved band"


def test_conversion_band_bars_come_from_the_curve():
    c = Channel(with_bars(curve(beta2=-100.0), beta2=1.0), length_mm=20)
    band = c.conversion_band(1.55, 0.0)
    # the width goes as |beta2|^(-1/2): half a percent for one percent
    assert band.error["width_thz"] == pytest.approx(0.005 * band.width_thz, rel=0.03)


def test_pair_flux_over_filters_adds_up_and_knows_its_mirror(channel):
    power = 0.01
    thz = 299.792458
    centre = thz / 1.55

    def band(a, b):
        return (thz / (centre + a), thz / (centre + b))

    whole = channel.pair_flux_per_s(1.55, power)
    parts = [
        channel.pair_flux_per_s(1.55, power, signal_band_um=band(a, b))
        for a, b in ((1e-9, 2.0), (2.0, 10.0), (10.0, 59.999999))
    ]
    assert sum(parts) == pytest.approx(whole, rel=1e-6)
    signal = channel.pair_flux_per_s(1.55, power, signal_band_um=band(2.0, 10.0))
    idler = channel.pair_flux_per_s(1.55, power, idler_band_um=band(-10.0, -2.0))
    assert idler == pytest.approx(signal, rel=1e-9)
    both = channel.pair_flux_per_s(
        1.55, power, signal_band_um=band(2.0, 10.0), idler_band_um=band(-5.0, -1.0)
    )
    assert both == pytest.approx(
        channel.pair_flux_per_s(1.55, power, signal_band_um=band(2.0, 5.0)), rel=1e-9
    )
    apart = channel.pair_flux(
        1.55, power, signal_band_um=band(2.0, 3.0), idler_band_um=band(-5.0, -4.0)
    )
    assert apart.flux_per_s == 0.0
    assert any("energy" in note for note in apart.notes)


def test_pair_flux_follows_a_plain_sum_of_the_density():
    c = Channel(curve(beta2=-100.0, beta4=0.05, gamma=3.0), length_mm=300)  # about 200 fringes
    for counted, loss in (("singles", 0.0), ("singles", 0.3), ("coincidences", 0.3)):
        lossy = dataclasses.replace(c, loss_db_per_cm=loss)
        thz = np.linspace(0.0, 60.0, 2_000_001)[1:-1]
        density = lossy.pair_flux_density(
            1.55, 299.792458 / (299.792458 / 1.55 + thz), 1e-3, counted=counted
        )
        want = 1e12 * (thz[1] - thz[0]) * (density.sum() + 0.5 * density[0])
        got = lossy.pair_flux_per_s(1.55, 1e-3, counted=counted)
        assert got == pytest.approx(want, rel=1e-7)


def test_pair_flux_result_names_what_it_counts_and_where():
    best = curve(beta2=-100.0, gamma=3.0)
    flux = Channel(with_bars(best, beta2=1.0), length_mm=10).pair_flux(1.55, 1e-3)
    assert flux.counted == "pairs"
    # goes as |beta2|^(-1/2) but for the end of the band
    assert flux.error["flux_per_s"] == pytest.approx(0.005 * flux.flux_per_s, rel=0.05)
    assert flux.quadrature_error_per_s < 1e-8 * flux.flux_per_s
    assert LASER_CAUTION in flux.notes
    # the cut-off share against the flux of a band twice as wide (itself short of an eighth of it)
    wide = Channel(curve(beta2=-100.0, gamma=3.0, half_band_thz=120.0), length_mm=10)
    more = 100 * (wide.pair_flux_per_s(1.55, 1e-3) / flux.flux_per_s - 1.0)
    (said,) = [note for note in flux.notes if "beyond the solved band" in note]
    assert float(said.split("about ")[1].split(" %")[0]) == pytest.approx(more / 0.875, rel=0.3)
    lossy = Channel(best, length_mm=10, loss_db_per_cm=2.0)
    assert lossy.pair_flux(1.55, 1e-3).counted == "coincidences"
    assert lossy.pair_flux(1.55, 1e-3, counted="singles").counted == "singles"
    flat = Channel(curve(beta2=-0.1), length_mm=1).pair_flux(1.55, 1e-3)
    assert any("has not fallen" in note for note in flat.notes)
    out = lossy.pair_flux(1.55, 1e-3, signal_band_um=(0.8, 1.0))
    assert math.isnan(out.flux_per_s) and "solved band" in out.reason
    assert lossy.pair_flux(5.0, 1e-3).reason == "pump outside the solved band"


def test_strong_pump_with_loss_is_noted():
    c = Channel(curve(gamma=100.0), length_mm=50, loss_db_per_cm=1.0)
    assert any("weak pump" in note for note in c.map([1.55], [1.5], 1.0).notes)
    assert not any("weak pump" in note for note in c.map([1.55], [1.5], 1e-3).notes)


def test_media_that_absorb_two_photons_are_noted_with_every_power():
    wire = SimpleNamespace(
        media=[materials.load(key) for key in ("Si-Li1980-293K", "SiO2-Malitson1965")]
    )
    said = (
        "two-photon absorption (5e-12 m/W for Si-Li1980-293K) and free carriers are not in "
        "these numbers"
    )
    bent = curve(section=wire, bend_radius_um=100.0)
    channel = Channel(bent, length_mm=10)
    ring = Ring(bent, radius_um=100.0, q_intrinsic=1e5, q_coupling=1e5)
    for result in (
        channel.map([1.55], [1.5], 0.1),
        channel.pair_flux(1.55, 0.1),
        channel.conversion_band(1.55, 0.1),
        ring.spontaneous(1.55, 1e-4, 2),
        ring.stimulated(1.55, 1e-4, 1e-6, 2),
    ):
        assert {said, LASER_CAUTION} <= set(result.notes)
    assert said not in channel.conversion_band(1.55, 0.0).notes
    glass = curve(section=SimpleNamespace(media=wire.media[1:]))
    assert not any("two-photon" in n for n in Channel(glass, length_mm=10).pair_flux(1.55, 1).notes)


def test_bad_input_gives_one_clear_line(channel):
    c = channel.curve
    for bad in (0.0, -1.0, math.nan, math.inf):
        with pytest.raises(OutOfRange, match="length_mm"):
            Channel(c, length_mm=bad)
        with pytest.raises(OutOfRange, match="pump_um"):
            channel.mismatch_per_m(bad, 1.5, 0.1)
    with pytest.raises(OutOfRange, match="loss_db_per_cm"):
        Channel(c, length_mm=1, loss_db_per_cm=-0.1)
    with pytest.raises(OutOfRange, match="pump_w"):
        channel.signal_gain(1.55, 1.5, -0.1)
    with pytest.raises(InputError, match="counted"):
        channel.pair_flux_per_s(1.55, 0.1, counted="all")
    with pytest.raises(InputError, match="holds the pump"):
        channel.pair_flux_per_s(1.55, 0.1, signal_band_um=(1.5, 1.6))
    with pytest.raises(OutOfRange, match="level_db"):
        channel.conversion_band(1.55, 0.1, level_db=3.0)
    with pytest.raises(InputError, match="one-dimensional"):
        channel.map([[1.55]], [1.5], 0.1)
    with pytest.raises(InputError, match="no number"):
        Channel(c, length_mm="long")
