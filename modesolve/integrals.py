"""Integrals over a mode's fields, as frequency series.

The conjugate field of a lossless guide is (Ex, Ey, -Ez): transverse components real,
longitudinal one imaginary. It is used in this form throughout, so every integrand is an
analytic function of the coordinates and an absorbing (complex) outer region gives the same
value as the real one; with loss the figures are those of the mode and its reverse.

Each is a sum over quarter cells of products of the fields' series, so that areas,
nonlinear coefficient and mode weights have exact frequency derivatives too. Fields go
as exp(i(beta z - omega t)); h' is H times the vacuum impedance.

References
----------
S. Afshar V. and T. M. Monro, Opt. Express 17, 2298 (2009): full-vector nonlinear
coefficient. A. W. Snyder and J. D. Love, Optical Waveguide Theory (1983), chapters 11
and 18: power, and the change of index under a change of medium.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from materials.common import series
from materials.common.constants import C_UM_PER_PS, PER_UM_TO_PER_M
from modesolve.jets import Jet
from modesolve.layout import Layout
from modesolve.operators import QUARTER, Operators

__all__ = ["QuarterFields", "mode_series", "quarter_fields"]

#: m^2 in um^2.
UM2_PER_M2 = 1e12


@dataclass(frozen=True, slots=True, eq=False)
class QuarterFields:
    """Physical field series in the quarter cells, shape (order + 1, n_u, n_v, 2, 2).

    ``e_along`` is i E_z, real in a lossless guide: E_z = -i e_along. ``y_x``, ``y_y``: the
    left vector's components; transverse h' is n_eff z x y / arc.
    ``area``: physical area of each quarter cell, um^2, and ``arc`` its arc-length factor
    (no order axis).
    """

    e_x: np.ndarray
    e_y: np.ndarray
    e_along: np.ndarray
    y_x: np.ndarray
    y_y: np.ndarray
    area: np.ndarray
    arc: np.ndarray


def quarter_fields(operators: Operators, jet: Jet) -> QuarterFields:
    """Physical components of the field of a jet."""
    metric = operators.grid.metric
    g = operators.topology.nodes_to_quarters(jet.longitudinal)
    e_along = series.multiply(series.reciprocal(jet.beta), g) / metric.arc
    return QuarterFields(
        *operators.transverse(jet.right),
        e_along,
        *operators.transverse(jet.left),
        QUARTER * metric.det,
        metric.arc,
    )


def _over_cells(density: np.ndarray) -> np.ndarray:
    """Sum the four quarters of each cell."""
    return density.sum(axis=(-2, -1))


def _total(density: np.ndarray) -> np.ndarray:
    return density.sum(axis=(-4, -3, -2, -1))


def mode_series(layout: Layout, operators: Operators, jet: Jet) -> dict[str, np.ndarray]:
    """Every integral of a mode as a frequency series, shape (order + 1,) each.

    Keys
    ----
    beta : rad/um, complex where the guide has loss
    attenuation_per_um : 2 Im(beta), the power's decay
    te_fraction, core_power_fraction : 1
    intensity_area_um2 : (int |e|^2)^2 / int |e|^4
    power_area_um2 : (int Sz)^2 / int Sz^2
    effective_area_um2 : 2 pi n2_core / (lambda gamma), the core alone where nothing has an n2
    gamma_per_w_m : k0 int n^2 n2 [2 |e|^4 + |e.e|^2]/3 dA / N^2, NaN where the core has no n2
    weight_<i> : dn_eff/dn of medium i
    """
    f = quarter_fields(operators, jet)
    order = jet.beta.size - 1
    halves = 2.0 if layout.mirror else 1.0
    k0 = series.variable(jet.omega, order) / C_UM_PER_PS
    n_eff = series.divide(jet.beta, k0)
    size_x, size_y, along = (series.square(part) for part in (f.e_x, f.e_y, f.e_along))
    across = size_x + size_y
    intensity = across + along
    power_density = series.multiply(f.e_x, f.y_x) + series.multiply(f.e_y, f.y_y)
    power_density = series.multiply(n_eff, power_density) / f.arc  # h' is n_eff z x y / h
    power = _total(power_density * f.area)
    weighted = intensity * f.area * f.arc
    fourth = series.square(intensity)
    out = {"attenuation_per_um": 2.0 * np.imag(jet.beta)}
    out["te_fraction"] = series.divide(_total(size_x * f.area), _total(across * f.area))
    cells = _over_cells(power_density * f.area)
    core = operators.medium_of_cell == layout.core
    out["core_power_fraction"] = series.divide(cells[:, core].sum(axis=-1), power)
    out["intensity_area_um2"] = halves * _squared_over(
        _total(intensity * f.area), _total(fourth * f.area)
    )
    out["power_area_um2"] = halves * _squared_over(
        power, _total(series.square(power_density) * f.area)
    )
    own = _over_cells(weighted)
    for i, inside in enumerate(operators.media):
        weight = series.divide(own[:, inside.inside].sum(axis=-1), power)
        out[f"weight_{i}"] = series.multiply(series.sqrt(jet.permittivity[i]), weight)
    dot_squared = series.square(across - along)
    out.update(_nonlinear(layout, operators, jet, fourth, dot_squared, power, k0, halves))
    return {"beta": jet.beta, **{key: np.real(value) for key, value in out.items()}}


def _squared_over(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    return series.divide(series.square(a), b)


def _nonlinear(
    layout: Layout,
    operators: Operators,
    jet: Jet,
    fourth: np.ndarray,
    dot_squared: np.ndarray,
    power: np.ndarray,
    k0: np.ndarray,
    halves: float,
) -> dict[str, np.ndarray]:
    """gamma and the nonlinear area."""
    density = (2.0 * fourth + dot_squared) / 3.0
    metric = operators.grid.metric
    cells = _over_cells(density * QUARTER * metric.det * metric.arc)
    n2 = [medium.n2_m2_per_w for medium in layout.media]
    core_n2 = n2[layout.core]
    # only ratios to the core's n2 enter the area; with no n2 at all the core counts alone
    relative = [
        (v or 0.0) / core_n2 if core_n2 else float(i == layout.core) for i, v in enumerate(n2)
    ]
    total = np.zeros(k0.shape, cells.dtype)
    for share, eps, medium in zip(relative, jet.permittivity, operators.media, strict=True):
        if share:
            total = total + share * series.multiply(eps, cells[:, medium.inside].sum(axis=-1))
    inverse_area = series.divide(total, series.square(power)) / halves
    gamma = np.full(k0.shape, np.nan)
    if core_n2:
        scale = core_n2 * UM2_PER_M2 * PER_UM_TO_PER_M
        gamma = scale * series.multiply(k0, inverse_area)
    return {"effective_area_um2": series.reciprocal(inverse_area), "gamma_per_w_m": gamma}
