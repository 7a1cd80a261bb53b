"""Orders with which exact resonances approach the ring's dispersion coefficients."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from materials.common.constants import C_UM_PER_PS, TWO_PI
from phasematch.resonances import find_lines, ring_dispersion

from ..synthetic_curve import curve

RADII = np.array([40.0, 80.0, 160.0, 320.0])


def _about(radius: float, **changes):
    """Lines -2 .. 2 about the resonance at the curve's centre, and D1 .. D4 there."""
    # beta 7.5 rad/um at the centre: a resonance there for every radius that is even
    c = curve(**{"beta2": -50.0, "beta3": 0.5, "beta4": 0.03, "half_band_thz": 30.0, **changes})
    c = replace(c, betas=(7.5, *c.betas[1:]))
    order = round(7.5 * radius)
    lines = find_lines(c, radius, np.arange(order - 2, order + 3))
    omega = lines.omega_rad_per_ps[2]
    betas = [float(c.beta_rad_per_um(omega, k)) for k in (1, 2, 3, 4)]
    return lines, ring_dispersion(betas, radius), betas


def _orders(errors) -> np.ndarray:
    return np.log2(np.abs(errors[:-1]) / np.abs(errors[1:]))


def test_second_difference_reaches_d2_in_second_order_of_the_spacing():
    misses = []
    for radius in RADII:
        lines, d, betas = _about(radius)
        # the published form, from n_g and beta2 alone
        n_group = C_UM_PER_PS * betas[0]
        assert d[1] == pytest.approx(-C_UM_PER_PS / n_group * d[0] ** 2 * betas[1], rel=1e-13)
        misses.append(lines.misaligned(2, 1) / d[1] - 1.0)
    # delta_1 = D2 + D4/12 + ..., D4/D2 goes as 1/R^2
    np.testing.assert_allclose(_orders(np.array(misses)), 2.0, atol=0.05)
    lines, d, _ = _about(RADII[-1])
    assert misses[-1] * d[1] == pytest.approx(d[3] / 12.0, rel=0.02)


def test_half_the_distance_of_the_neighbours_reaches_d1_in_second_order():
    misses = []
    for radius in RADII:
        lines, d, _ = _about(radius)
        misses.append(0.5 * lines.apart(3, 1) / d[0] - 1.0)
    np.testing.assert_allclose(_orders(np.array(misses)), 2.0, atol=0.05)
    lines, d, _ = _about(RADII[0])
    assert 0.5 * lines.apart(3, 1) - d[0] == pytest.approx(d[2] / 6.0, rel=0.02)


def test_third_and_fourth_differences_give_d3_and_d4():
    # a large spacing lifts them far above rounding; the next order goes as 1/R^2 again
    misses = []
    for radius in (10.0, 20.0, 40.0):
        lines, d, _ = _about(radius, beta2=-500.0, beta3=5.0, beta4=0.3)
        third = 0.5 * (lines.apart(4, 0) - 2.0 * lines.apart(3, 1))
        fourth = lines.misaligned(2, 2) - 4.0 * lines.misaligned(2, 1)
        misses.append([third / d[2] - 1.0, fourth / d[3] - 1.0])
    misses = np.array(misses)
    assert np.all(np.abs(misses[-1]) < 0.02)
    np.testing.assert_allclose(_orders(misses), 2.0, atol=0.15)


def test_no_group_velocity_dispersion_means_no_misalignment():
    c = curve(beta2=0.0, half_band_thz=20.0)
    lines = find_lines(c, 100.0, np.arange(700, 760))
    good = np.flatnonzero(np.isfinite(lines.omega_rad_per_ps))
    centre = good[len(good) // 2]
    miss = lines.misaligned(centre, np.arange(1, 10))
    # rounding of beta R = 740 rad: some 1e-13 rad, 1e-13/0.7 rad/ps, 0.1 Hz
    assert np.abs(miss).max() / TWO_PI * 1e12 < 2.0


def test_anomalous_dispersion_gives_positive_misalignment():
    for sign in (-1.0, 1.0):
        lines, d, _ = _about(100.0, beta2=50.0 * sign, beta3=0.0, beta4=0.0)
        assert math.copysign(1.0, float(lines.misaligned(2, 1))) == -sign
        assert math.copysign(1.0, d[1]) == -sign
