"""Published dispersion formulas, each as an exact Taylor series in frequency.

The formulas are printed in terms of the wavelength l in um. Here they are evaluated on
the series of the inverse wavelength ``q = 1/l = omega/(2 pi c)``, which is linear in
omega: ``l**-2`` is then a polynomial of degree 2, and no digits are lost to the strongly
alternating series of l itself. Each function takes ``(q, coefficients)`` and returns the
series of n**2, or of n where the formula is printed that way; :func:`permittivity`
makes n**2 of either.

References
----------
The forms are the usual ones of the collections of optical constants: W. Sellmeier, Ann.
Phys. 223, 386 (1874); A. L. Cauchy (1836); M. Herzberger, Opt. Acta 6, 197 (1959);
J. W. Fleming, Appl. Opt. 23, 4486 (1984) for mixtures; S. Gehrsitz et al., J. Appl.
Phys. 87, 7825 (2000) for poles in photon energy.

Examples
--------
>>> omega = 2.0 * 3.141592653589793 * 299.792458 / 1.55
>>> q = inverse_wavelength(omega, 2)
>>> n = index("cauchy", q, (1.5, 0.01, -2.0))
>>> round(float(n[0]), 9)            # 1.5 + 0.01/1.55**2
1.504162331
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from materials.common import series
from materials.common.constants import C_UM_PER_PS, TWO_PI

#: Herzberger's fixed pole, um^2.
_HERZBERGER_POLE_UM2 = 0.028


def inverse_wavelength(omega_rad_per_ps: ArrayLike, order: int) -> np.ndarray:
    """Series in omega of 1/l, 1/um, shape (order + 1, *omega.shape)."""
    return series.variable(omega_rad_per_ps, order) / (TWO_PI * C_UM_PER_PS)


def _one_minus(a: np.ndarray) -> np.ndarray:
    out = -a
    out[0] += 1.0
    return out


def _pairs(values: Sequence[float]) -> zip[tuple[float, float]]:
    return zip(values[0::2], values[1::2], strict=True)


def _resonances(q: np.ndarray, c: Sequence[float], exponent: int) -> np.ndarray:
    """1 + C1 + sum A l^2/(l^2 - P), P the printed constant to the power ``exponent``."""
    q2 = series.power(q, 2.0)
    total = series.constant(np.full(q.shape[1:], 1.0 + c[0]), q.shape[0] - 1)
    for strength, pole in _pairs(c[1:]):
        if strength != 0.0:
            total = total + strength * series.reciprocal(_one_minus(pole**exponent * q2))
    return total


def sellmeier_squared_resonances(q: np.ndarray, c: Sequence[float]) -> np.ndarray:
    """n^2 - 1 = C1 + C2 l^2/(l^2 - C3^2) + C4 l^2/(l^2 - C5^2) + ..."""
    return _resonances(q, c, 2)


def sellmeier_plain_resonances(q: np.ndarray, c: Sequence[float]) -> np.ndarray:
    """n^2 - 1 = C1 + C2 l^2/(l^2 - C3) + C4 l^2/(l^2 - C5) + ..."""
    return _resonances(q, c, 1)


def _powers(q: np.ndarray, constant: float, rest: Sequence[float]) -> np.ndarray:
    """Constant + C l^P + ... for the (C, P) pairs of ``rest``."""
    total = series.constant(np.full(q.shape[1:], constant), q.shape[0] - 1)
    for factor, exponent in _pairs(rest):
        if factor != 0.0:
            total = total + factor * series.power(q, -exponent)
    return total


def polynomial(q: np.ndarray, c: Sequence[float]) -> np.ndarray:
    """n^2 = C1 + C2 l^C3 + C4 l^C5 + ..."""
    return _powers(q, c[0], c[1:])


def mixed_poles_and_powers(q: np.ndarray, c: Sequence[float]) -> np.ndarray:
    """n^2 = C1 + C2 l^C3/(l^2 - C4^C5) + C6 l^C7/(l^2 - C8^C9) + C10 l^C11 + ...

    An unused pole is printed 0 0 0 1; its strength 0 skips it.
    """
    q2 = series.power(q, 2.0)
    total = _powers(q, c[0], c[9:])
    for strength, exponent, base, pole_exponent in (c[1:5], c[5:9]):
        if strength != 0.0:
            pole = series.reciprocal(_one_minus(base**pole_exponent * q2))
            total = total + strength * series.multiply(series.power(q, 2.0 - exponent), pole)
    return total


def cauchy(q: np.ndarray, c: Sequence[float]) -> np.ndarray:
    """n = C1 + C2 l^C3 + C4 l^C5 + ..."""
    return _powers(q, c[0], c[1:])


def _inverse_square_poles(q: np.ndarray, constant: float, rest: Sequence[float]) -> np.ndarray:
    """Constant + C/(P - l^-2) + ... for the (C, P) pairs of ``rest``."""
    q2 = series.power(q, 2.0)
    total = series.constant(np.full(q.shape[1:], constant), q.shape[0] - 1)
    for strength, pole in _pairs(rest):
        if strength != 0.0:
            difference = -q2
            difference[0] += pole
            total = total + strength * series.reciprocal(difference)
    return total


def gas(q: np.ndarray, c: Sequence[float]) -> np.ndarray:
    """n - 1 = C1 + C2/(C3 - l^-2) + C4/(C5 - l^-2) + ..."""
    return _inverse_square_poles(q, 1.0 + c[0], c[1:])


def photon_energy_poles(q: np.ndarray, c: Sequence[float]) -> np.ndarray:
    """n^2 = C1 + C2/(C3 - l^-2) + C4/(C5 - l^-2) + ..., poles in 1/um^2."""
    return _inverse_square_poles(q, c[0], c[1:])


def herzberger(q: np.ndarray, c: Sequence[float]) -> np.ndarray:
    """n = C1 + C2 L + C3 L^2 + C4 l^2 + C5 l^4 + C6 l^6, L = 1/(l^2 - 0.028)."""
    q2 = series.power(q, 2.0)
    pole = series.multiply(q2, series.reciprocal(_one_minus(_HERZBERGER_POLE_UM2 * q2)))
    far = [value for k, c_k in enumerate(c[3:]) for value in (c_k, 2.0 * (k + 1))]
    total = _powers(q, c[0], far)
    return total + c[1] * pole + c[2] * series.multiply(pole, pole)


def mole_fraction_sellmeier(q: np.ndarray, c: Sequence[float]) -> np.ndarray:
    """n^2 - 1 = sum [S + x(G - S)] l^2/(l^2 - [P + x(R - P)]^2).

    ``c`` is x followed by (S, P, G, R) per resonance: strength and resonance of the host,
    then of the dopant (Fleming 1984, equation 3: linear in the mole fraction x).
    """
    fraction, rest = c[0], c[1:]
    mixed = [0.0]
    for k in range(0, len(rest), 4):
        strength, pole, dopant_strength, dopant_pole = rest[k : k + 4]
        mixed.append(strength + fraction * (dopant_strength - strength))
        mixed.append(pole + fraction * (dopant_pole - pole))
    return _resonances(q, mixed, 2)


def fitted_resonances(q: np.ndarray, c: Sequence[float]) -> np.ndarray:
    """n^2 = 1 - C1 l^2/(1 - C2 l^2) + C3/(1 - C4 l^-2) + C5/(1 - C6 l^-2) + ...

    A Sellmeier formula written so that both limits are regular: C4 = 0 is a pole at zero
    wavelength (a constant), C2 = 0 one at infinite wavelength (-C1 l^2). In the usual
    form B_i^2 = C4, C6, ... and, for the infrared term, B^2 = 1/C2 and A = C1/C2.
    """
    q2 = series.power(q, 2.0)
    total = series.constant(np.ones(q.shape[1:]), q.shape[0] - 1)
    if c[0] != 0.0:
        below = q2.copy()
        below[0] -= c[1]
        total = total - c[0] * series.reciprocal(below)
    for strength, pole in _pairs(c[2:]):
        total = total + strength * series.reciprocal(_one_minus(pole * q2))
    return total


def fitted_resonances_gradient(q: np.ndarray, c: Sequence[float]) -> np.ndarray:
    """Derivative of :func:`fitted_resonances` by each constant, shape (len(c), *q.shape)."""
    q2 = series.power(q, 2.0)
    below = q2.copy()
    below[0] -= c[1]
    far = series.reciprocal(below)
    rows = [-far, -c[0] * series.multiply(far, far)]
    for strength, pole in _pairs(c[2:]):
        near = series.reciprocal(_one_minus(pole * q2))
        rows.append(near)
        rows.append(strength * series.multiply(q2, series.multiply(near, near)))
    return np.array(rows)


def constant_index(q: np.ndarray, c: Sequence[float]) -> np.ndarray:
    """n = C1 at every wavelength."""
    return series.constant(np.full(q.shape[1:], float(c[0])), q.shape[0] - 1)


@dataclass(frozen=True, slots=True)
class Formula:
    """A dispersion formula: its function, and whether that gives n or n**2."""

    evaluate: Callable[[np.ndarray, Sequence[float]], np.ndarray]
    gives_index: bool = False


#: Every formula by the name that the tables use.
FORMULAS: dict[str, Formula] = {
    "sellmeier_squared_resonances": Formula(sellmeier_squared_resonances),
    "sellmeier_plain_resonances": Formula(sellmeier_plain_resonances),
    "polynomial": Formula(polynomial),
    "mixed_poles_and_powers": Formula(mixed_poles_and_powers),
    "cauchy": Formula(cauchy, gives_index=True),
    "gas": Formula(gas, gives_index=True),
    "herzberger": Formula(herzberger, gives_index=True),
    "mole_fraction_sellmeier": Formula(mole_fraction_sellmeier),
    "photon_energy_poles": Formula(photon_energy_poles),
    "fitted_resonances": Formula(fitted_resonances),
    "constant": Formula(constant_index, gives_index=True),
}


def permittivity(name: str, q: np.ndarray, coefficients: Sequence[float]) -> np.ndarray:
    """Series of n**2 by formula ``name``, same shape as ``q``."""
    formula = FORMULAS[name]
    value = formula.evaluate(q, coefficients)
    return series.multiply(value, value) if formula.gives_index else value


def index(name: str, q: np.ndarray, coefficients: Sequence[float]) -> np.ndarray:
    """Series of n by formula ``name``, same shape as ``q``."""
    formula = FORMULAS[name]
    value = formula.evaluate(q, coefficients)
    return value if formula.gives_index else series.sqrt(value)
