"""A medium from measured points: a user's own n(lambda), or a table of the catalogue.

The fit itself is in :mod:`materials.resonance_fit`, imported only when it is needed. Its
error has two parts: the covariance of the constants, which takes the number of
resonances for granted, and the model error of :mod:`materials.model_error`, which says
by how much that form itself departs from the points. A table of the catalogue counts as
a printed curve there, points of a user as measurements with noise.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike

from materials.common.errors import InputError, OutOfRange
from materials.medium import Fit, Medium
from materials.model_error import Misfit, misfit
from materials.nondispersive import stated_values

if TYPE_CHECKING:
    from materials.resonance_fit import ResonanceFit

#: Fewest points of a fit, and the wavelengths (um) and indices that are believed.
_FEWEST_POINTS = 4
_WAVELENGTHS_UM = (0.05, 100.0)
_INDICES = (1.0, 6.0)


def from_table(
    wavelength_um: ArrayLike,
    index: ArrayLike,
    *,
    name: str = "measured",
    sigma: ArrayLike | None = None,
    terms: int | None = None,
    n2_m2_per_w: float | None = None,
    dn_dt_per_k: float | None = None,
) -> Medium:
    """Medium fitted to measured indices.

    Parameters
    ----------
    wavelength_um : array of float, shape (points,), um
        Vacuum wavelengths, rising or falling, at least four.
    index : array of float, shape (points,)
    name : str
    sigma : float or array of float, shape (points,), optional
        Standard deviation of the index. Without it all points weigh the same and the
        scatter about the fit takes its place.
    terms : int, optional
        Number of resonances, 1 to 3. Without it, as many as the points warrant.
    n2_m2_per_w, dn_dt_per_k : float, optional
        Kerr index (m2/W) and slope with temperature (1/K, from 20 degC).

    Returns
    -------
    Medium
        Valid between the first and the last wavelength. ``medium.fit`` holds residuals
        and covariance, ``medium.variation_series`` what they mean for eps_r.

    Raises
    ------
    InputError
        Too few points, lengths that differ, NaN, wavelengths out of order or repeated.
    OutOfRange
        Wavelengths or indices that look like another unit or quantity.

    Notes
    -----
    Least squares in n of n^2 = 1 + sum A_i l^2/(l^2 - B_i^2) with A_i >= 0 and no
    resonance inside the window; a resonance may sit at zero or at infinite wavelength
    (a constant, or -C l^2). The covariance is scaled up where the scatter exceeds
    ``sigma`` significantly, and where neighbouring residuals are correlated. A smooth
    misfit beyond the noise, as too few resonances leave, is a caveat and enters the
    variations in full.

    Examples
    --------
    >>> import numpy as np
    >>> w = np.linspace(1.2, 1.8, 13)
    >>> film = from_table(w, np.sqrt(1 + 2.9 * w**2 / (w**2 - 0.14**2)), name="film")
    >>> print(f"{film.index(1.55):.6f}, {film.fit.terms} resonance")
    1.980872, 1 resonance
    """
    w, n = _checked_points(wavelength_um, index, name)
    deviation = None if sigma is None else _checked_sigma(sigma, w.size, name)
    _check_terms(terms, w.size, name)
    if w[0] > w[-1]:
        w, n = w[::-1], n[::-1]
        deviation = None if deviation is None else deviation[::-1]
    formula, coefficients, fit, caveats = _fit(w, n, deviation, terms)
    residual = f"residual {fit.residual_rms:.1e} rms, {fit.residual_max:.1e} at most"
    return Medium(
        key=name,
        name=name,
        form="measured points",
        formula=formula,
        coefficients=coefficients,
        range_um=fit.window_um,
        citation="points given by the user",
        caveats=(f"index fitted to {fit.points} points ({residual})", *caveats),
        fit=fit,
        **stated_values(n2_m2_per_w, dn_dt_per_k),
    )


def fit_window(
    wavelength_um: ArrayLike, index: ArrayLike, window_um: tuple[float, float], terms: int
) -> tuple[str, tuple[float, ...], Fit, tuple[str, ...]]:
    """Formula, coefficients, :class:`Fit` and caveats of a table's points inside a window."""
    w, n = np.asarray(wavelength_um, dtype=float), np.asarray(index, dtype=float)
    inside = (w >= window_um[0]) & (w <= window_um[1])
    return _fit(w[inside], n[inside], None, terms, printed_curve=True)


def _fit(
    w: np.ndarray,
    n: np.ndarray,
    sigma: np.ndarray | None,
    terms: int | None,
    printed_curve: bool = False,
) -> tuple[str, tuple[float, ...], Fit, tuple[str, ...]]:
    """Formula, coefficients, Fit and caveats of points in rising order."""
    from materials import resonance_fit  # lazily: scipy.optimize is slow to import

    best = resonance_fit.fit(w, n, sigma, terms)
    scale, caveats = _error_scale(best, sigma is not None)
    smooth = misfit(w, best.residual, best.structure.parameters, sigma, printed_curve)
    caveats = (*caveats, *_misfit_caveats(smooth, best.structure.terms))
    root = best.root * scale
    free = best.structure.free()
    covariance = root[free] @ root[free].T
    root.flags.writeable = covariance.flags.writeable = False
    fit = Fit(
        window_um=(float(w[0]), float(w[-1])),
        points=w.size,
        terms=best.structure.terms,
        residual_rms=float(np.sqrt(np.mean(best.residual**2))),
        residual_max=float(np.max(np.abs(best.residual))),
        covariance=covariance,
        covariance_root=root,
        alternatives=tuple((w, tuple(float(c) for c in k)) for w, k in best.alternatives),
        misfit_variations=smooth.variations,
    )
    return "fitted_resonances", tuple(float(c) for c in best.coefficients), fit, caveats


