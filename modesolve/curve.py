"""A dispersion curve as a result: index, dispersion, areas and gamma over a band.

A curve is a set of functions of frequency. It keeps the curves it would be under each
change that its error bar stands for, so the bar of any figure derived from it follows by
deriving that figure from those as well.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import partial
from typing import Any

import numpy as np

from materials.common.alternates import Alternate, error_bar
from materials.common.constants import (
    C_UM_PER_PS,
    omega_from_um,
    um_from_omega,
)
from materials.common.errors import OutOfRange
from materials.common.results import ErrorBars, Provenance, Result, Variable
from modesolve.band import Band, BandFunction
from modesolve.cross_section import CrossSection
from modesolve.quantities import FIGURES

__all__ = ["CurveReport", "DispersionCurve"]

#: Points of a written table.
TABLE_POINTS = 201


@dataclass(frozen=True, slots=True)
class CurveReport:
    """What a curve cost and how well it closed.

    ``held_out_n_eff`` and ``held_out_beta2_ps2_per_km`` are the largest differences
    between the last node's solution and what the curve without it foretold there.
    """

    nodes_um: tuple[float, ...]
    factorisations: int
    unknowns: int
    residual: float
    held_out_n_eff: float
    held_out_beta2_ps2_per_km: float
    seconds: float


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class DispersionCurve(Result):
    """Effective index, dispersion, areas and gamma of one mode over a band.

    The methods take vacuum wavelengths in um, scalars or arrays, and raise `OutOfRange`
    outside the band. ``error`` has the same keys as the methods; each entry is a
    function of wavelength that gives the absolute error bar.

    Attributes
    ----------
    mode : str
        Label, given at ``reference_um``; it stays with the mode.
    band_um : tuple of float
        Shortest and longest wavelength.
    alternates : tuple of Alternate
        The curve under each change its error bar stands for; see
        `materials.common.alternates`.
    """

    mode: str
    band: Band
    functions: dict[str, BandFunction]
    section: CrossSection
    reference_um: float
    report: CurveReport
    alternates: tuple[Alternate, ...] = ()
    notes: tuple[str, ...] = ()
    provenance: Provenance | None = None
    label: str = field(default="", kw_only=True)

    @property
    def inputs(self) -> dict[str, Any]:
        """What was asked for, as plain values."""
        short, long = self.band_um
        return {
            **self.section.describe(),
            "mode": self.mode,
            "band_um": [short, long],
            "reference_um": self.reference_um,
        }

    @property
    def band_um(self) -> tuple[float, float]:
        """Shortest and longest wavelength, um."""
        return um_from_omega(self.band.high), um_from_omega(self.band.low)

    @property
    def band_rad_per_ps(self) -> tuple[float, float]:
        """Lowest and highest angular frequency, rad/ps."""
        return self.band.low, self.band.high

    @property
    def bend_radius_um(self) -> float | None:
        """Bend radius of the section the curve was solved for."""
        return self.section.bend_radius_um

    @property
    def error(self) -> ErrorBars:
        """Error bars by method name, as functions of wavelength in um."""
        bars: dict[str, Any] = {key: partial(self._bar, key) for key in FIGURES}
        bars["zero_dispersion_um"] = self._zero_dispersion_bar
        return ErrorBars(bars)

    def beta_rad_per_um(self, omega_rad_per_ps: Any, derivative: int = 0) -> Any:
        """Propagation constant, or its k-th derivative, in rad/um ps^k; NaN outside the band.

        beta = n omega/c, so beta^(k) = (omega n^(k) + k n^(k-1))/c, exact for the curve.
        """
        omega = np.asarray(omega_rad_per_ps, dtype=float)
        n = self.functions["n_eff"]
        value = omega * n(omega, derivative)
        if derivative:
            value = value + derivative * n(omega, derivative - 1)
        slack = 1e-12 * self.band.high
        inside = (omega >= self.band.low - slack) & (omega <= self.band.high + slack)
        return _like(omega, np.where(inside, value / C_UM_PER_PS, np.nan))

    def n_eff(self, wavelength_um: Any) -> Any:
        """Effective index."""
        return self._figure("n_eff", wavelength_um)

    def n_group(self, wavelength_um: Any) -> Any:
        """Group index, c dbeta/domega."""
        return self._figure("n_group", wavelength_um)

    def beta2_ps2_per_km(self, wavelength_um: Any) -> Any:
        """Group-velocity dispersion, ps2/km."""
        return self._figure("beta2_ps2_per_km", wavelength_um)

    def beta3_ps3_per_km(self, wavelength_um: Any) -> Any:
        """Third-order dispersion, ps3/km."""
        return self._figure("beta3_ps3_per_km", wavelength_um)

    def beta4_ps4_per_km(self, wavelength_um: Any) -> Any:
        """Fourth-order dispersion, ps4/km."""
        return self._figure("beta4_ps4_per_km", wavelength_um)

    def dispersion_ps_per_nm_km(self, wavelength_um: Any) -> Any:
        """Dispersion D = -(2 pi c/lambda^2) beta2, ps/(nm km)."""
        return self._figure("dispersion_ps_per_nm_km", wavelength_um)

    def effective_area_um2(self, wavelength_um: Any) -> Any:
        """Nonlinear effective area 2 pi n2_core/(lambda gamma), um2."""
        return self._figure("effective_area_um2", wavelength_um)

    def intensity_area_um2(self, wavelength_um: Any) -> Any:
        """Area in intensity form, (int |e|^2)^2 / int |e|^4, um2."""
        return self._figure("intensity_area_um2", wavelength_um)

    def power_area_um2(self, wavelength_um: Any) -> Any:
        """Area in power form, (int Sz)^2 / int Sz^2, um2."""
        return self._figure("power_area_um2", wavelength_um)

    def gamma_per_w_m(self, wavelength_um: Any) -> Any:
        """Nonlinear coefficient, 1/(W m); NaN where the core has no n2."""
        return self._figure("gamma_per_w_m", wavelength_um)

    def loss_db_per_cm(self, wavelength_um: Any) -> Any:
        """Loss, dB/cm."""
        return self._figure("loss_db_per_cm", wavelength_um)

    def te_fraction(self, wavelength_um: Any) -> Any:
        """int |Ex|^2 over int (|Ex|^2 + |Ey|^2)."""
        return self._figure("te_fraction", wavelength_um)

    def core_power_fraction(self, wavelength_um: Any) -> Any:
        """Share of the power that flows in the core."""
        return self._figure("core_power_fraction", wavelength_um)

    def zero_dispersion_um(self) -> np.ndarray:
        """Wavelengths in the band where beta2 vanishes, rising; empty where it does not."""
        omega = self.band.frequency(np.linspace(1.0, -1.0, 2001))
        beta2 = self.beta_rad_per_um(omega, 2)
        roots = []
        for i in np.flatnonzero(np.sign(beta2[:-1]) * np.sign(beta2[1:]) < 0):
            roots.append(self._beta2_root(omega[i + 1], omega[i]))
        return um_from_omega(np.array(roots))

    def _beta2_root(self, low: float, high: float) -> float:
        from scipy.optimize import brentq

        return brentq(lambda w: float(self.beta_rad_per_um(w, 2)), low, high, xtol=1e-10)

    def _zero_dispersion_bar(self) -> np.ndarray:
        """Error bars of the zero-dispersion wavelengths, each paired with the nearest zero."""
        zeros = self.zero_dispersion_um()

        def paired(curve: DispersionCurve) -> np.ndarray:
            found = curve.zero_dispersion_um()
            if not found.size:
                return np.full(zeros.shape, np.nan)
            return found[np.argmin(np.abs(found[:, None] - zeros[None, :]), axis=0)]

        return error_bar(paired, self, self.alternates)

    def _bar(self, key: str, wavelength_um: Any) -> Any:
        """Error bar of a method at wavelengths in um."""
        return error_bar(lambda curve: getattr(curve, key)(wavelength_um), self, self.alternates)

    def _omega(self, wavelength_um: Any) -> np.ndarray:
        wavelength = np.asarray(wavelength_um, dtype=float)
        short, long = self.band_um
        slack = 1e-9
        ok = (wavelength >= short * (1 - slack)) & (wavelength <= long * (1 + slack))
        if not np.all(ok):
            wrong = np.atleast_1d(wavelength)[~np.atleast_1d(ok)][0]
            raise OutOfRange(
                f"wavelength {wrong:g} um lies outside the solved band {short:g} to {long:g} um; "
                "solve the curve over a wider band"
            )
        return omega_from_um(wavelength)

    def _figure(self, name: str, wavelength_um: Any) -> Any:
        """A figure of `modesolve.quantities` at wavelengths in um."""
        omega = np.clip(self._omega(wavelength_um), self.band.low, self.band.high)

        def derivative(key: str, order: int) -> Any:
            if key == "beta":
                return self.beta_rad_per_um(omega, order)
            return self.functions[key](omega, order)

        return _like(omega, FIGURES[name].of(omega, derivative))

    def variables(self) -> list[Variable]:
        """The curve as a table over the band, with error bars."""
        short, long = self.band_um
        wavelength = np.linspace(short, long, TABLE_POINTS)
        dims = ("wavelength_um",)
        out = [Variable("wavelength_um", wavelength, dims, "um", "vacuum wavelength", None)]
        for key, figure in FIGURES.items():
            values = getattr(self, key)(wavelength)
            out.append(
                Variable(
                    key, values, dims, figure.unit, figure.long_name, self._bar(key, wavelength)
                )
            )
        return out


def _like(template: Any, value: Any) -> Any:
    """Scalars in, scalars out."""
    return float(value) if np.ndim(template) == 0 else np.asarray(value)
