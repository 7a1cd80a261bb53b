"""A medium: its index with exact frequency derivatives, nonlinearity and slope with heat.

References
----------
n_group = n - l dn/dl and beta2 = d2(n omega/c)/domega2, as in G. P. Agrawal, Nonlinear
Fiber Optics, chapter 1.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from materials import formulas, model_error
from materials.common import series
from materials.common.constants import (
    C_UM_PER_PS,
    PER_UM_TO_PER_KM,
    omega_from_um,
    um_from_omega,
)
from materials.common.errors import InputError, MissingData, OutsideMaterialRange

#: Taken where a table states no temperature, degC.
ROOM_TEMPERATURE_DEGC = 20.0

#: Relative slack at the ends of a range, for wavelengths that were frequencies once.
_RANGE_SLACK = 1e-9

#: Points of the search for zeros of beta2 and steps of each bisection (to 1e-9 um or less).
_ZERO_SEARCH_POINTS = 4000
_BISECTIONS = 48


@dataclass(frozen=True, slots=True, eq=False)
class Fit:
    """How well a fitted medium follows its points, and how well its constants are known.

    Attributes
    ----------
    window_um : tuple of float
        First and last wavelength used.
    points : int
        Number of points used.
    terms : int
        Number of resonances.
    residual_rms, residual_max : float
        Of the index, over those points.
    covariance : ndarray, shape (n_params, n_params)
        Of the fitted constants.
    covariance_root : ndarray, shape (n_coefficients, n_params)
        Column j moves all the coefficients of the formula by the j-th independent
        one-sigma variation; constants held fixed have zero rows.
    alternatives : tuple of (float, tuple of float)
        Coefficients of other arrangements of resonances that the points do not rule out,
        each with its posterior weight.
    misfit_variations : ndarray, shape (rows, degree + 1)
        One-sigma variations of the index for the error of the form itself, as in
        :class:`materials.model_error.Misfit`.
    """

    window_um: tuple[float, float]
    points: int
    terms: int
    residual_rms: float
    residual_max: float
    covariance: np.ndarray
    covariance_root: np.ndarray
    alternatives: tuple[tuple[float, tuple[float, ...]], ...] = ()
    misfit_variations: np.ndarray = field(default_factory=lambda: np.zeros((0, 1)))


@dataclass(frozen=True, slots=True, eq=False)
class Medium:
    """An isotropic medium, or one axis of a crystal.

    Attributes
    ----------
    key, name, form : str
        Catalogue key, plain name, and what was measured (bulk crystal, thin film ...).
    formula : str
        Name in :data:`materials.formulas.FORMULAS`.
    coefficients : tuple of float
        As printed in the source.
    axis : str or None
        "o" or "e" of a uniaxial crystal.
    range_um : tuple of float or None
        Measured range; None for a non-dispersive medium.
    temperature_degc : float or None
        Temperature that the index holds for; None where the source states none.
    citation : str
        Paper of the index.
    n2_m2_per_w, dn_dt_per_k, two_photon_m_per_w : float or None
        Kerr index, slope of the index with temperature and two-photon absorption, each
        with ``*_citation`` and ``*_spread`` in words.
    caveats : tuple of str
        What a user of the numbers must know.
    missing : tuple of str
        Names of the values for which there is no source.
    extrapolate : bool
        Whether wavelengths outside ``range_um`` are allowed.
    index_shift : float
        Added to the index by :meth:`at_temperature`.
    fit : Fit or None
        For a medium fitted to measured points.
    """

    key: str
    name: str
    form: str
    formula: str
    coefficients: tuple[float, ...]
    axis: str | None = None
    range_um: tuple[float, float] | None = None
    temperature_degc: float | None = None
    citation: str = ""
    n2_m2_per_w: float | None = None
    n2_citation: str = ""
    n2_spread: str = ""
    dn_dt_per_k: float | None = None
    dn_dt_citation: str = ""
    dn_dt_spread: str = ""
    two_photon_m_per_w: float | None = None
    two_photon_citation: str = ""
    two_photon_spread: str = ""
    caveats: tuple[str, ...] = ()
    missing: tuple[str, ...] = ()
    extrapolate: bool = False
    index_shift: float = 0.0
    fit: Fit | None = field(default=None, repr=False)

    def __repr__(self) -> str:
        return f"<Medium {self.key}: {self.name}, {self.form}, {self._range_words()}>"

    # -- dispersion at a wavelength ------------------------------------------------

    def index(self, wavelength_um: ArrayLike) -> Any:
        """Refractive index.

        Parameters
        ----------
        wavelength_um : float or ndarray, um

        Returns
        -------
        float or ndarray
            As ``wavelength_um``.

        Raises
        ------
        InputError
            A wavelength is not a positive finite number.
        OutsideMaterialRange
            A wavelength lies outside the measured range.
        """
        return _plain(self._index_about(wavelength_um, 0)[0])

    def group_index(self, wavelength_um: ArrayLike) -> Any:
        """Group index n - l dn/dl; arguments and errors as for :meth:`index`."""
        return _plain(C_UM_PER_PS * self._beta_about(wavelength_um, 1)[1])

    def beta2_ps2_per_km(self, wavelength_um: ArrayLike) -> Any:
        """Second derivative of n omega/c by omega; arguments and errors as :meth:`index`."""
        return _plain(2.0 * PER_UM_TO_PER_KM * self._beta_about(wavelength_um, 2)[2])

    def zero_dispersion_um(self) -> np.ndarray:
        """Wavelengths inside the range where beta2 changes sign, um, rising; may be empty.

        Found on 4000 wavelengths in geometric progression, so a pair of zeros closer
        than about 0.1 % is not seen; then bisected to rounding.
        """
        if self.range_um is None:
            return np.empty(0)
        grid = np.geomspace(*self.range_um, _ZERO_SEARCH_POINTS)
        sign = np.sign(self.beta2_ps2_per_km(grid))
        at = np.flatnonzero(sign[:-1] * sign[1:] < 0)
        low, high, low_sign = grid[at], grid[at + 1], sign[at]
        for _ in range(_BISECTIONS):
            middle = 0.5 * (low + high)
            same = np.sign(self.beta2_ps2_per_km(middle)) == low_sign
            low, high = np.where(same, middle, low), np.where(same, high, middle)
        return np.sort(np.concatenate([0.5 * (low + high), grid[1:-1][sign[1:-1] == 0]]))

    # -- series in frequency -------------------------------------------------------

    def permittivity_series(
        self, omega_rad_per_ps: ArrayLike, order: int, temperature_degc: float | None = None
    ) -> np.ndarray:
        """Taylor coefficients of eps_r = n**2 in omega (1/k! included).

        Parameters
        ----------
        omega_rad_per_ps : float or ndarray, rad/ps
        order : int
            Highest power.
        temperature_degc : float, optional
            As :meth:`at_temperature`; None keeps the temperature of the medium.

        Returns
        -------
        ndarray of float, shape (order + 1, *omega.shape)

        Raises
        ------
        InputError, OutsideMaterialRange
            As :meth:`index`.
        MissingData
            A temperature is asked for and the medium has no dn/dT.
        """
        if temperature_degc is not None:
            warmed = self.at_temperature(temperature_degc)
            return warmed.permittivity_series(omega_rad_per_ps, order)
        omega = self._checked_omega(omega_rad_per_ps)
        q = formulas.inverse_wavelength(omega, order)
        if self.index_shift == 0.0:
            eps = formulas.permittivity(self.formula, q, self.coefficients)
            self._check_physical(eps[0], omega)
            return eps
        n = self.index_series(omega, order)
        return series.multiply(n, n)

    def index_series(
        self, omega_rad_per_ps: ArrayLike, order: int, temperature_degc: float | None = None
    ) -> np.ndarray:
        """Taylor coefficients of n in omega; as :meth:`permittivity_series`."""
        if temperature_degc is not None:
            warmed = self.at_temperature(temperature_degc)
            return warmed.index_series(omega_rad_per_ps, order)
        omega = self._checked_omega(omega_rad_per_ps)
        q = formulas.inverse_wavelength(omega, order)
        if formulas.FORMULAS[self.formula].gives_index:
            n = formulas.index(self.formula, q, self.coefficients)
            self._check_physical(n[0], omega)
        else:
            eps = formulas.permittivity(self.formula, q, self.coefficients)
            self._check_physical(eps[0], omega)
            n = series.sqrt(eps)
        n[0] += self.index_shift
        return n

    def variation_series(self, omega_rad_per_ps: ArrayLike, order: int) -> np.ndarray:
        """One-sigma variations of eps_r that the fit of the points leaves open.

        Returns
        -------
        ndarray of float, shape (n_params, order + 1, *omega.shape)
            First-order changes of :meth:`permittivity_series`, independent of each
            other: the variance of any linear result is the sum of their squares. First
            the constants; then other arrangements of resonances that fit about as well
            (their difference times the root of their weight); then the model error, by
            which a sum of resonances as such departs from the points
            (:mod:`materials.model_error`). ``n_params`` is 0 for a medium that was not
            fitted here.
        """
        omega = self._checked_omega(omega_rad_per_ps)
        q = formulas.inverse_wavelength(omega, order)
        if self.fit is None:
            return np.zeros((0, *q.shape))
        gradient = formulas.fitted_resonances_gradient(q, self.coefficients)
        out = np.tensordot(self.fit.covariance_root.T, gradient, axes=1)
        e = formulas.permittivity(self.formula, q, self.coefficients)
        for weight, coefficients in self.fit.alternatives:
            other = formulas.permittivity(self.formula, q, coefficients)
            out = np.concatenate([out, math.sqrt(weight) * (other - e)[None]])
        smooth = model_error.index_variations(q, self.fit.window_um, self.fit.misfit_variations)
        twice_n = 2.0 * series.sqrt(e)
        out = np.array([*out, *(series.multiply(twice_n, row) for row in smooth)])
        if self.index_shift != 0.0:
            # eps = (sqrt(e) + shift)^2, hence d eps = (1 + shift/sqrt(e)) de
            factor = self.index_shift * series.power(e, -0.5)
            factor[0] += 1.0
            out = np.array([series.multiply(factor, row) for row in out])
        return out

    # -- copies --------------------------------------------------------------------

    def allow_extrapolation(self) -> Medium:
        """Copy that also works outside its measured range, and says so in its caveats."""
        if self.range_um is None or self.extrapolate:
            return self
        caveat = f"may be extrapolated outside {self._range_words()}"
        return replace(self, extrapolate=True, caveats=(*self.caveats, caveat))

    def at_temperature(self, temperature_degc: float) -> Medium:
        """Copy with the index shifted by dn/dT times the change of temperature.

        The shift is the same at all wavelengths. Where the source states no temperature,
        20 degC is taken and said so.

        Raises
        ------
        InputError
            The temperature is not a finite number above absolute zero.
        MissingData
            The medium has no dn/dT.
        """
        temperature = float(temperature_degc)
        if not (math.isfinite(temperature) and temperature > -273.15):
            raise InputError(
                f"temperature {temperature_degc} degC: give a finite value above -273.15 degC"
            )
        if self.dn_dt_per_k is None:
            raise MissingData(
                f"{self.key} has no dn/dT, so it cannot be taken to {temperature:g} degC: "
                "leave the temperature out, or use a medium that has one"
            )
        caveats, start = self.caveats, self.temperature_degc
        if start is None:
            start = ROOM_TEMPERATURE_DEGC
            caveats = (*caveats, "states no temperature: 20 degC taken")
        change = temperature - start
        if abs(change) > 100.0:
            caveats = (*caveats, f"dn/dT used linearly over {change:.0f} K")
        shift = self.index_shift + self.dn_dt_per_k * change
        return replace(self, temperature_degc=temperature, index_shift=shift, caveats=caveats)

    # -- helpers -------------------------------------------------------------------

    def _range_words(self) -> str:
        if self.range_um is None:
            return "any wavelength"
        return f"{self.range_um[0]:g}-{self.range_um[1]:g} um"

    def _index_about(self, wavelength_um: ArrayLike, order: int) -> np.ndarray:
        return self.index_series(omega_from_um(_positive(wavelength_um, "wavelength", "um")), order)

    def _beta_about(self, wavelength_um: ArrayLike, order: int) -> np.ndarray:
        omega = omega_from_um(_positive(wavelength_um, "wavelength", "um"))
        n = self.index_series(omega, order)
        return series.multiply(series.variable(omega, order), n) / C_UM_PER_PS

    def _checked_omega(self, omega_rad_per_ps: ArrayLike) -> np.ndarray:
        omega = _positive(omega_rad_per_ps, "frequency", "rad/ps")
        if self.range_um is None or self.extrapolate or omega.size == 0:
            return omega
        low, high = self.range_um
        wavelength = um_from_omega(omega)
        outside = (wavelength < low * (1.0 - _RANGE_SLACK)) | (
            wavelength > high * (1.0 + _RANGE_SLACK)
        )
        if np.any(outside):
            asked = float(np.ravel(wavelength)[np.flatnonzero(np.ravel(outside))[0]])
            raise OutsideMaterialRange(
                f"{self.key} ({self.name}): {asked:.6g} um is outside its measured range "
                f"{self._range_words()} ({self.citation or 'no citation'}); stay inside, or ask "
                "for extrapolation (.allow_extrapolation(), extrapolate in a design file)"
            )
        return omega

    def _check_physical(self, value: np.ndarray, omega: np.ndarray) -> None:
        """Refuse n**2 or n that is not positive: only an extrapolated formula gets there."""
        bad = ~(np.isfinite(value) & (value > 0.0))
        if np.any(bad):
            asked = float(np.ravel(um_from_omega(omega))[np.flatnonzero(np.ravel(bad))[0]])
            raise OutsideMaterialRange(
                f"{self.key} ({self.name}): its formula gives no real index at {asked:.6g} um, "
                f"too far outside its range {self._range_words()}; stay closer to it"
            )


def _positive(value: ArrayLike, what: str, unit: str) -> np.ndarray:
    """Array of float, all positive and finite."""
    try:
        array = np.asarray(value, dtype=float)
    except (TypeError, ValueError) as exc:
        raise InputError(f"{what} {value!r}: give a number or an array in {unit}") from exc
    bad = ~(np.isfinite(array) & (array > 0.0))
    if np.any(bad):
        first = np.ravel(array)[np.flatnonzero(np.ravel(bad))[0]]
        raise InputError(f"{what} {first} {unit}: give a finite value above 0 {unit}")
    return array


def _plain(value: np.ndarray) -> Any:
    """A float from a 0-d array, anything else unchanged."""
    return float(value) if np.ndim(value) == 0 else value
