"""Frequency series of a mode: exact derivatives of the discrete eigenproblem.

Every matrix is a Taylor series in omega because each permittivity is one. With
A(omega) e = lambda(omega) Mn e and the left vector y, y^T Mn e_0 = 1::

    b_k      = sum_{j=1..k} A_j e_{k-j} - sum_{j=1..k-1} lambda_j Mn e_{k-j}
    lambda_k = y^T b_k
    (A_0 - lambda_0 Mn) e_k = -(b_k - lambda_k Mn e_0),   y^T Mn e_k = 0

The matrices A_j are never formed: A(omega) is applied to the series of e with
truncated-series arithmetic. The singular system is solved with the factorisation at a
nearby shift, by fixed-point iteration with projection; it stops on the residual.

References
----------
A. L. Andrew, K.-W. E. Chu, P. Lancaster, SIAM J. Matrix Anal. Appl. 14, 903 (1993):
derivatives of eigenvalues and eigenvectors of matrix functions.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from materials.common import series
from materials.common.constants import C_UM_PER_PS
from materials.common.errors import NotConverged
from modesolve.eigen import Factorisation, Pencil, RawMode

__all__ = ["Jet", "apply_series", "mode_jet"]

#: Relative residual at which the singular solves stop, and the most passes allowed.
JET_RESIDUAL = 1e-14
MOST_PASSES = 60

#: A solve that stalls above this is refused.
STALL_LIMIT = 1e-7


@dataclass(frozen=True, slots=True, eq=False)
class Jet:
    """Taylor series in omega of one mode on one grid.

    Attributes
    ----------
    omega : float, rad/ps
        Centre of the series.
    beta : ndarray, shape (order + 1,)
        Taylor coefficients of beta, rad/um ps^k (1/k! included).
    right, left : ndarray, shape (order + 1, edges)
        Series of e and of y; y is scaled by its closed form, so that n_eff y^T Mn e is
        the mode's power integral at every order.
    longitudinal : ndarray, shape (order + 1, nodes)
        Series of g = Mz^-1 G^T Me e; E_z on nodes is -(i/beta) g.
    permittivity : ndarray, shape (media, order + 1)
    residual : float
        Largest relative residual of the singular solves.
    """

    omega: float
    beta: np.ndarray
    right: np.ndarray
    left: np.ndarray
    longitudinal: np.ndarray
    permittivity: np.ndarray
    residual: float


def longitudinal_series(pencil: Pencil, eps: np.ndarray, e: np.ndarray) -> tuple:
    """(Me e, Mz^-1 G^T Me e) as series; ``eps`` (media, order + 1), ``e`` (order + 1, edges)."""
    media = pencil.operators.media
    gradient = pencil.operators.topology.gradient
    across = np.zeros(e.shape, np.result_type(eps, e))
    along = np.zeros((e.shape[0], gradient.shape[1]), eps.dtype)
    for coefficients, medium in zip(eps, media, strict=True):
        weighted = (medium.across @ e.T).T
        across = across + series.multiply(coefficients[: e.shape[0]], weighted)
        along = along + coefficients[: e.shape[0], None] * medium.along
    divergence = (gradient.T @ across.T).T
    return across, series.multiply(series.reciprocal(along), divergence)


def apply_series(
    pencil: Pencil, k0_squared: np.ndarray, eps: np.ndarray, e: np.ndarray
) -> np.ndarray:
    """Series of A(omega) e(omega), shape (order + 1, edges)."""
    operators = pencil.operators
    across, divergence = longitudinal_series(pencil, eps, e)
    gradient = operators.topology.gradient
    out = series.multiply(k0_squared[: e.shape[0]], across)
    out = out - (operators.curl_curl @ e.T).T
    return out - (operators.inverse_mu @ (gradient @ divergence.T)).T


def mode_jet(
    pencil: Pencil,
    factorisation: Factorisation,
    mode: RawMode,
    omega: float,
    permittivity: np.ndarray,
    neighbours: Sequence[RawMode] = (),
) -> Jet:
    """Frequency series of ``mode``.

    Parameters
    ----------
    pencil : Pencil
        At ``omega``.
    factorisation : Factorisation
        Of A - shift Mn, the shift nearer to this eigenvalue than to any other.
    mode : RawMode
    omega : float, rad/ps
    permittivity : ndarray, shape (media, order + 1)
        Taylor coefficients of each medium's relative permittivity.
    neighbours : sequence of RawMode
        Other modes known on this grid; what lies along them is solved exactly, so the
        iteration converges however close they are.

    Raises
    ------
    NotConverged
        When a singular solve does not reach ``JET_RESIDUAL``.
    """
    order = permittivity.shape[1] - 1
    k0 = series.variable(omega, order) / C_UM_PER_PS
    k0_squared = series.multiply(k0, k0)
    e0, y = mode.right, mode.left
    weighted = pencil.mass @ e0
    e = np.zeros((order + 1, e0.size), np.result_type(e0, permittivity))
    lam = np.zeros(order + 1, e.dtype)
    e[0], lam[0] = e0, mode.eigenvalue
    worst = 0.0
    for k in range(1, order + 1):
        b = apply_series(pencil, k0_squared, permittivity, e[: k + 1])[k]
        for j in range(1, k):
            b = b - lam[j] * (pencil.mass @ e[k - j])
        lam[k] = y @ b
        right = -(b - lam[k] * weighted)
        e[k], residual = _solve_singular(pencil, factorisation, mode, neighbours, right)
        worst = max(worst, residual)
    _, divergence = longitudinal_series(pencil, permittivity, e)
    gradient = pencil.operators.topology.gradient
    potential = (gradient @ divergence.T).T
    left = e + series.multiply(series.reciprocal(lam), potential)
    return Jet(omega, series.sqrt(lam), e, left, divergence, permittivity, worst)


def _solve_singular(
    pencil: Pencil,
    factorisation: Factorisation,
    mode: RawMode,
    neighbours: Sequence[RawMode],
    right: np.ndarray,
) -> tuple[np.ndarray, float]:
    """z with (A - lambda Mn) z = right and y^T Mn z = 0, and the relative residual left.

    Each pass solves for the defect, z <- z + P (A - shift Mn)^-1 defect, with P the
    projection that takes out the mode itself and its known neighbours; along a
    neighbour i the correction is y_i^T defect / (lambda_i - lambda). The error falls per
    pass by |lambda - shift| over the distance from the shift to the nearest other
    eigenvalue that is not a neighbour.
    """
    # in the norm of Mn^-1: in the plain one the shortest edges hide what is left elsewhere
    scale = np.sqrt(np.abs(pencil.mass.diagonal()))
    norm = float(np.linalg.norm(right / scale))
    z = np.zeros_like(right)
    if norm == 0.0:
        return z, 0.0
    taken_out = [(m.right, pencil.mass.T @ m.left) for m in (mode, *neighbours)]
    mass_e = pencil.mass @ mode.right
    defect, best, stalled = right, np.inf, 0
    for _ in range(MOST_PASSES):
        step = factorisation.solve(defect)
        for vector, dual in taken_out:
            step = step - vector * (dual @ step)
        for m in neighbours:
            step = step + m.right * ((m.left @ defect) / (m.eigenvalue - mode.eigenvalue))
        z = z + step
        defect = right - (pencil.matrix @ z - mode.eigenvalue * (pencil.mass @ z))
        defect = defect - mass_e * (mode.left @ defect)
        residual = float(np.linalg.norm(defect / scale)) / norm
        if residual < JET_RESIDUAL:
            return z, residual
        stalled = stalled + 1 if residual > 0.5 * best else 0
        best = min(best, residual)
        # below the limit nothing is won by more passes: what is left is rounding
        if stalled >= (1 if best < STALL_LIMIT else 3):
            break
    if best > STALL_LIMIT:
        raise NotConverged(
            f"a frequency derivative stalled at a relative residual of {best:.1e} "
            f"(wanted {JET_RESIDUAL:.0e}): another mode lies too close; "
            "change the wavelength or the geometry slightly"
        )
    return z, best
