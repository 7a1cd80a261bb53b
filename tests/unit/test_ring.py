"""A ring on a curve made of numbers: resonances, pairs, maps, light, and bad input."""

from __future__ import annotations

import decimal
import math
import types

import numpy as np
import pytest

from materials.common.constants import C_UM_PER_PS, HBAR_W_PS2, TWO_PI
from materials.common.errors import InputError, OutOfRange, SolverError
from phasematch import cavity
from phasematch.bend_note import bend_shift
from phasematch.caution import LASER_CAUTION
from phasematch.resonances import find_lines
from phasematch.ring import Ring

from ..synthetic_curve import curve, with_bars


def nitride(q=2e6, **changes):
    given = {"beta2": -50.0, "beta3": 0.4, "beta4": 0.02, "half_band_thz": 30.0, **changes}
    return Ring(curve(**given), radius_um=100.0, q_intrinsic=q, q_coupling=q)


def exact_offsets(c, radius, orders):
    """Resonances as offsets from the curve's centre, Newton with 50 digits."""
    decimal.getcontext().prec = 50
    betas = [decimal.Decimal(b) / math.factorial(k) for k, b in enumerate(c.betas)]
    big_r, out = decimal.Decimal(radius), []
    for m in orders:
        x = decimal.Decimal(1)
        for _ in range(60):
            value = sum(b * x**k for k, b in enumerate(betas))
            slope = sum(k * b * x ** (k - 1) for k, b in enumerate(betas) if k)
            step = (decimal.Decimal(int(m)) / big_r - value) / slope
            x += step
        out.append(x)
    return out


def test_resonances_and_misalignment_keep_their_digits():
    ring = nitride()
    order = ring.pump_order(1.55)
    mu = np.array([1, 2, 7, 30, 100])
    table = ring.pairs(1.55, 100)
    orders = np.concatenate([[order], order + mu, order - mu])
    want = exact_offsets(ring.curve, 100.0, orders)
    lines = find_lines(ring.curve, 100.0, orders)
    got = lines.omega_rad_per_ps - ring.curve.omega0 + lines.rest_rad_per_ps
    # beta is rounded at 1e-16 of 7.4 rad/um: 2e-13 rad/ps or 0.03 Hz a rounding
    np.testing.assert_allclose(got, np.array(want, dtype=float), rtol=0, atol=2e-12)
    exact = [float(want[1 + i] + want[6 + i] - 2 * want[0]) for i in range(5)]
    miss = 1e6 / TWO_PI * np.array(exact)
    error_hz = 1e6 * np.abs(table.misalignment_mhz[mu - 1] - miss)
    assert error_hz.max() < 0.3  # a few roundings of beta; 0.05 measured
    assert np.all(miss > 0.1)


def test_every_resonance_is_a_whole_number_of_waves():
    ring = nitride()
    lines = ring.resonances()
    omega = TWO_PI * lines.frequency_thz
    turns = 100.0 * ring.curve.beta_rad_per_um(np.clip(omega, *ring.curve.band))
    np.testing.assert_allclose(turns, lines.order, rtol=0, atol=1e-9)
    assert np.all(np.diff(lines.order) == 1)
    low, high = ring.curve.band
    edge = 100.0 * ring.curve.beta_rad_per_um(np.array([low, high]))
    assert lines.order[0] == math.ceil(edge[0]) and lines.order[-1] == math.floor(edge[1])
    # the outermost have one neighbour only
    assert np.isnan(lines.fsr_ghz[[0, -1]]).all() and np.isfinite(lines.fsr_ghz[1:-1]).all()
    some = ring.resonances(1.5, 1.6)
    assert some.wavelength_um.min() >= 1.5 and some.wavelength_um.max() <= 1.6
    assert np.isfinite(some.fsr_ghz).all()
    assert set(some.order) < set(lines.order)


