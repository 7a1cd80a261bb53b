"""Energy, mismatch, gain and the error-bar rule as pure functions."""

from __future__ import annotations

import math

import numpy as np
import pytest

from materials.common.constants import omega_from_um
from phasematch import curve_protocol, mixing
from phasematch.weak_mixing import weak_photons_m2

from ..synthetic_curve import curve, with_bars


def test_photon_energy_is_conserved_to_rounding():
    rng = np.random.default_rng(5)
    pump = rng.uniform(1.2, 1.8, 1000)
    signal = rng.uniform(1.1, 2.0, 1000)
    idler = mixing.idler_um(pump, signal)
    left = 1.0 / signal + 1.0 / idler
    # a few roundings of numbers up to 2/1.2
    np.testing.assert_allclose(left, 2.0 / pump, rtol=0, atol=8 * np.finfo(float).eps)


def test_two_pumps_conserve_energy_and_reduce_to_one():
    idler = mixing.idler_um(1.5, 1.55, 1.6)
    assert 1 / 1.55 + 1 / idler == pytest.approx(1 / 1.5 + 1 / 1.6, rel=1e-15)
    assert mixing.idler_um(1.55, 1.5, 1.55) == mixing.idler_um(1.55, 1.5)


def test_idler_of_a_signal_above_twice_the_pump_is_nan():
    assert math.isnan(mixing.idler_um(1.5, 0.75))
    assert math.isnan(mixing.idler_um(1.5, 0.7))


def test_linear_mismatch_is_the_even_part_of_the_series():
    c = curve(beta2=-100.0, beta3=0.7, beta4=0.02)
    omega = np.linspace(1.0, 300.0, 40)
    # beta2, beta4 in ps^k/km, so 1e-3 per m; the odd orders drop out
    want = 1e-3 * (-100.0 * omega**2 + 0.02 * omega**4 / 12)
    got = mixing.linear_mismatch_per_m(c, c.omega0, c.omega0 + omega)
    # the large parts of beta cancel: absolute floor is rounding of 10 rad/um, 1e-8 /m
    np.testing.assert_allclose(got, want, rtol=1e-11, atol=3e-8)


def test_two_pump_mismatch_without_dispersion_of_its_own_is_of_second_order():
    c = curve(beta2=-100.0)
    d, w = 50.0, 80.0  # pumps at +-d, signal at w: beta2 (w^2 - d^2)
    got = mixing.linear_mismatch_per_m(c, c.omega0 + d, c.omega0 + w, c.omega0 - d)
    assert got == pytest.approx(1e-3 * -100.0 * (w**2 - d**2), rel=1e-10)


def test_sinhc_near_zero_and_far_away():
    q = np.array([0.0, 1e-300, 1e-12, -1e-12, 1e-3, -1e-3])
    series = 1 + q / 3 + 2 * q**2 / 45  # |sinh x/x|^2, next term q^3/315
    np.testing.assert_allclose(mixing.sinhc_squared(q), series, rtol=1e-11)
    np.testing.assert_allclose(np.exp(mixing.log_sinhc_squared(q)), series, rtol=1e-11)
    q = np.array([4.0, 100.0, -3.0, -50.0])
    np.testing.assert_allclose(
        mixing.log_sinhc_squared(q), np.log(mixing.sinhc_squared(q)), rtol=1e-13, atol=1e-14
    )


def test_enormous_gain_overflows_to_inf_quietly_and_its_logarithm_stays():
    assert mixing.idler_photons(0.0, 1.0, 1.0, 2000.0, 1.0) == np.inf
    got = mixing.log_idler_photons(0.0, 1.0, 1.0, 2000.0, 1.0)
    assert got == pytest.approx(2 * 2000.0 - math.log(4.0), rel=1e-14)  # sinh^2 -> e^(2x)/4
    assert mixing.log_idler_photons(0.0, 1.0, 1.0, 0.0, 1.0) == -np.inf
    assert math.isnan(float(mixing.sinhc_squared(np.nan)))


def test_two_pump_gain_equals_one_pump_gain_of_the_same_coupling():
    # 4 P1 P2 = P^2 and the same kappa: the same closed form
    one = mixing.idler_photons(30.0, 1.1, 0.9, 2.0, 3.0)
    two = mixing.idler_photons_two_pumps(30.0, 1.1, 0.9, 1.0, 1.0, 3.0)
    assert two == pytest.approx(one, rel=1e-15)


def test_power_phase_vanishes_without_power_even_when_gamma_is_unknown():
    assert mixing.total_mismatch_per_m(5.0, np.nan, np.nan, np.nan, 0.0) == 5.0
    assert mixing.total_mismatch_two_pumps_per_m(5.0, np.nan, np.nan, 0.0, 0.0) == 5.0
    assert mixing.total_mismatch_per_m(5.0, 1.1, 0.9, 1.0, 3.0) == pytest.approx(11.0)
    assert mixing.total_mismatch_two_pumps_per_m(5.0, 2.0, 1.0, 3.0, 4.0) == pytest.approx(15.0)


