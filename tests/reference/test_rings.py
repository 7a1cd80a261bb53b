"""Rings against closed forms with many digits, and the trade's rules of thumb."""

from __future__ import annotations

import math

import numpy as np
import pytest

from materials.common.constants import C_UM_PER_PS, HBAR_W_PS2, TWO_PI, omega_from_um
from phasematch import cavity
from phasematch.resonances import ring_dispersion
from phasematch.ring import Ring

from ..synthetic_curve import TaylorCurve

AZZINI = "forms as in Azzini et al., Opt. Lett. 37, 3807 (2012), from memory; computed"
OMEGA = omega_from_um(1.55)

#: radius, n_g, loaded Q, gamma, lossless all-pass; B, singles/s, P_i/P_s at 1 mW.
TABLE = [
    (5.0, 4.2, 1e4, 200.0, False, 37.392342, 2.3447647e6, 7.7177443e-5),
    (5.0, 4.2, 1e4, 200.0, True, 74.784683, 1.8758118e7, 1.2348391e-3),
    (115.0, 2.1, 1e6, 1.0, False, 325.150796368, 1.772978982e6, 5.835723486e-3),
]


def even_curve(radius_um: float, n_group: float, gamma: float) -> TaylorCurve:
    """No dispersion, a resonance exactly at 1.55 um: all pairs aligned."""
    order = round(0.85 * n_group * OMEGA / C_UM_PER_PS * radius_um)
    betas = (order / radius_um, n_group / C_UM_PER_PS)
    return TaylorCurve(OMEGA, betas, (OMEGA - 300.0, OMEGA + 300.0), gamma=gamma)


@pytest.mark.source(AZZINI, "intensity build-up, critical and lossless all-pass", "8 to 12")
@pytest.mark.parametrize("row", TABLE)
def test_build_up(row):
    radius, n_group, q, _, all_pass, want = row[:6]
    width = OMEGA / q
    coupling = width if all_pass else 0.5 * width
    got = cavity.build_up(n_group, TWO_PI * radius, width, coupling)
    # Q v_g/(omega pi R), twice that all-pass; the table has 8 or 12 digits
    assert got == pytest.approx(want, rel=2e-8)
    assert got == pytest.approx(
        (1 + all_pass) * q * C_UM_PER_PS / n_group / OMEGA / math.pi / radius
    )


@pytest.mark.source(AZZINI, "singles and stimulated idler, aligned, equal widths", "8 to 10")
@pytest.mark.parametrize("row", TABLE)
def test_spontaneous_and_stimulated_idler(row):
    radius, n_group, q, gamma, all_pass, _, singles, stimulated = row
    length, width, pump = TWO_PI * radius, OMEGA / q, 1e-3
    coupling = width if all_pass else 0.5 * width
    photons = cavity.photons_inside(pump, OMEGA, width, coupling)
    gain = photons * cavity.kerr_shift_per_photon(gamma, OMEGA, n_group, length)
    made = cavity.pair_rate_inside(gain, width, width, 0.0)
    assert 1e12 * made * coupling / width == pytest.approx(singles, rel=2e-8)
    b = cavity.build_up(n_group, length, width, coupling)
    power = made * coupling / width * HBAR_W_PS2 * OMEGA
    idler = cavity.stimulated_idler_w(gamma, length, pump, 1.0, (b, b, b))
    assert idler == pytest.approx(stimulated, rel=2e-8)
    # spontaneous over stimulated: hbar omega^2/(4Q) critical, /(8Q) all-pass
    seed = HBAR_W_PS2 * OMEGA**2 / ((8 if all_pass else 4) * q)
    assert power / idler == pytest.approx(seed, rel=1e-12)


@pytest.mark.source(AZZINI, "the same rows through the ring, neighbouring pair", "8 to 10")
@pytest.mark.parametrize("row", TABLE)
def test_table_through_the_ring(row):
    radius, n_group, q, gamma, all_pass, b, singles, stimulated = row
    intrinsic, coupling = (1e15, q) if all_pass else (2 * q, 2 * q)
    ring = Ring(
        even_curve(radius, n_group, gamma),
        radius_um=radius,
        q_intrinsic=intrinsic,
        q_coupling=coupling,
    )
    assert ring.build_up(1.55) == pytest.approx(b, rel=2e-8)
    rates = ring.spontaneous(1.55, 1e-3, 1, kerr_shift=False)
    # Gamma = omega/Q differs between signal, pump and idler: (FSR/omega)^2 at most
    rest = 3.0 * (1e-3 * ring.fsr_ghz(1.55) / (OMEGA / TWO_PI)) ** 2 + 2e-8
    weak = 1.0 - rates.threshold_fraction  # the table is the low-gain limit
    assert (rates.singles_idler_per_s * weak)[0] == pytest.approx(singles, rel=rest)
    assert (rates.coincidences_per_s / rates.singles_signal_per_s)[0] == pytest.approx(
        1.0 if all_pass else 0.5, rel=1e-10
    )
    seeded = ring.stimulated(1.55, 1e-3, 1e-6, 1, kerr_shift=False)
    ratio = seeded.efficiency[0] * seeded.signal_um[0] ** -1 * seeded.idler_um[0]
    # omega_i/omega_s is of first order in the spacing; it is taken out
    assert ratio * weak[0] ** 2 == pytest.approx(stimulated, rel=rest)


@pytest.mark.source("c/(n_g L)", "free spectral range, computed", "12")
def test_free_spectral_range():
    ring = Ring(even_curve(115.0, 2.1, 1.0), radius_um=115.0, q_intrinsic=2e6, q_coupling=2e6)
    assert ring.fsr_ghz(1.55) == pytest.approx(197.571228126, rel=1e-11)