def test_pairs_have_the_pump_in_the_middle_and_their_columns_agree():
    ring = nitride()
    table = ring.pairs(pump_um=1.55, count=40)
    assert abs(table.pump_thz - C_UM_PER_PS / 1.55) < 0.5e-3 * ring.fsr_ghz(1.55) * 1.01
    assert table.mu.tolist() == list(range(1, 41))
    second = table.signal_thz + table.idler_thz - 2 * table.pump_thz
    np.testing.assert_allclose(1e6 * second, table.misalignment_mhz, atol=1e-6)
    assert np.all(table.signal_thz > table.pump_thz) and np.all(table.idler_thz < table.pump_thz)
    np.testing.assert_allclose(table.signal_um, C_UM_PER_PS / table.signal_thz, rtol=1e-15)
    mean = 0.5 * (table.signal_thz + table.idler_thz)
    np.testing.assert_allclose(table.linewidth_mhz, 1e6 * mean / 1e6, rtol=1e-14)  # Q_L 1e6
    ratio = table.misalignment_mhz / table.linewidth_mhz
    np.testing.assert_allclose(table.misalignment_linewidths, ratio, rtol=1e-14)
    assert np.array_equal(table.aligned, np.abs(ratio) <= 1.0)
    assert table.aligned.any() and not table.aligned.all()
    assert not table.misalignment_mhz.flags.writeable


def test_pairs_beyond_the_band_are_nan_with_the_reason():
    table = nitride().pairs(1.55, 300)
    gone = np.isnan(table.misalignment_mhz)
    assert gone.any() and not gone.all()
    assert np.array_equal(gone, table.reason == "outside the solved band")
    assert np.array_equal(~gone, table.reason == "")
    assert not table.aligned[gone].any()
    assert np.isnan(table.linewidth_mhz[gone]).all()
    assert len(table.signal_thz) == 300


def test_pump_near_the_edge_takes_the_last_resonance_inside():
    ring = nitride()
    short, long = ring.curve.band_um
    orders = ring.resonances().order
    assert ring.pairs(short, 2).pump_order == orders[-1]
    assert ring.pairs(long, 2).pump_order == orders[0]
    assert np.isnan(ring.pairs(long, 2).misalignment_mhz).all()


def test_bars_of_the_misalignment_come_from_the_curve():
    best = curve(beta2=-50.0, half_band_thz=30.0)
    ring = Ring(
        with_bars(best, weight=2.0, beta2=0.5), radius_um=100, q_intrinsic=2e6, q_coupling=2e6
    )
    table = ring.pairs(1.55, 20)
    # delta is proportional to beta2 but for higher orders: 2 x 1 %
    np.testing.assert_allclose(table.error["misalignment_mhz"], 0.02 * table.misalignment_mhz, 0.02)
    np.testing.assert_allclose(table.misalignment_error_mhz, table.error["misalignment_mhz"])
    d = ring.dispersion_coefficients(1.55)
    assert d.error["d2_mhz"] == pytest.approx(0.02 * d.d2_mhz, rel=1e-3)
    # an index offset moves every line by n_eff/n_g of it, and hardly a second difference
    shifted = Ring(with_bars(best, n_eff=1e-6), radius_um=100, q_intrinsic=2e6, q_coupling=2e6)
    lines = shifted.resonances(1.54, 1.56)
    want = 1e-6 / 2.1 * lines.frequency_thz
    np.testing.assert_allclose(lines.error["frequency_thz"], want, rtol=0.01)
    assert shifted.pairs(1.55, 20).error["misalignment_mhz"].max() < 1e-3


