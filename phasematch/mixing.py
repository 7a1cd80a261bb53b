"""Four-wave mixing as pure functions of arrays: energy, mismatch, gain, and error bars.

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

from collections.abc import Callable
from typing import Any, NamedTuple, Protocol

import numpy as np

from materials.common.alternates import Alternate
from materials.common.alternates import error_bar as error_bar_of
from materials.common.constants import omega_from_um, um_from_omega

#: Stated wherever a pump power is.
LASER_CAUTION = (
    "Caution: pump powers here are those of class 3B and 4 infrared lasers, invisible to the "
    "eye. Follow IEC 60825-1 and the local laser safety rules, and defer to the laser safety "
    "officer."
)

#: 1/um in 1/m.
PER_M = 1e6


class Curve(Protocol):
    """What the physics needs of a dispersion curve; `modesolve.DispersionCurve` is one.

    ``alternates`` are perturbed versions of the same curve as (name, weight, curve); they
    are how error bars travel, see `error_bar`. Methods that take a wavelength raise
    `OutOfRange` outside the band; ``beta_rad_per_um`` is NaN there.
    """

    @property
    def band_rad_per_ps(self) -> tuple[float, float]: ...
    @property
    def band_um(self) -> tuple[float, float]: ...
    @property
    def mode(self) -> str: ...
    @property
    def notes(self) -> tuple[str, ...]: ...
    @property
    def bend_radius_um(self) -> float | None: ...
    @property
    def alternates(self) -> tuple[Alternate, ...]: ...

    def beta_rad_per_um(self, omega_rad_per_ps: Any, derivative: int = 0) -> Any: ...
    def n_eff(self, wavelength_um: Any) -> Any: ...
    def n_group(self, wavelength_um: Any) -> Any: ...
    def beta2_ps2_per_km(self, wavelength_um: Any) -> Any: ...
    def gamma_per_w_m(self, wavelength_um: Any) -> Any: ...


def error_bar(curve: Curve, functional: Callable[[Any], Any]) -> Any:
    """Error bar of any number that is computed from a curve.

    Parameters
    ----------
    curve : Curve
        The best curve and, in ``curve.alternates``, its perturbed versions.
    functional : callable
        curve -> float or ndarray, always of the same shape.

    Returns
    -------
    float or ndarray
        sum_k weight_k |F(alternate_k) - F(curve)|; NaN where F is not finite.
    """
    return error_bar_of(functional, curve, curve.alternates)


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


def snap(curve: Curve, omega_rad_per_ps: Any) -> np.ndarray:
    """Frequencies, with those that rounding put just outside the band moved to its edge."""
    omega = np.asarray(omega_rad_per_ps, dtype=float)
    low, high = curve.band_rad_per_ps
    omega = np.where((omega < low) & (omega > low * (1 - 1e-12)), low, omega)
    return np.where((omega > high) & (omega < high * (1 + 1e-12)), high, omega)


def inside(curve: Curve, omega_rad_per_ps: Any) -> np.ndarray:
    """True where a frequency lies in the solved band (to rounding)."""
    low, high = curve.band_rad_per_ps
    omega = snap(curve, omega_rad_per_ps)
    return (omega >= low) & (omega <= high)


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
    return PER_M * ((beta_s - beta_p) - (beta_2 - beta_i))


def gamma_or_nan(curve: Curve, wavelength_um: Any) -> np.ndarray:
    """gamma in 1/(W m), NaN outside the band instead of an error."""
    wavelength = np.asarray(wavelength_um, dtype=float)
    good = inside(curve, omega_from_um(wavelength))
    out = np.full(wavelength.shape, np.nan)
    if np.any(good):
        short, long = curve.band_um
        out[good] = curve.gamma_per_w_m(np.clip(wavelength[good], short, long))
    return out


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


# ---------------------------------------------------------------- equal loss, weak


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
    a, k = np.broadcast_arrays(a, k)
    area = np.square(np.asarray(length_m, dtype=float))
    falling = np.exp(-a)
    z = a + 1j * k
    near = np.abs(z) < 1e-150
    with np.errstate(invalid="ignore"):  # NaN mismatch beyond the band stays NaN
        ratio = np.where(near, 1.0, -np.expm1(-z) / np.where(near, 1.0, z))
    stimulated = area * falling * np.abs(ratio) ** 2
    half = np.sinc(k / (2.0 * np.pi))
    bracket = _two_parts(a) + falling * (0.5 * (k * half) ** 2 + a * _one_minus_sinc(k))
    size = np.where(near, 1.0, np.abs(z) ** 2)
    singles = 2.0 * area * falling * np.where(near, 0.5, bracket / size)
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
