"""Four-wave mixing in channels against closed forms with many digits."""

from __future__ import annotations

import math

import numpy as np
import pytest

from materials.common.constants import TWO_PI, um_from_omega
from phasematch import mixing
from phasematch.channel import Channel
from phasematch.waves import mix, photons
from phasematch.weak_mixing import weak_photons_m2

from ..synthetic_curve import TaylorCurve

AGRAWAL = "Agrawal, Nonlinear Fiber Optics, chapter 10; computed from the closed form"
FLUX = "form as in Helt, Liscidini, Sipe, J. Opt. Soc. Am. B 29, 2199 (2012), from memory"

#: Omega in rad/ps with kappa = 0: sqrt(2 gamma P/|beta2|) for 1 /(W m), 1 W, 0.05 ps2/m.
MATCHED = 6.32455532033676


def far_curve(
    beta2_ps2_per_km: float, gamma: float = 1.0, reach: float = 2000.0, omega0: float = 2.0**20
) -> TaylorCurve:
    """Pure GVD about a pump so fast that omega_s, omega_i and omega_p are one in all ratios.

    The closed forms take gamma the same at all three waves; at 1e6 rad/ps the offsets of
    some rad/ps change gamma_s gamma_i by 1e-10 or less.
    """
    return TaylorCurve(
        omega0, (0.0, 0.0, beta2_ps2_per_km * 1e-9), (omega0 - reach, omega0 + reach), gamma=gamma
    )


@pytest.mark.source(AGRAWAL, "parametric gain of an undepleted pump", "14")
@pytest.mark.parametrize(
    ("offset", "gain"),
    [
        (MATCHED, 2.3810978455418),
        (0.5 * MATCHED, 2.1546113581361),
        (math.sqrt(2.0) * MATCHED, 2.0),
        (0.0, 2.0),
    ],
)
def test_parametric_gain_of_one_metre(offset, gain):
    kappa = mixing.total_mismatch_per_m(-0.05 * offset**2, 1.0, 1.0, 1.0, 1.0)
    if offset == MATCHED:
        assert abs(kappa) < 1e-13
    made = mixing.idler_photons(kappa, 1.0, 1.0, 1.0, 1.0)
    assert 1.0 + made == pytest.approx(gain, rel=1e-12)  # 14 printed digits
    channel = Channel(far_curve(-50.0), length_mm=1000.0)
    pump = um_from_omega(channel.curve.omega0)
    # a wavelength holds an offset of 1e-5 of the frequency to 1e-10 only: ask by frequency
    centre = channel.curve.omega0
    waves = mix(channel.curve, centre, centre + offset, 1.0, np.asarray(1.0))
    assert 1.0 + photons(waves, 0.0, channel.length_m) == pytest.approx(gain, rel=1e-9)
    assert channel.signal_gain(pump, pump, 1.0) == pytest.approx(2.0, rel=1e-9)


@pytest.mark.source(AGRAWAL, "idler conversion at kappa = 0", "14")
def test_idler_of_one_metre():
    assert mixing.idler_photons(0.0, 1.0, 1.0, 1.0, 1.0) == pytest.approx(1.3810978455418, 1e-12)


@pytest.mark.source("half-value point of sinc^2, computed", "sin(x)^2/x^2 = 1/2", "15")
def test_half_level_of_the_low_gain_band():
    # 1e8 rad/ps: omega_i/omega_s tilts the top by 4e-9, an edge is rounded by 6e-10 of itself
    channel = Channel(far_curve(-100.0, omega0=2.0**27), length_mm=10.0)
    edges = channel._band(um_from_omega(channel.curve.omega0), 0.0, -10.0 * math.log10(0.5))
    half = 0.5 * (edges.high - edges.low)
    x = 0.5 * 0.1 * half**2 * 0.01  # |dbeta| L/2
    assert x == pytest.approx(1.39155737825151, rel=1e-8)
    assert mixing.sinhc_squared(-(1.39155737825151**2)) == pytest.approx(0.5, rel=1e-14)


@pytest.mark.source(FLUX, "(gamma P L)^2/T, T = 3 sqrt(pi |beta2| L/2)", "12")
def test_pairs_per_second_with_gvd_alone():
    """gamma 300 /(W m), 1 mW, 1 cm, |beta2| 1e-24 s2/m: 2.39365368241e7 pairs/s."""
    closed = (300.0 * 1e-3 * 0.01) ** 2 / (3.0 * math.sqrt(math.pi * 1e-24 * 0.01 / 2.0))
    assert closed == pytest.approx(2.39365368241e7, rel=1e-11)
    small = 1e-6  # of the power: the closed form leaves out 2 gamma P, 3e-3 of a fringe at 1 mW
    channel = Channel(far_curve(1000.0, gamma=300.0), length_mm=10.0)
    got = channel.pair_flux_per_s(um_from_omega(channel.curve.omega0), 1e-3 * small) / small**2
    # beyond the band's end at 2000 rad/ps, x = 141: int sin^2(x^2)/x^4 = 1/(6 x^3) to 1e-4 of it
    x = 2000.0 * math.sqrt(0.5 * 1.0 * 0.01)
    tail = 1.0 / (6.0 * x**3) / (2.0 * math.sqrt(math.pi) / 3.0)
    assert got == pytest.approx(2.39365368241e7 * (1.0 - tail), rel=1e-8)
    assert got == pytest.approx(2.39365368241e7, rel=1e-6)


@pytest.mark.source(FLUX, "the same with gamma_j = gamma omega_j/omega at 1.55 um, derived", "12")
def test_pairs_per_second_with_gamma_that_follows_the_frequency():
    omega0 = TWO_PI * 299.792458 / 1.55
    reach = 900.0
    curve = TaylorCurve(omega0, (7.4, 7e-3, 1e-6), (omega0 - reach, omega0 + reach), gamma=300.0)
    got = Channel(curve, length_mm=10.0).pair_flux_per_s(1.55, 1e-9) / 1e-12
    # gamma_s gamma_i = gamma^2 (1 - Omega^2/omega_p^2); int sin^2(x^2)/x^2 = sqrt(pi)/2
    unit = 2.0 / (1.0 * 0.01)  # Omega^2 = unit x^2
    x = reach / math.sqrt(unit)
    whole = 2.0 * math.sqrt(math.pi) / 3.0
    share = 1.0 - 0.75 * unit / omega0**2
    tail = (1.0 / (6.0 * x**3) - unit / omega0**2 / (2.0 * x)) / whole
    assert got == pytest.approx(2.39365368241e7 * (share - tail), rel=1e-7)


@pytest.mark.source("moment equations of spontaneous mixing, computed", "alpha L = 0.5", "10")
def test_weak_pairs_with_equal_loss():
    weak = weak_photons_m2(0.0, 50.0, 0.01)
    got = [1e4 * float(part) for part in (weak.coincidences, weak.singles, weak.stimulated)]
    assert got == pytest.approx([0.3678794412, 0.4376919836, 0.3756077501], rel=2e-10)