@pytest.mark.source("D2 = -(c/n_g) D1^2 beta2", "beta2 -50 ps2/km, n_g 2.1, 200 GHz", "10")
def test_second_order_ring_dispersion():
    radius = C_UM_PER_PS / (2.1 * 0.2) / TWO_PI
    d = ring_dispersion([2.1 / C_UM_PER_PS, -50e-9, 0.0, 0.0], radius)
    assert d[0] / TWO_PI == pytest.approx(0.2, rel=1e-14)
    assert 1e9 * d[1] / TWO_PI == pytest.approx(1793.953874, rel=1e-9)  # kHz


@pytest.mark.source("omega/Q", "linewidth at Q 1e6, 1.55 um", "9")
def test_linewidth():
    ring = Ring(even_curve(115.0, 2.1, 1.0), radius_um=115.0, q_intrinsic=2e6, q_coupling=2e6)
    assert ring.linewidth_mhz(1.55) == pytest.approx(193.414489, rel=3e-9)


@pytest.mark.source("oscillation threshold, modal and mean-field form, computed", "least", "10")
def test_least_threshold():
    """n_g 2.1, 200 GHz, A 1 um2, n2 2.4e-19 m2/W, loaded Q 1e6, critical: 13.29189614 mW."""
    length = C_UM_PER_PS / (2.1 * 0.2)
    gamma = TWO_PI * 2.4e-19 / (1.55e-6 * 1e-12)
    width = OMEGA / 1e6
    per_photon = cavity.kerr_shift_per_photon(gamma, OMEGA, 2.1, length)
    at_width = cavity.threshold_gain(width, width, width) / per_photon
    power = cavity.pump_for_photons(at_width, OMEGA, width, 0.5 * width)
    assert 1e3 * power == pytest.approx(13.29189614, rel=1e-9)
    closed = HBAR_W_PS2 * OMEGA * width**3 / (8 * per_photon * 0.5 * width)
    assert power == pytest.approx(closed, rel=1e-13)
    # it is the least of all misalignments
    others = cavity.threshold_gain(width, width, width * np.array([0.5, 0.9, 1.1, 2.0]))
    assert np.all(others / per_photon > at_width)


@pytest.mark.source("Azzini et al., Opt. Express 20, 23100 (2012)", "0.2 MHz at 200 uW", "order")
def test_measured_silicon_ring_in_order_of_magnitude():
    """R 5 um silicon ring, 200 uW, 0.2 MHz of pairs, Q of 8e3 to 1.3e4; factor 5 allowed."""
    ring = Ring(even_curve(5.0, 4.2, 200.0), radius_um=5.0, q_intrinsic=2e4, q_coupling=2e4)
    rates = ring.spontaneous(1.55, 200e-6, 1)
    assert 0.2e6 / 5 < rates.pairs_inside_per_s[0] < 0.2e6 * 5


@pytest.mark.source("common practice, no source", "build-up of tens to hundreds", "order")
@pytest.mark.parametrize("row", TABLE)
def test_build_up_is_of_tens_to_hundreds(row):
    radius, n_group, q, gamma, all_pass = row[:5]
    intrinsic, coupling = (1e15, q) if all_pass else (2 * q, 2 * q)
    curve = even_curve(radius, n_group, gamma)
    ring = Ring(curve, radius_um=radius, q_intrinsic=intrinsic, q_coupling=coupling)
    assert 10 < ring.build_up(1.55) < 1000


@pytest.mark.source(
    "common practice, no source", "round trip of a hundred optical periods", "order"
)
def test_round_trip_of_a_small_silicon_ring():
    ring = Ring(even_curve(5.0, 4.2, 200.0), radius_um=5.0, q_intrinsic=2e4, q_coupling=2e4)
    periods = OMEGA / TWO_PI / (1e-3 * ring.fsr_ghz(1.55))
    assert 50 < periods < 200


@pytest.mark.source("common practice, no source", "resonances nearly equally spaced", "order")
def test_resonances_are_nearly_equally_spaced():
    """A nitride ring of -50 ps2/km: spacings within 1 % of each other over 100 nm."""
    base = even_curve(100.0, 2.1, 1.0)
    curve = TaylorCurve(base.omega0, (*base.betas, -50e-9), base.band)
    ring = Ring(curve, radius_um=100.0, q_intrinsic=2e6, q_coupling=2e6)
    fsr = ring.resonances(1.5, 1.6).fsr_ghz
    assert 0.0 < np.ptp(fsr) / fsr.mean() < 0.01


@pytest.mark.source(
    "common practice, no source", "vacuum seed of half a photon a round trip", "order"
)
def test_vacuum_acts_like_half_a_photon_per_lengthened_round_trip():
    radius, n_group, q, gamma = 115.0, 2.1, 1e6, 1.0
    length, width = TWO_PI * radius, OMEGA / q
    b = cavity.build_up(n_group, length, width, 0.5 * width)
    gain = cavity.photons_inside(1e-3, OMEGA, width, 0.5 * width)
    gain *= cavity.kerr_shift_per_photon(gamma, OMEGA, n_group, length)
    made = cavity.pair_rate_inside(gain, width, width, 0.0)
    spontaneous = 0.5 * made * HBAR_W_PS2 * OMEGA  # half escapes into the bus
    per_watt = cavity.stimulated_idler_w(gamma, length, 1e-3, 1.0, (b, b, b))
    round_trip = length * n_group / C_UM_PER_PS * b
    assert spontaneous / per_watt == pytest.approx(0.5 * HBAR_W_PS2 * OMEGA / round_trip, rel=1e-12)
