"""Four-wave mixing as pure functions of arrays: energy, mismatch, gain.

Signs and units: fields go as exp(i(beta z - omega t)); frequencies in rad/ps, beta in
rad/um, mismatch in rad/m (written 1/m), gamma in 1/(W m), power in W, lengths in m.
Photon energy is conserved on the frequency, never on the wavelength.

References
----------
G. P. Agrawal, Nonlinear Fiber Optics, chapter 10: mismatch, gain and conversion of one
and two undepleted pumps.

Examples
--------
>>> round(float(idler_um(1.55, 1.5)), 6)              # 2/1.55 - 1/1.5
1.603448
>>> float(idler_photons(0.0, 1.0, 1.0, 2.0, 0.0))     # no length, no photons
0.0
"""

from __future__ import annotations

from typing import Any

import numpy as np

from materials.common.constants import PER_UM_TO_PER_M, omega_from_um, um_from_omega
from phasematch.curve_protocol import Curve, snap

# ---------------------------------------------------------------- energy


def idler_omega(
    pump_rad_per_ps: Any, signal_rad_per_ps: Any, second_pump_rad_per_ps: Any = None
) -> Any:
    """Idler frequency in rad/ps: omega_1 + omega_2 - omega_s (one pump: omega_2 = omega_1)."""
    second = pump_rad_per_ps if second_pump_rad_per_ps is None else second_pump_rad_per_ps
    return (pump_rad_per_ps - signal_rad_per_ps) + second


def idler_um(pump_um: Any, signal_um: Any, second_pump_um: Any = None) -> Any:
    """Idler wavelength in um, NaN where no positive idler frequency is left.

    Examples
    --------
    >>> float(idler_um(1.5, 0.7))
    nan
    """
    pump = omega_from_um(np.asarray(pump_um, float))
    signal = omega_from_um(np.asarray(signal_um, float))
    second = None if second_pump_um is None else omega_from_um(np.asarray(second_pump_um, float))
    omega = np.asarray(idler_omega(pump, signal, second))
    positive = omega > 0
    return np.where(positive, um_from_omega(np.where(positive, omega, 1.0)), np.nan)[()]


def linear_mismatch_per_m(
    curve: Curve, pump_rad_per_ps: Any, signal_rad_per_ps: Any, second_pump_rad_per_ps: Any = None
) -> np.ndarray:
    """dbeta = beta_s + beta_i - beta_1 - beta_2 in 1/m, NaN outside the band.

    Parameters
    ----------
    curve : Curve
    pump_rad_per_ps, signal_rad_per_ps : array_like
        Angular frequencies; they broadcast.
    second_pump_rad_per_ps : array_like, optional
        A second pump; by default the pump is degenerate.

    Returns
    -------
    ndarray
        Taken as (beta_s - beta_1) - (beta_2 - beta_i), so that the large common part
        drops out before anything is added.
    """
    idler = idler_omega(pump_rad_per_ps, signal_rad_per_ps, second_pump_rad_per_ps)
    beta_p = curve.beta_rad_per_um(snap(curve, pump_rad_per_ps))
    beta_2 = beta_p
    if second_pump_rad_per_ps is not None:
        beta_2 = curve.beta_rad_per_um(snap(curve, second_pump_rad_per_ps))
    beta_s = curve.beta_rad_per_um(snap(curve, signal_rad_per_ps))
    beta_i = curve.beta_rad_per_um(snap(curve, idler))
    return PER_UM_TO_PER_M * ((beta_s - beta_p) - (beta_2 - beta_i))


# ---------------------------------------------------------------- mismatch and gain


def scaled_gamma(gamma_per_w_m: Any, omega_rad_per_ps: Any, pump_rad_per_ps: Any) -> Any:
    """gamma_j = gamma_p omega_j / omega_p in 1/(W m)."""
    return gamma_per_w_m * (omega_rad_per_ps / pump_rad_per_ps)


def total_mismatch_per_m(
    dbeta_per_m: Any, gamma_signal: Any, gamma_idler: Any, gamma_pump: Any, pump_w: Any
) -> Any:
    """kappa = dbeta + 2 (gamma_s + gamma_i - gamma_p) P in 1/m, one pump.

    Without power it is dbeta, also where gamma is not known (NaN).
    """
    nonlinear = 2.0 * (gamma_signal + gamma_idler - gamma_pump) * pump_w
    return dbeta_per_m + np.where(np.asarray(pump_w) == 0.0, 0.0, nonlinear)


def total_mismatch_two_pumps_per_m(
    dbeta_per_m: Any, gamma_1: Any, gamma_2: Any, pump_1_w: Any, pump_2_w: Any
) -> Any:
    """kappa = dbeta + gamma_1 P1 + gamma_2 P2 in 1/m, two pumps.

    Notes
    -----
    From the phases 2 gamma_j (P1 + P2) of signal and idler and gamma_1 (P1 + 2 P2),
    gamma_2 (P2 + 2 P1) of the pumps, with gamma_s + gamma_i = gamma_1 + gamma_2 because
    gamma goes as omega and photon energy is conserved.
    """
    power = np.asarray(pump_1_w) + np.asarray(pump_2_w)
    nonlinear = gamma_1 * pump_1_w + gamma_2 * pump_2_w
    return dbeta_per_m + np.where(power == 0.0, 0.0, nonlinear)


