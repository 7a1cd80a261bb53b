"""Guided modes of a waveguide cross-section, their dispersion and their error bars.

The rooms are in the order of the work::

    cross_section  what a designer states
    layout         the same as axes of walls and media: what is solved
    maps           coordinate maps: graded axes, sloped walls, box
    grid           the logical grid and its metric
    operators      incidence and mass matrices
    eigen          ordering, factorisation, nearest modes, left vectors
    jets           frequency series of a mode
    integrals      areas, gamma and weights as frequency series
    seeds          candidates, cut-off, box, recognising a mode
    refine         the ladder of grids and the error bar
    scan           the guided modes of a layout, labelled
    quantities     the figures of a mode: names, units, how each follows
    mode           solve_modes and its result (fields: its field map)
    band           interpolation over frequency
    curve          a dispersion curve as a result
    dispersion     solving one over a band
    tables         modes, curves, beta_k and tapers as tables

Examples
--------
>>> import modesolve
>>> section = modesolve.CrossSection(core="Si3N4-Luke2015", cladding="SiO2-Malitson1965",
...     substrate="SiO2-Malitson1965", width_um=1.6, height_um=0.8)
>>> curve = modesolve.dispersion(section, 1.4, 1.7, mode="TE0")
>>> print(f"{curve.beta2_ps2_per_km(1.55):.2f} ps2/km")
-137.84 ps2/km
"""

import modesolve.guard  # noqa: F401 - first: it looks for a hidden package
from modesolve.cross_section import CrossSection
from modesolve.curve import DispersionCurve
from modesolve.dispersion import dispersion
from modesolve.fields import FieldMap
from modesolve.mode import Mode, solve_modes

__all__ = ["CrossSection", "DispersionCurve", "FieldMap", "Mode", "dispersion", "solve_modes"]