def _misfit_caveats(smooth: Misfit, terms: int) -> list[str]:
    if smooth.smooth_rms == 0.0:
        return []
    form = "1 resonance leaves" if terms == 1 else f"{terms} resonances leave"
    return [
        f"{form} a smooth misfit of {smooth.smooth_rms:.1e} rms beside {smooth.noise_rms:.1e} "
        "of scatter: the error bars hold it"
    ]


def _error_scale(best: ResonanceFit, sigma_given: bool) -> tuple[float, tuple[str, ...]]:
    """Factor on the covariance root, and what there is to say about it.

    Residuals that follow each other (lag-one correlation r) carry fewer independent
    points, (1 - r)/(1 + r) of them for a first-order autoregression.
    """
    points = best.residual.size
    freedom = points - best.structure.parameters
    ratio = best.chi_square / freedom
    caveats: list[str] = []
    variance = 1.0
    if not sigma_given:
        variance = ratio
    elif ratio > 1.0 + 3.0 * np.sqrt(2.0 / freedom):
        variance = ratio
        caveats.append(f"scatter exceeds the stated sigma {np.sqrt(ratio):.1f} times")
    r = _neighbour_correlation(best.residual)
    if r > 2.0 / np.sqrt(points):
        variance *= (1.0 + r) / (1.0 - r)
        caveats.append(f"residuals of neighbouring points are correlated ({r:.2f})")
    return float(np.sqrt(variance)), tuple(caveats)


def _neighbour_correlation(residual: np.ndarray) -> float:
    total = float(residual @ residual)
    if total == 0.0:
        return 0.0
    return min(float(residual[1:] @ residual[:-1]) / total, 0.99)


# -- checks ----------------------------------------------------------------------------


def _numbers(values: ArrayLike, what: str, name: str) -> np.ndarray:
    try:
        array = np.asarray(values, dtype=float)
    except (TypeError, ValueError) as exc:
        raise InputError(f"{name}: {what} must be a list of numbers") from exc
    if array.ndim != 1:
        raise InputError(f"{name}: {what} has {array.ndim} dimensions, give one list of numbers")
    bad = np.flatnonzero(~np.isfinite(array))
    if bad.size:
        raise InputError(
            f"{name}: {what} of row {bad[0] + 1} is {array[bad[0]]}; leave out rows without a value"
        )
    return array


def _checked_points(
    wavelength_um: ArrayLike, index: ArrayLike, name: str
) -> tuple[np.ndarray, np.ndarray]:
    w = _numbers(wavelength_um, "wavelength_um", name)
    n = _numbers(index, "index", name)
    if w.size != n.size:
        raise InputError(
            f"{name}: {w.size} wavelengths and {n.size} indices; give one index a wavelength"
        )
    if w.size < _FEWEST_POINTS:
        raise InputError(f"{name}: {w.size} points; a fit needs at least {_FEWEST_POINTS}")
    _check_wavelengths(w, name)
    low, high = _INDICES
    odd = np.flatnonzero((n < low) | (n > high))
    if odd.size:
        raise OutOfRange(
            f"{name}: index {n[odd[0]]:g} of row {odd[0] + 1}; an index lies from {low:g} to "
            f"{high:g} (is the column n, and not n^2 or k?)"
        )
    return w, n


def _check_wavelengths(w: np.ndarray, name: str) -> None:
    low, high = _WAVELENGTHS_UM
    odd = w[(w < low) | (w > high)]
    if odd.size:
        raise OutOfRange(
            f"{name}: wavelength {odd[0]:g} um; allowed are {low:g} to {high:g} um{_unit_guess(w)}"
        )
    step = np.diff(w)
    same = np.flatnonzero(step == 0.0)
    if same.size:
        row = same[0]
        raise InputError(
            f"{name}: rows {row + 1} and {row + 2} have the same wavelength {w[row]:g} um; "
            "keep or average one of them"
        )
    turn = np.flatnonzero(np.sign(step) != np.sign(step[0]))
    if turn.size:
        row = turn[0]
        raise InputError(
            f"{name}: wavelengths turn round at row {row + 2} ({w[row]:g}, then "
            f"{w[row + 1]:g} um); "
            "sort the rows by wavelength"
        )


def _unit_guess(w: np.ndarray) -> str:
    middle = float(np.median(w))
    if 100.0 < middle < 1e5:
        return "; these look like nanometres (divide by 1000) or THz"
    if 0.0 < middle < 1e-4:
        return "; these look like metres (multiply by 1e6)"
    return "; give vacuum wavelengths in um"


def _checked_sigma(sigma: ArrayLike, points: int, name: str) -> np.ndarray:
    array = _numbers(np.full(points, sigma) if np.ndim(sigma) == 0 else sigma, "sigma", name)
    if array.size != points:
        raise InputError(f"{name}: {array.size} values of sigma for {points} points")
    if not np.all(np.isfinite(array) & (array > 0.0)):
        raise InputError(f"{name}: sigma must be finite and above 0 everywhere")
    return array


def _check_terms(terms: int | None, points: int, name: str) -> None:
    if terms is None:
        return
    if isinstance(terms, bool) or terms not in (1, 2, 3):
        raise InputError(f"{name}: terms {terms!r}; give 1, 2 or 3 resonances, or leave it out")
    # a term takes two constants, its limits one (the first is always a free resonance)
    needed = max(terms + 1, 2) + 2
    if points < needed:
        raise InputError(f"{name}: {points} points for {terms} resonances; give at least {needed}")