def sinhc_squared(argument: Any) -> np.ndarray:
    """|sinh(sqrt q)/sqrt q|^2 for real q of either sign; 1 at q = 0, inf where it overflows.

    Examples
    --------
    >>> sinhc_squared([0.0, -np.pi**2]).round(12).tolist()
    [1.0, 0.0]
    """
    q = np.asarray(argument, dtype=float)
    root = np.sqrt(np.abs(q))
    safe = np.where(root > 0.0, root, 1.0)
    with np.errstate(over="ignore"):  # a gain beyond 1e308 is inf; the logarithm has it
        shape = np.square(np.where(q >= 0.0, np.sinh(safe), np.sin(safe)) / safe)
    return np.where(root > 0.0, shape, np.where(np.isnan(q), np.nan, 1.0))


def log_sinhc_squared(argument: Any) -> np.ndarray:
    """Natural logarithm of `sinhc_squared`, finite for any gain; -inf at the zeros."""
    q = np.asarray(argument, dtype=float)
    root = np.sqrt(np.abs(q))
    safe = np.where(root > 0.0, root, 1.0)
    # log(sinh x / x) = x + log((1 - exp(-2x)) / 2x): no overflow, no lost digits
    growing = safe + np.log(-np.expm1(-2.0 * safe) / (2.0 * safe))
    with np.errstate(divide="ignore"):
        waving = np.log(np.abs(np.sin(safe) / safe))
    out = 2.0 * np.where(q >= 0.0, growing, waving)
    return np.where(root > 0.0, out, np.where(np.isnan(q), np.nan, 0.0))


def gain_argument(kappa_per_m: Any, coupling_squared: Any, length_m: Any) -> Any:
    """(g L)^2 = (coupling^2 - (kappa/2)^2) L^2, of either sign.

    coupling^2 is gamma_s gamma_i P^2 for one pump and 4 gamma_s gamma_i P1 P2 for two. The
    difference of squares is taken as a product, which keeps the digits near g = 0.
    """
    coupling, half = np.sqrt(coupling_squared), 0.5 * np.asarray(kappa_per_m)
    return (coupling - half) * (coupling + half) * np.square(length_m)


def idler_photons(
    kappa_per_m: Any, gamma_signal: Any, gamma_idler: Any, pump_w: Any, length_m: Any
) -> np.ndarray:
    """H, the idler photons out per signal photon in, of one undepleted pump without loss.

    Parameters
    ----------
    kappa_per_m : array_like, 1/m
        Mismatch with its nonlinear part.
    gamma_signal, gamma_idler : array_like, 1/(W m)
    pump_w : array_like, W
    length_m : array_like, m

    Returns
    -------
    ndarray
        H = gamma_s gamma_i P^2 |sinh(gL)/g|^2. The signal's power gain is 1 + H; the idler
        power over the input signal power (omega_i/omega_s) H; the spontaneous flux of one
        arm H per Hz.
    """
    coupling_squared = gamma_signal * gamma_idler * np.square(pump_w)
    return _photons(kappa_per_m, coupling_squared, length_m)


def idler_photons_two_pumps(
    kappa_per_m: Any,
    gamma_signal: Any,
    gamma_idler: Any,
    pump_1_w: Any,
    pump_2_w: Any,
    length_m: Any,
) -> np.ndarray:
    """H of two undepleted pumps: 4 gamma_s gamma_i P1 P2 |sinh(gL)/g|^2."""
    coupling_squared = 4.0 * gamma_signal * gamma_idler * np.asarray(pump_1_w) * pump_2_w
    return _photons(kappa_per_m, coupling_squared, length_m)


def _photons(kappa_per_m: Any, coupling_squared: Any, length_m: Any) -> np.ndarray:
    # coupling_squared 0 never meets an infinite shape: without power g is imaginary
    shape = sinhc_squared(gain_argument(kappa_per_m, coupling_squared, length_m))
    return np.asarray(coupling_squared * np.square(length_m) * shape)


def log_idler_photons(
    kappa_per_m: Any, gamma_signal: Any, gamma_idler: Any, pump_w: Any, length_m: Any
) -> np.ndarray:
    """Natural logarithm of `idler_photons`, finite for any gain; -inf without power."""
    coupling_squared = gamma_signal * gamma_idler * np.square(pump_w)
    with np.errstate(divide="ignore"):
        front = np.log(coupling_squared * np.square(length_m))
    return front + log_sinhc_squared(gain_argument(kappa_per_m, coupling_squared, length_m))
