"""What the residuals of a fit say about the form that was fitted: its model error.

The covariance of a fit holds if the index really is a sum of so many resonances. What
the form cannot follow stays in the residual as a smooth curve, so the residual r is
projected on smooth curves: Legendre polynomials p_j in ln l, made orthonormal on the
(weighted) points, of degree 0 to 0.6 sqrt(points). Their coefficients c_j = p_j . r are
the smooth misfit; the rest of the residual, per point, is its noise s, which every c_j
carries too. Independent one-sigma variations of the index follow:

- The sum of c_j p_j over all |c_j| > 3 s, as one variation: the difference between the
  fit and a smooth curve through the points. Where no c_j is so large there is none; the
  form is then believed within its noise, and for points of a user that is all.
- For a table of the catalogue, every p_j besides, times s, or sqrt(c_j^2 + s^2) where c_j
  is not in the sum. Such a table is as a rule a curve, printed to some digits, of a film
  that obeys no sum of resonances, so its scatter is no measuring error that the form may
  average away: anything smooth through the printed digits is allowed, and the bar becomes
  about that of a local fit. It is widest at the ends of the window.

The factor 0.6 is the one free number. Polynomials on evenly spaced points are well
determined while their degree is well below 2 sqrt(points); inside that, 0.6 was set so that
the bar of beta2 at 1.55 um of six film tables reaches other evidence about two bars away:
local polynomial fits, other numbers of resonances and windows, another formula where there
is one. With 0.3 the bars of tables that are all noise are two to three times smaller; those
of a plain misfit stay, as the low degrees carry it.

References
----------
M. C. Kennedy and A. O'Hagan, J. R. Stat. Soc. B 63, 425 (2001), for the smooth
discrepancy between a model and the truth as a part of the error. G. Dahlquist and
A. Bjorck, Numerical Methods (Prentice-Hall, 1974), section 4.4.3, for degree and number
of points [from memory (medium)].
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from materials.common import series

#: Highest degree over the root of the number of points.
_DEGREE_FACTOR = 0.6

#: The noise is estimated from at least so many points more than constants.
_FEWEST_LEFT = 4

#: A smooth misfit is believed beyond so many times its noise.
_SIGNIFICANT = 3.0

#: Residuals below this are what the optimiser leaves of an exact fit.
_NEGLIGIBLE = 1e-9


@dataclass(frozen=True, slots=True, eq=False)
class Misfit:
    """Smooth part of a residual.

    Attributes
    ----------
    variations : ndarray, shape (rows, degree + 1)
        One-sigma variations of the index, each as Legendre coefficients in ln l scaled
        to -1 to 1 over the window.
    smooth_rms : float
        Root mean square over the points of the significant smooth part; 0 if there is none.
    noise_rms : float
        Of the index, what the polynomials leave.
    """

    variations: np.ndarray
    smooth_rms: float
    noise_rms: float


def misfit(
    wavelength_um: np.ndarray,
    residual: np.ndarray,
    parameters: int,
    sigma: np.ndarray | None,
    printed_curve: bool,
) -> Misfit:
    """Project a residual on smooth curves.

    Parameters
    ----------
    wavelength_um, residual : ndarray of float, shape (points,)
        In rising order; the residual of the index.
    parameters : int
        Number of fitted constants.
    sigma : ndarray of float, shape (points,), optional
        Standard deviation of each index: the noise of a coefficient is not taken smaller.
    printed_curve : bool
        Whether the noise too counts as a possible smooth misfit, as in a table of the
        catalogue.

    Returns
    -------
    Misfit
        Without variations where the points are too few to tell noise from misfit.
    """
    points = wavelength_um.size
    degree = min(round(_DEGREE_FACTOR * math.sqrt(points)), points - parameters - 1 - _FEWEST_LEFT)
    if degree < 1:
        return Misfit(np.zeros((0, 1)), 0.0, 0.0)
    weight = np.ones(points) if sigma is None else 1.0 / sigma
    logs = np.log(wavelength_um)
    x = (2.0 * logs - logs[0] - logs[-1]) / (logs[-1] - logs[0])
    basis, triangle = np.linalg.qr(np.polynomial.legendre.legvander(x, degree) * weight[:, None])
    coefficients = basis.T @ (weight * residual)
    left = weight * residual - basis @ coefficients
    noise = float(np.linalg.norm(left)) / math.sqrt(points - parameters - degree - 1)
    if sigma is not None:
        noise = max(noise, 1.0)
    seen = np.abs(coefficients) > _SIGNIFICANT * noise
    smooth = float(np.sqrt(np.mean(((basis[:, seen] @ coefficients[seen]) / weight) ** 2)))
    if smooth < _NEGLIGIBLE:
        seen[:], smooth = False, 0.0
    columns = np.linalg.inv(triangle)
    rows = (columns[:, seen] @ coefficients[seen])[None] if smooth else np.zeros((0, degree + 1))
    if printed_curve:
        size = np.where(seen, noise, np.hypot(coefficients, noise))
        rows = np.concatenate([rows, (columns * size).T])
    rows.flags.writeable = False
    return Misfit(rows, smooth, float(np.sqrt(np.mean((left / weight) ** 2))))


def index_variations(
    inverse_wavelength: np.ndarray, window_um: tuple[float, float], variations: np.ndarray
) -> np.ndarray:
    """Series of the variations of the index.

    Parameters
    ----------
    inverse_wavelength : ndarray, shape (order + 1, ...), 1/um
        Series of 1/l.
    window_um : tuple of float
        First and last wavelength of the fit.
    variations : ndarray, shape (rows, degree + 1)
        As in :class:`Misfit`.

    Returns
    -------
    ndarray of float, shape (rows, order + 1, ...)
    """
    low, high = (math.log(w) for w in window_um)
    x = -2.0 * _logarithm(inverse_wavelength)
    x[0] -= low + high
    x /= high - low
    polynomials = [series.constant(np.ones(x.shape[1:]), x.shape[0] - 1), x]
    for k in range(1, variations.shape[1] - 1):
        step = (2 * k + 1) * series.multiply(x, polynomials[k]) - k * polynomials[k - 1]
        polynomials.append(step / (k + 1))
    return np.tensordot(variations, np.array(polynomials[: variations.shape[1]]), axes=1)


def _logarithm(a: np.ndarray) -> np.ndarray:
    """Series of ln a; from a (ln a)' = a'."""
    out = np.zeros_like(a)
    out[0] = np.log(a[0])
    for k in range(1, a.shape[0]):
        total = k * a[k]
        for j in range(1, k):
            total = total - j * out[j] * a[k - j]
        out[k] = total / (k * a[0])
    return out
