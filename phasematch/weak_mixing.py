"""Mixing of a weak pump with equal loss at all three waves, as pure functions of arrays.

Examples
--------
>>> [round(float(n), 12) for n in weak_photons_m2(0.0, 0.0, 2.0)]  # no loss: L^2, all three
[4.0, 4.0, 4.0]
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np


class WeakPhotons(NamedTuple):
    """Photon numbers of weak mixing with equal loss, over (gamma P0)^2 in m^2."""

    stimulated: np.ndarray
    singles: np.ndarray
    coincidences: np.ndarray


def weak_photons_m2(dbeta_per_m: Any, loss_per_m: Any, length_m: Any) -> WeakPhotons:
    """What comes out of a channel of equal power loss at all three waves, weakly pumped.

    Parameters
    ----------
    dbeta_per_m : array_like, 1/m
    loss_per_m : array_like, 1/m
        Power loss alpha, >= 0.
    length_m : array_like, m

    Returns
    -------
    WeakPhotons
        Times gamma_s gamma_i P0^2 each gives: ``stimulated`` idler photons per signal
        photon in; ``singles`` spontaneous photons per Hz of one arm; ``coincidences``,
        per Hz, of pairs with both photons out. Without loss the three agree.

    Notes
    -----
    With a = alpha L, k = dbeta L, from the moment equations
    n' = -alpha n + 2 gamma P Im m and m' = (i dbeta - alpha) m + i gamma P, P = P0 exp(-alpha z):

    - stimulated  L^2 exp(-a) |(1 - exp(-(a + ik)))/(a + ik)|^2
    - singles     2 L^2 exp(-a) [1 - exp(-a) (cos k + a sin(k)/k)]/(a^2 + k^2)
    - coincidences L^2 exp(-2a) (sin(k/2)/(k/2))^2

    The bracket of the singles is a sum of positive terms here, so that nothing cancels.
    """
    a = np.asarray(loss_per_m, dtype=float) * length_m
    k = np.asarray(dbeta_per_m, dtype=float) * length_m
    known = np.isfinite(a) & np.isfinite(k)
    # unknown points go through the forms as zeros, so that none of them can warn
    a, k = np.where(known, a, 0.0), np.where(known, k, 0.0)
    nothing = np.where(known, 0.0, np.nan)
    area = np.square(np.asarray(length_m, dtype=float)) + nothing
    falling = np.exp(-a)
    z = a + 1j * k
    size = np.abs(z)
    near = size < 1e-150
    ratio = np.where(near, 1.0, -np.expm1(-z) / np.where(near, 1.0, z))
    stimulated = area * falling * np.abs(ratio) ** 2
    half = np.sinc(k / (2.0 * np.pi))
    bracket = _two_parts(a) + falling * (0.5 * (k * half) ** 2 + a * _one_minus_sinc(k))
    size = np.where(near, 1.0, size)
    singles = 2.0 * area * falling * np.where(near, 0.5, bracket / size / size)
    return WeakPhotons(stimulated, singles, area * falling**2 * half**2)


def _two_parts(a: np.ndarray) -> np.ndarray:
    """1 - (1 + a) exp(-a) without cancellation: sum_k (-1)^k a^k (k - 1)/k! while a is small."""
    small = np.minimum(a, 0.5)
    series = np.zeros_like(small)
    for k in range(16, 1, -1):  # Horner on a^k (k - 1)/k!; 0.5^17/16! is below rounding
        term = (k - 1) / float(_FACTORIAL[k]) * (-1.0) ** k
        series = series * small + term
    series = series * small**2
    return np.where(a < 0.5, series, 1.0 - (1.0 + a) * np.exp(-a))


def _one_minus_sinc(k: np.ndarray) -> np.ndarray:
    """1 - sin(k)/k without cancellation."""
    small = np.where(np.abs(k) < 1.0, k, 1.0) ** 2
    series = np.zeros_like(small)
    for j in range(10, 0, -1):  # k^(2j)/(2j + 1)!, alternating; 1/23! is below rounding
        series = (-1.0) ** (j + 1) / float(_FACTORIAL[2 * j + 1]) + series * small
    return np.where(np.abs(k) < 1.0, series * small, 1.0 - np.sinc(k / np.pi))


_FACTORIAL = np.cumprod(np.concatenate([[1.0], np.arange(1.0, 24.0)]))