def test_detuning_map_is_the_pairs_of_every_pump():
    ring = nitride()
    table = ring.detuning_map((1.53, 1.57), count=12)
    assert table.misalignment_mhz.shape == (len(table.pump_order), 12)
    for row in (0, len(table.pump_order) // 2, -1):
        one = ring.pairs(float(table.pump_um[row]), 12)
        assert one.pump_order == table.pump_order[row]
        np.testing.assert_allclose(table.misalignment_mhz[row], one.misalignment_mhz, atol=1e-5)
        np.testing.assert_allclose(table.linewidth_mhz[row], one.linewidth_mhz, rtol=1e-13)
        assert np.array_equal(table.aligned[row], one.aligned)
    whole = ring.detuning_map(count=12)
    assert np.array_equal(np.isnan(whole.misalignment_mhz), whole.reason != "")
    assert np.isnan(whole.misalignment_mhz[0]).all()
    assert np.isfinite(whole.misalignment_mhz[len(whole.pump_order) // 2]).all()


def test_integrated_dispersion_holds_the_misalignment_as_its_even_part():
    ring = nitride()
    whole, table = ring.integrated_dispersion(1.55, 50), ring.pairs(1.55, 50)
    assert whole.integrated_mhz[50] == 0.0
    even = whole.integrated_mhz[51:] + whole.integrated_mhz[49::-1]
    np.testing.assert_allclose(even, table.misalignment_mhz, atol=1e-4)
    d = ring.dispersion_coefficients(1.55)
    mu = 5.0
    series = d.d2_mhz * mu**2 / 2 + 1e-3 * (d.d3_khz * mu**3 / 6 + d.d4_khz * mu**4 / 24)
    assert whole.integrated_mhz[55] == pytest.approx(series, rel=1e-6)


def test_numbers_of_a_ring_scalars_in_scalars_out():
    ring = nitride()
    for method in (ring.fsr_ghz, ring.linewidth_mhz, ring.finesse, ring.build_up):
        assert type(method(1.55)) is float
        assert method(np.array([1.5, 1.55])).shape == (2,)
    assert repr(ring) == "Ring(radius_um=100.0, q_intrinsic=2000000.0, q_coupling=2000000.0)"
    assert ring.q_loaded == 1e6 and ring.escape_fraction == 0.5
    assert ring.finesse(1.55) == pytest.approx(1e3 * ring.fsr_ghz(1.55) / ring.linewidth_mhz(1.55))
    half = 0.5 * ring.linewidth_mhz(1.55)
    assert ring.build_up(1.55, half) == pytest.approx(0.5 * ring.build_up(1.55), rel=1e-12)
    with pytest.raises(OutOfRange):
        ring.fsr_ghz(3.0)


def test_pair_rate_solves_the_moment_equations():
    """Steady state of the two-mode equations with unequal widths and detuning."""
    g, ws, wi, delta = 0.3, 1.0, 0.7, 0.4
    # unknowns n_s, n_i, Re m, Im m:  n' = -w n + 2 g Im m,
    # m' = (-i delta - (ws + wi)/2) m + i g (1 + n_s + n_i)
    mean = 0.5 * (ws + wi)
    matrix = np.array(
        [[-ws, 0, 0, 2 * g], [0, -wi, 0, 2 * g], [0, 0, -mean, delta], [g, g, -delta, -mean]]
    )
    n_s, n_i, _, im_m = np.linalg.solve(matrix, [0, 0, 0, -g])
    x = cavity.threshold_fraction(g, ws, wi, delta)
    made = cavity.pair_rate_inside(g, ws, wi, delta) / (1 - x)
    assert made == pytest.approx(2 * g * im_m, rel=1e-13)
    assert ws * n_s == pytest.approx(made, rel=1e-13) == pytest.approx(wi * n_i, rel=1e-13)
    # at x = 1 the matrix has lost its inverse
    at = g / math.sqrt(x)
    matrix[0, 3] = matrix[1, 3] = 2 * at
    matrix[3, 0] = matrix[3, 1] = at
    assert abs(np.linalg.det(matrix)) < 1e-14


def test_threshold_gain_is_where_x_reaches_one():
    delta = np.array([0.01, 0.3, 1.0, 5.0])
    for ws, wi in ((1.0, 1.0), (1.1, 0.9), (3.0, 0.2)):
        g = cavity.threshold_gain(ws, wi, delta)
        np.testing.assert_allclose(
            cavity.threshold_fraction(g, ws, wi, delta - 2 * g), 1.0, rtol=1e-12
        )
    equal = cavity.threshold_gain(1.0, 1.0, delta)
    np.testing.assert_allclose(equal, (1 + delta**2) / (4 * delta), rtol=1e-14)
    assert np.isnan(cavity.threshold_gain(1.0, 1.0, np.array([0.0, -1.0]))).all()


def test_spontaneous_follows_the_hot_misalignment():
    ring = nitride()
    rates = ring.spontaneous(1.55, 1e-3, 20)
    table = ring.pairs(1.55, 20)
    np.testing.assert_allclose(rates.misalignment_mhz, table.misalignment_mhz, atol=1e-6)
    shift = rates.misalignment_mhz - rates.hot_misalignment_mhz
    # each line shifts by its own omega v_g; the mean of the two is the pump's to second order
    omega_s, omega_i = (TWO_PI * f for f in (table.signal_thz, table.idler_thz))
    speeds = [1.0 / ring.curve.beta_rad_per_um(w, 1) for w in (omega_s, omega_i)]
    at_pump = TWO_PI * table.pump_thz / ring.curve.beta_rad_per_um(TWO_PI * table.pump_thz, 1)
    twice = (omega_s * speeds[0] + omega_i * speeds[1]) / at_pump - 1.0
    np.testing.assert_allclose(shift, 2 * rates.kerr_shift_mhz * twice, rtol=1e-7)
    assert np.all(np.abs(twice - 1.0) < 1e-3)
    assert rates.kerr_shift_mhz > 0.0
    omega = TWO_PI * table.pump_thz
    stored = rates.build_up * 1e-3 * ring.length_um * 2.1 / C_UM_PER_PS
    assert rates.photons_inside == pytest.approx(stored / (HBAR_W_PS2 * omega), rel=1e-4)
    # the same shift from the power that goes round: gamma v_g P_circulating, in rad/ps
    round_power = rates.build_up * 1e-3
    direct = 1e-6 * C_UM_PER_PS / 2.1 * round_power * 1e6 / TWO_PI
    assert rates.kerr_shift_mhz == pytest.approx(direct, rel=1e-4)
    np.testing.assert_allclose(rates.singles_signal_per_s, 0.5 * rates.pairs_inside_per_s)
    np.testing.assert_allclose(rates.coincidences_per_s, 0.25 * rates.pairs_inside_per_s)
    cold = ring.spontaneous(1.55, 1e-3, 20, kerr_shift=False)
    np.testing.assert_allclose(cold.hot_misalignment_mhz, cold.misalignment_mhz)
    assert LASER_CAUTION in rates.notes
    assert LASER_CAUTION in ring.spontaneous(1.55, 0.0, 2).notes  # its thresholds are powers
    assert LASER_CAUTION not in ring.pairs(1.55, 2).notes


def test_rates_stop_at_threshold_with_the_reason():
    ring = nitride()
    least = ring.spontaneous(1.55, 0.0, 60).threshold_w
    power = np.nanmin(least)
    first = int(np.nanargmin(least)) + 1
    below = ring.spontaneous(1.55, power * (1 - 1e-6), 60)
    assert np.isfinite(below.pairs_inside_per_s).all()
    assert below.threshold_fraction[first - 1] == pytest.approx(1.0, abs=1e-5)
    assert any("low gain" in note for note in below.notes)
    above = ring.spontaneous(1.55, power * (1 + 1e-6), 60)
    assert np.isnan(above.pairs_inside_per_s).all()
    assert np.isnan(above.coincidences_per_s).all()
    assert "threshold" in above.reason[first - 1]
    assert all(above.reason)
    said = f"pair {first} reaches first at {power:.4g} W"
    assert any(said in note for note in above.notes)
    assert np.isnan(ring.stimulated(1.55, power * 1.01, 1e-9, 60).idler_w).all()
    # a pair that was beyond the ones listed stops the others too
    few = ring.spontaneous(1.55, power * (1 + 1e-6), first - 1)
    assert np.isnan(few.pairs_inside_per_s).all()
    assert f"pair {first}" in few.reason[0]


def test_normal_dispersion_never_oscillates():
    ring = nitride(beta2=50.0, beta4=0.0)
    assert np.isnan(ring.spontaneous(1.55, 1e-3, 30).threshold_w).all()
    assert np.isfinite(ring.spontaneous(1.55, 10.0, 30).pairs_inside_per_s).all()


def test_stimulated_idler_is_the_steady_state_of_the_amplitudes():
    ring = nitride()
    seed_mhz, pump, signal = 40.0, 1e-5, 1e-7
    out = ring.stimulated(1.55, pump, signal, 10, signal_detuning_mhz=seed_mhz)
    hot = ring.spontaneous(1.55, pump, 10)
    to = TWO_PI / 1e6
    ws, wi = (TWO_PI * C_UM_PER_PS / w for w in (out.signal_um, out.idler_um))
    d_s = seed_mhz * to
    # 2 omega_p = omega_s + omega_i on the laser: the hot detunings add up to -delta
    d_i = -(hot.hot_misalignment_mhz * to + d_s)
    np.testing.assert_allclose(out.idler_detuning_mhz, d_i / to, rtol=1e-9)
    flux = signal / (HBAR_W_PS2 * ws)
    pump_omega = TWO_PI * C_UM_PER_PS / out.pump_um
    slow = ring.curve.beta_rad_per_um
    speeds = slow(pump_omega, 1) ** 2 / (slow(ws, 1) * slow(wi, 1))
    gain = hot.kerr_shift_mhz * to * np.sqrt(ws * wi / pump_omega**2 * speeds)
    # amplitudes: D_s a_s = i G a_i* + S, D_i a_i = i G a_s*, solved as they stand
    inverse_s, inverse_i = 0.5 * ws / 1e6 - 1j * d_s, 0.5 * wi / 1e6 - 1j * d_i
    drive = np.sqrt(ws / 2e6 * flux)
    a_s = drive / (inverse_s - gain**2 / np.conj(inverse_i))
    a_i = 1j * gain * np.conj(a_s) / inverse_i
    want = HBAR_W_PS2 * wi * wi / 2e6 * np.abs(a_i) ** 2
    np.testing.assert_allclose(out.idler_w, want, rtol=1e-7)  # bars of MHz columns: 1e-9 of 1 GHz
    np.testing.assert_allclose(out.efficiency, out.idler_w / signal, rtol=1e-14)
    assert LASER_CAUTION in out.notes


def test_seeded_idler_grows_without_limit_towards_threshold():
    """Where the seed sits best the gain is 1/(1 - x)^2, and never more elsewhere."""
    ws, wi, delta, gain = 1.0, 0.7, 0.4, 0.35
    x = cavity.threshold_fraction(gain, ws, wi, delta)
    best = -delta * ws / (ws + wi)
    got = cavity.seed_gain(gain, ws, wi, best, -delta - best)
    assert got == pytest.approx((1 - x) ** -2, rel=1e-13)
    ring = nitride()
    least = ring.spontaneous(1.55, 0.0, 60).threshold_w
    mu = int(np.nanargmin(least))
    strong = ring.stimulated(1.55, 0.9 * least[mu], 1e-9, 60)
    hot = strong.hot_misalignment_mhz[mu]
    tuned = ring.stimulated(1.55, 0.9 * least[mu], 1e-9, 60, signal_detuning_mhz=-0.5 * hot)
    assert tuned.efficiency[mu] > strong.efficiency[mu]
    assert not any("low gain" in note for note in tuned.notes)


def test_threshold_without_the_kerr_shift_is_that_of_the_same_model():
    """x = 1 at the threshold stated, for either sign of dispersion."""
    for beta2 in (-50.0, 50.0):
        ring = nitride(beta2=beta2)
        for kerr in (False, True):
            least = ring.spontaneous(1.55, 0.0, 8, kerr_shift=kerr).threshold_w
            if kerr and beta2 > 0:
                assert np.isnan(least).all()
                continue
            for mu in (1, 5, 8):
                there = ring.spontaneous(1.55, least[mu - 1], 8, kerr_shift=kerr)
                assert there.threshold_fraction[mu - 1] == pytest.approx(1.0, rel=1e-9)


def test_too_many_resonances_are_refused_and_large_maps_thinned(monkeypatch):
    huge = Ring(curve(half_band_thz=30.0), radius_um=1e6, q_intrinsic=1e6, q_coupling=1e6)
    assert np.isfinite(huge.pairs(1.55, 5).misalignment_mhz).all()  # needs eleven of them
    for work in (
        huge.resonances,
        huge.detuning_map,
        lambda: huge.spontaneous(1.55, 1e-3, 5),
        lambda: huge.stimulated(1.55, 1e-3, 1e-6, 5),
    ):
        with pytest.raises(OutOfRange, match=r"too many resonances, .* at most 200000"):
            work()
    monkeypatch.setattr("phasematch.ring._MAP_POINTS", 1000)
    ring, full = nitride(), len(nitride().resonances().order)
    thin = ring.detuning_map(None, 10)
    step = math.ceil(full * 10 / 1000)
    assert step > 1 and len(thin.pump_order) == math.ceil(full / step)
    assert f"the map holds one pump resonance in {step}" in thin.notes
    row = ring.pairs(thin.pump_um[3], 10)
    np.testing.assert_allclose(row.misalignment_mhz, thin.misalignment_mhz[3], atol=1e-6)


def test_unknown_gamma_gives_nan_and_says_so():
    ring = nitride(gamma=math.nan)
    rates = ring.spontaneous(1.55, 1e-3, 3)
    assert np.isnan(rates.pairs_inside_per_s).all()
    assert set(rates.reason) == {"gamma not known"}
    assert np.isfinite(ring.pairs(1.55, 3).misalignment_mhz).all()
    assert np.isnan(ring.stimulated(1.55, 1e-3, 1e-6, 3).idler_w).all()


def test_curve_of_another_bend_is_noted():
    straight = nitride()
    assert any("straight guide" in note for note in straight.pairs(1.55, 2).notes)
    assert not nitride(bend_radius_um=100.0).notes
    assert any("bend of 50 um" in note for note in nitride(bend_radius_um=50.0).notes)


class _Cladding:
    def index(self, wavelength_um):
        return 1.444


def test_bend_note_gives_the_estimated_shift_where_the_core_is_known():
    c = curve(notes=("own note",))
    section = types.SimpleNamespace(width_um=1.6, cladding=_Cladding())
    known = types.SimpleNamespace(
        **{n: getattr(c, n) for n in ("mode", "band_um", "bend_radius_um", "n_eff", "notes")},
        section=section,
    )
    ring = Ring(known, radius_um=100, q_intrinsic=2e6, q_coupling=2e6)
    own, bend = ring.notes
    assert own == "own note" and "n_eff would shift by about +0.0003" in bend


def test_bend_shift_falls_as_the_square_of_the_radius():
    near, far = (bend_shift(1.81, 1.55, 1.6, 1.444, r) for r in (50.0, 100.0))
    assert near == pytest.approx(4 * far) and far > 0


def test_bad_input_gives_one_clear_line():
    c = curve(half_band_thz=30.0)
    good = {"radius_um": 100.0, "q_intrinsic": 1e6, "q_coupling": 1e6}
    for name in good:
        for bad in (0.0, -1.0, math.nan, math.inf):
            with pytest.raises(OutOfRange, match=name):
                Ring(c, **{**good, name: bad})
    ring = Ring(c, **good)
    with pytest.raises(OutOfRange, match="solved band"):
        ring.pairs(3.0, 5)
    for bad in (0, -1, 10**7):
        with pytest.raises(OutOfRange, match="count"):
            ring.pairs(1.55, bad)
    with pytest.raises(InputError, match="whole number"):
        ring.pairs(1.55, 2.5)
    with pytest.raises(OutOfRange, match="pump_w"):
        ring.spontaneous(1.55, -1.0, 5)
    with pytest.raises(InputError, match="pair"):
        ring.detuning_map(1.55, 5)
    with pytest.raises(OutOfRange, match="no resonance"):
        ring.resonances(1.55, 1.550001)
    with pytest.raises(SolverError, match="does not rise"):
        Ring(curve(n_group=-2.0), **good).resonances()
