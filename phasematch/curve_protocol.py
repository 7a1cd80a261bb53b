"""What the physics needs of a dispersion curve, and how error bars follow from one."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any, Protocol

import numpy as np

from materials.common.alternates import Alternate
from materials.common.alternates import error_bar as error_bar_of
from materials.common.constants import omega_from_um
from materials.common.results import Provenance, frozen_array
from modesolve.cross_section import CrossSection


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
    def section(self) -> CrossSection | None: ...
    @property
    def provenance(self) -> Provenance | None: ...
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


def values_with_bars(
    curve: Curve, names: Sequence[str], functional: Callable[[Any], Any]
) -> tuple[dict[str, Any], dict[str, Any]]:
    """Several numbers, or arrays, computed from a curve, and their error bars.

    Parameters
    ----------
    curve : Curve
    names : sequence of str
        Names of what the functional gives.
    functional : callable
        curve -> sequence with one number or array for each name, all of one shape.

    Returns
    -------
    values, bars : dict of str to float or read-only ndarray
    """
    best = np.asarray(functional(curve), dtype=float)
    # the best curve is not evaluated twice
    bars = error_bar(curve, lambda c: best if c is curve else functional(c))
    return _by_name(names, best), _by_name(names, bars)


def _by_name(names: Sequence[str], stacked: np.ndarray) -> dict[str, Any]:
    pairs = zip(names, stacked, strict=True)
    return {name: frozen_array(v) if v.ndim else float(v) for name, v in pairs}


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


def gamma_or_nan(curve: Curve, wavelength_um: Any) -> np.ndarray:
    """gamma in 1/(W m), NaN outside the band instead of an error."""
    wavelength = np.asarray(wavelength_um, dtype=float)
    good = inside(curve, omega_from_um(wavelength))
    out = np.full(wavelength.shape, np.nan)
    if np.any(good):
        short, long = curve.band_um
        out[good] = curve.gamma_per_w_m(np.clip(wavelength[good], short, long))
    return out
