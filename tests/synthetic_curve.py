"""A dispersion curve made of numbers: beta is a polynomial of the frequency."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from materials.common.constants import C_UM_PER_PS, TWO_PI, omega_from_um, um_from_omega
from materials.common.errors import OutOfRange


@dataclass(frozen=True)
class TaylorCurve:
    """beta = sum_k betas[k] (omega - omega0)^k / k!, in rad/um and ps; has the Curve protocol."""

    omega0: float
    betas: tuple[float, ...]
    band: tuple[float, float]
    gamma: float = 1.0
    gamma_grows: bool = False
    alternates: tuple = ()
    notes: tuple[str, ...] = ()
    mode: str = "TE0"
    bend_radius_um: float | None = None
    section: object = None
    provenance: object = None

    @property
    def band_rad_per_ps(self):
        return self.band

    @property
    def band_um(self):
        return um_from_omega(self.band[1]), um_from_omega(self.band[0])

    def beta_rad_per_um(self, omega_rad_per_ps, derivative=0):
        omega = np.asarray(omega_rad_per_ps, dtype=float)
        step = omega - self.omega0
        out = np.zeros_like(step)
        for k in range(len(self.betas) - 1, derivative - 1, -1):
            out = out * step + self.betas[k] / math.factorial(k - derivative)
        # Horner above runs on coefficients of step^(k - derivative)
        outside = (omega < self.band[0]) | (omega > self.band[1])
        return np.where(outside, np.nan, out)

    def _omega(self, wavelength_um):
        w = np.asarray(wavelength_um, dtype=float)
        short, long = self.band_um
        if np.any((w < short * (1 - 1e-13)) | (w > long * (1 + 1e-13))):
            raise OutOfRange(f"wavelength outside {short} to {long} um")
        return np.clip(omega_from_um(w), *self.band)

    def n_eff(self, w):
        omega = self._omega(w)
        return (self.beta_rad_per_um(omega) * C_UM_PER_PS / omega)[()]

    def n_group(self, w):
        return (C_UM_PER_PS * self.beta_rad_per_um(self._omega(w), 1))[()]

    def beta2_ps2_per_km(self, w):
        return (1e9 * self.beta_rad_per_um(self._omega(w), 2))[()]

    def gamma_per_w_m(self, w):
        omega = self._omega(w)
        return (self.gamma * (omega / self.omega0 if self.gamma_grows else np.ones_like(omega)))[()]


def curve(
    *,
    centre_um=1.55,
    n_eff=1.83,
    n_group=2.1,
    beta2=-100.0,
    beta3=0.0,
    beta4=0.0,
    half_band_thz=60.0,
    **more,
) -> TaylorCurve:
    """A nitride-like curve about ``centre_um``; beta_k in ps^k/km."""
    omega0 = omega_from_um(centre_um)
    betas = (
        n_eff * omega0 / C_UM_PER_PS,
        n_group / C_UM_PER_PS,
        beta2 * 1e-9,
        beta3 * 1e-9,
        beta4 * 1e-9,
    )
    reach = TWO_PI * half_band_thz
    return TaylorCurve(omega0, betas, (omega0 - reach, omega0 + reach), **more)


def with_bars(best: TaylorCurve, weight: float = 1.0, **changes) -> TaylorCurve:
    """``best`` with one alternate per change, e.g. beta2=1.0 (added, ps2/km)."""
    alternates = []
    for name, amount in changes.items():
        order = {"n_eff": 0, "n_group": 1, "beta2": 2, "beta3": 3, "beta4": 4}[name]
        scale = {0: best.omega0 / C_UM_PER_PS, 1: 1.0 / C_UM_PER_PS}.get(order, 1e-9)
        betas = list(best.betas)
        betas[order] += amount * scale
        alternates.append((name, weight, replace(best, betas=tuple(betas))))
    return replace(best, alternates=tuple(alternates))
