"""What bending changes when a curve was solved at another radius than the ring's.

References
----------
Second order of the wave equation in polar coordinates about the core's centre radius; the
first order vanishes by symmetry. Derived here and held against numerical bent slabs.
"""

from __future__ import annotations

import math

import numpy as np

from materials.common.constants import TWO_PI, middle_um
from modesolve.cross_section import CrossSection
from phasematch.curve_protocol import Curve

#: <x^2> of a cos^2 profile over its width squared.
_SPREAD = 1.0 / 12.0 - 1.0 / (2.0 * math.pi**2)


def bend_shift(
    n_eff: float, wavelength_um: float, width_um: float, cladding_index: float, radius_um: float
) -> float:
    """Estimated n_eff(bent at R) - n_eff(straight), beta taken at the core's centre.

    Parameters
    ----------
    n_eff, wavelength_um : float
        Of the straight mode, fundamental across the width.
    width_um, cladding_index : float
    radius_um : float

    Returns
    -------
    float
        n_eff (2 beta^2 s^4 - 3 s^2/2)/R^2, s the rms half-width of the intensity: that of a
        cos^2 profile as wide as the core and one decay length on either side. Right to
        about a quarter for slabs from 1.85 to 3.48 in 1.444.
    """
    k0 = TWO_PI / wavelength_um
    decay = k0 * math.sqrt(max(n_eff**2 - cladding_index**2, 1e-12))
    spread = _SPREAD * (width_um + 2.0 / decay) ** 2
    return n_eff * (2.0 * (n_eff * k0) ** 2 * spread**2 - 1.5 * spread) / radius_um**2


def bend_note(curve: Curve, radius_um: float) -> tuple[str, ...]:
    """A note with the estimated shift, or none when the curve is that of the ring's radius."""
    solved = curve.bend_radius_um
    if solved is not None and math.isclose(solved, radius_um, rel_tol=1e-9):
        return ()
    what = "a straight guide" if solved is None else f"a bend of {solved:g} um"
    start = f"the curve is that of {what}, the ring bends to {radius_um:g} um: "
    section = curve.section
    if section is None or curve.mode.lstrip("TEM") != "0":
        why = "its core width is not known" if section is None else f"{curve.mode} has nodes"
        return (start + f"the shift goes as 1/R^2 and is not estimated here ({why})",)
    short, long = curve.band_um
    at = middle_um(short, long)
    shift = _difference(curve, section, at, solved, radius_um)
    return (
        start + f"n_eff would shift by about {shift:+.1g} at {at:.4g} um (second order in 1/R, "
        "good to about a quarter; the first order vanishes by symmetry), and the misalignments "
        "with it: solve at the ring's radius where it matters",
    )


def _difference(
    curve: Curve, section: CrossSection, at: float, solved: float | None, radius: float
) -> float:
    n_eff, cladding = float(curve.n_eff(at)), float(np.real(section.cladding.index(at)))
    there = bend_shift(n_eff, at, section.width_um, cladding, radius)
    here = 0.0 if solved is None else bend_shift(n_eff, at, section.width_um, cladding, solved)
    return there - here