def test_weak_photons_agree_with_plain_quadrature_of_the_moment_equations():
    alpha, length = 46.0, 0.01
    k = np.array([0.0, 1e-5, 0.3, 3.0, 40.0]) / length
    got = weak_photons_m2(k, alpha, length)
    x, w = np.polynomial.legendre.leggauss(200)
    z, w = 0.5 * length * (x + 1), 0.5 * length * w
    for i, kappa in enumerate(k):
        stim = math.exp(-alpha * length) * abs(np.sum(w * np.exp(-(alpha + 1j * kappa) * z))) ** 2
        m = np.exp(-alpha * length) * np.sum(w * np.exp(1j * kappa * (length - z)))
        # Im m(z) = exp(-alpha z) int_0^z cos(kappa (z - z')) dz'
        rise = np.array([0.5 * zz * np.sum((np.cos(kappa * 0.5 * zz * (1 - x))) * w) for zz in z])
        rise = rise * 2.0 / length
        n = 2 * math.exp(-alpha * length) * np.sum(w * np.exp(-alpha * z) * rise)
        assert got.stimulated[i] == pytest.approx(stim, rel=1e-12)
        assert got.coincidences[i] == pytest.approx(abs(m) ** 2, rel=1e-12)
        assert got.singles[i] == pytest.approx(n, rel=1e-11)


def test_weak_photons_keep_their_digits_when_loss_and_mismatch_vanish():
    tiny = np.array([0.0, 1e-160, 1e-12, 1e-6])
    got = weak_photons_m2(tiny[:, None], tiny, 1.0)
    # first orders: stimulated exp(-2a), singles exp(-a)(1 - 2a/3), coincidences exp(-2a)
    a = np.broadcast_to(tiny, (4, 4))
    np.testing.assert_allclose(got.stimulated, 1 - 2 * a, atol=5e-12)
    np.testing.assert_allclose(got.singles, 1 - 5 * a / 3, atol=5e-12)
    np.testing.assert_allclose(got.coincidences, 1 - 2 * a, atol=5e-12)
    # across the changes of formula at a = 0.5 and k = 1 there is no step
    for a0, k0 in ((0.5, 0.3), (0.2, 1.0)):
        below = weak_photons_m2(k0 * (1 - 1e-14), a0 * (1 - 1e-14), 1.0)
        above = weak_photons_m2(k0 * (1 + 1e-14), a0 * (1 + 1e-14), 1.0)
        assert below.singles == pytest.approx(float(above.singles), rel=1e-12)


def test_error_bar_is_the_weighted_sum_of_the_changes():
    c = with_bars(curve(), weight=2.0, beta2=0.5, n_eff=1e-6)
    got = curve_protocol.error_bar(c, lambda k: k.beta2_ps2_per_km(1.55))
    assert got == pytest.approx(2.0 * 0.5, rel=1e-9)
    both = curve_protocol.error_bar(
        c, lambda k: np.array([k.n_eff(1.55), k.beta2_ps2_per_km(1.55)])
    )
    np.testing.assert_allclose(both, [2e-6, 1.0], rtol=1e-8)
    assert curve_protocol.error_bar(curve(), lambda k: k.n_eff(1.55)) == 0.0
    assert math.isnan(curve_protocol.error_bar(c, lambda k: math.nan))


def test_frequencies_rounded_over_the_edge_count_as_inside():
    c = curve()
    short, long = c.band_um
    edges = np.array([omega_from_um(short), omega_from_um(long)])
    nudged = edges * (1 + np.array([1, -1]) * 4e-16)
    assert np.all(curve_protocol.inside(c, nudged))
    assert np.all(np.isfinite(c.beta_rad_per_um(curve_protocol.snap(c, nudged))))
    assert not np.any(curve_protocol.inside(c, edges * (1 + np.array([1, -1]) * 1e-9)))
    assert np.all(np.isnan(curve_protocol.gamma_or_nan(c, [short * 0.9, long * 1.1])))
    assert np.all(np.isfinite(curve_protocol.gamma_or_nan(c, [short, 1.55, long])))


@pytest.mark.filterwarnings("error")
def test_unknown_mismatch_is_nan_without_a_warning():
    unknown = np.array([np.nan, np.inf, -np.inf, 0.0, 5.0])
    for loss in (0.0, 3.0, 1e4):
        for numbers in weak_photons_m2(unknown, loss, 0.01):
            assert np.isnan(numbers).tolist() == [True, True, True, False, False]
    # far from phase matching nothing overflows on the way to nothing
    assert all(number < 1e-300 for number in weak_photons_m2(1e200, 1.0, 0.01))
