"""Resonances of a ring: the frequencies where beta R is a whole number, to rounding.

Newton's method with the curve's exact derivative, all orders at once. Each root is kept
as the nearest double and the correction below it, so that second differences of roots of
1e3 rad/ps lose nothing in the subtraction: what is left is the rounding of beta itself,
some 1e-16 of 1e3 rad, which is about 0.1 Hz.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np

from materials.common.errors import NotConverged, OutOfRange, SolverError
from phasematch.curve_protocol import Curve

#: Most resonances that are found at once.
MOST_RESONANCES = 200_000

_GUESS_POINTS = 129
_MOST_PASSES = 30
_LAST_STEP = 1e-10


@dataclass(frozen=True, slots=True, eq=False)
class Lines:
    """Resonances of successive orders.

    Attributes
    ----------
    order : ndarray of int, shape (n,)
    omega_rad_per_ps : ndarray, shape (n,)
        NaN where the order lies outside the solved band.
    rest_rad_per_ps : ndarray, shape (n,)
        What the double next to the root leaves over.
    """

    order: np.ndarray
    omega_rad_per_ps: np.ndarray
    rest_rad_per_ps: np.ndarray

    def apart(self, upper: Any, lower: Any) -> np.ndarray:
        """omega[upper] - omega[lower] without the rounding of the roots."""
        omega, rest = self.omega_rad_per_ps, self.rest_rad_per_ps
        return (omega[upper] - omega[lower]) + (rest[upper] - rest[lower])

    def misaligned(self, centre: Any, mu: Any) -> np.ndarray:
        """omega[+mu] + omega[-mu] - 2 omega[0] about the entries ``centre``, rad/ps.

        The two differences are exact, being of numbers within a factor of two.
        """
        omega, rest = self.omega_rad_per_ps, self.rest_rad_per_ps
        up, down = centre + mu, centre - mu
        coarse = (omega[up] - omega[centre]) - (omega[centre] - omega[down])
        return coarse + ((rest[up] - rest[centre]) - (rest[centre] - rest[down]))


def order_range(curve: Curve, radius_um: float) -> tuple[int, int]:
    """Lowest and highest order in the band; the first is above the second if there is none.

    Raises
    ------
    SolverError
        When beta does not rise with frequency.
    """
    _, turns = _turns(curve, radius_um)
    return math.ceil(turns[0]), math.floor(turns[-1])


def check_number(curve: Curve, radius_um: float, number: int) -> None:
    """Refuse to find more than `MOST_RESONANCES` at once.

    Raises
    ------
    OutOfRange
    """
    if number > MOST_RESONANCES:
        short, long = curve.band_um
        raise OutOfRange(
            f"a ring of radius {radius_um:g} um has too many resonances, {number} between "
            f"{short:.6g} and {long:.6g} um; at most {MOST_RESONANCES} are found at once: narrow "
            "the band, or take a smaller ring"
        )


def _turns(curve: Curve, radius_um: float) -> tuple[np.ndarray, np.ndarray]:
    """Frequencies over the band and beta R there, checked to rise."""
    grid = np.linspace(*curve.band_rad_per_ps, _GUESS_POINTS)
    turns = radius_um * np.asarray(curve.beta_rad_per_um(grid))
    if not np.all(np.diff(turns) > 0.0):
        raise SolverError(
            f"beta of mode {curve.mode} does not rise all over the band, so its resonances have "
            "no single order; narrow the band or check the curve"
        )
    return grid, turns


def find_lines(curve: Curve, radius_um: float, order: Any) -> Lines:
    """Resonances of the given azimuthal orders.

    Parameters
    ----------
    curve : Curve
    radius_um : float
        Radius at which beta is taken.
    order : array_like of int, shape (n,)

    Returns
    -------
    Lines
        NaN for the orders outside the band.

    Raises
    ------
    SolverError
        When beta does not rise with frequency, or a root does not settle.
    """
    order = np.asarray(order, dtype=int)
    low, high = curve.band_rad_per_ps
    grid, turns = _turns(curve, radius_um)
    inside = (order >= turns[0]) & (order <= turns[-1])
    omega = np.interp(order, turns, grid)
    rest = np.zeros_like(omega)
    for _ in range(_MOST_PASSES):
        missing = order - radius_um * np.asarray(curve.beta_rad_per_um(omega))
        step = missing / (radius_um * np.asarray(curve.beta_rad_per_um(omega, 1)))
        # what moves the double is taken over, the remainder is the rest
        moved = np.clip(omega + step, low, high)
        rest = step - (moved - omega)
        # this step is taken, so what it leaves is its square: far below rounding
        settled = ~inside | (np.abs(step) <= _LAST_STEP * omega)
        omega = np.where(inside, moved, omega)
        if settled.all():
            break
    else:
        worst = order[~settled][0]
        raise NotConverged(
            f"the resonance of order {worst} of mode {curve.mode} did not settle; is the curve "
            "smooth there?"
        )
    rest = np.where((omega > low) & (omega < high), rest, 0.0)
    nothing = np.where(inside, 0.0, np.nan)
    return Lines(order, omega + nothing, rest + nothing)


def ring_dispersion(derivatives: Any, radius_um: float) -> np.ndarray:
    """D1 .. D4 = d^k omega/d mu^k in rad/ps from beta1 .. beta4 in ps^k/um.

    Parameters
    ----------
    derivatives : array_like, shape (4, ...)
        beta1 to beta4.
    radius_um : float

    Returns
    -------
    ndarray, shape (4, ...)

    Notes
    -----
    Derivatives of the inverse function of beta(omega) R = m: D1 = 1/(beta1 R),
    D2 = -D1^2 b2, D3 = -D1^3 (b3 - 3 b2^2), D4 = -D1^4 (b4 - 10 b2 b3 + 15 b2^3),
    b_k = beta_k/beta1.
    """
    beta1, *higher = np.asarray(derivatives, dtype=float)
    b2, b3, b4 = (b / beta1 for b in higher)
    d1 = 1.0 / (beta1 * radius_um)
    d2 = -(d1**2) * b2
    d3 = -(d1**3) * (b3 - 3.0 * b2**2)
    d4 = -(d1**4) * (b4 - 10.0 * b2 * b3 + 15.0 * b2**3)
    return np.stack([d1, d2, d3, d4])
