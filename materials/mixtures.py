"""Formulas of mixtures, reduced to plain coefficients at one fraction.

References
----------
J. W. Fleming, Appl. Opt. 23, 4486 (1984): strengths and resonances linear in the mole
fraction.
S. Gehrsitz et al., J. Appl. Phys. 87, 7825 (2000): AlGaAs from poles in photon energy
whose constants are polynomials of composition and temperature.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from numpy.polynomial import polynomial

#: Photon energy in eV of 1/l = 1 per um, as the paper's coefficients use it.
_EV_UM = 1.239842

#: Boltzmann constant, eV/K.
_K_EV_PER_K = 8.617333e-5


def law(mixture: Mapping[str, Any], fraction: float) -> tuple[str, tuple[float, ...]]:
    """Formula name and coefficients of a mixture at ``fraction``."""
    if mixture["rule"] == "linear_sellmeier":
        numbers = (float(c) for c in mixture["coefficients"])
        return "mole_fraction_sellmeier", (fraction, *numbers)
    constants = mixture["constants"]
    temperature_k = float(mixture["temperature_k"])
    return "photon_energy_poles", _gehrsitz(constants, fraction, temperature_k)


def _at(coefficients: Sequence[float], x: float) -> float:
    return float(polynomial.polyval(x, np.asarray(coefficients, dtype=float)))


def _coth(x: float) -> float:
    return 1.0 / math.tanh(x)


def _gehrsitz(c: Mapping[str, Any], x: float, temperature_k: float) -> tuple[float, ...]:
    """Constants of n^2 = A + sum C/(E^2 - e^2) at composition x, e = 1/l in 1/um."""
    two_kt = 2.0 * _K_EV_PER_K * temperature_k
    phonons = sum(
        weight * energy * (1.0 - _coth(energy / two_kt))
        for weight, energy in zip(c["phonon_weights"], c["phonon_energies_ev"], strict=True)
    )
    gap = (_at(c["gap_ev"], x) + phonons) / _EV_UM
    return (
        _at(c["A_T"], temperature_k) + _at(c["A_x"], x),
        1.0 / _at(c["inverse_C0"], x),
        gap**2,
        _at(c["C1"], x),
        _at(c["E1sq_T"], temperature_k) + _at(c["E1sq_x"], x),
        (1.0 - x) * c["C2"],
        c["E2sq"],
        x * c["C3"],
        c["E3sq"],
    )
