"""The figures of a mode: name, words, unit, and how each follows from the mode's series.

One list. A mode's attributes, a curve's methods and the columns of every table take name,
words and unit from it, and compute by it. To add a figure: an entry here, an attribute
``name: float = declared("name")`` in `modesolve.mode.Mode`, a method in
`modesolve.curve.DispersionCurve`, and a column in `modesolve.tables.ModeTable` where it
should be printed.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

from materials.common.constants import (
    C_UM_PER_PS,
    DB_PER_CM_PER_IM_BETA,
    PER_UM_TO_PER_KM,
    dispersion_from_beta2,
    um_from_omega,
)
from materials.common.results import quantity

__all__ = ["FIGURES", "Derivative", "Figure", "declared", "evaluate"]

#: ``derivative(key, k)`` gives d^k/domega^k of a mode's series by its key ("beta", or an
#: integral of `modesolve.integrals.mode_series`): a mode answers from Taylor coefficients,
#: a curve from its functions.
Derivative = Callable[[str, int], Any]


@dataclass(frozen=True, slots=True)
class Figure:
    """One figure of a mode.

    Attributes
    ----------
    long_name, unit : str
        As on an axis.
    of : callable(omega, derivative)
        The figure at omega, rad/ps (float or ndarray).
    """

    long_name: str
    unit: str
    of: Callable[[Any, Derivative], Any]


def _beta(order: int) -> Callable[[Any, Derivative], Any]:
    return lambda omega, d: PER_UM_TO_PER_KM * d("beta", order)


def _integral(key: str) -> Callable[[Any, Derivative], Any]:
    return lambda omega, d: d(key, 0)


def _loss(omega: Any, d: Derivative) -> Any:
    """10 log10(e) dB times 2 Im(beta) times 1e4 um a cm."""
    return 0.5 * DB_PER_CM_PER_IM_BETA * d("attenuation_per_um", 0)


def _dispersion(omega: Any, d: Derivative) -> Any:
    return dispersion_from_beta2(PER_UM_TO_PER_KM * d("beta", 2), um_from_omega(omega))


FIGURES: dict[str, Figure] = {
    "n_eff": Figure("effective index", "1", lambda omega, d: C_UM_PER_PS * d("beta", 0) / omega),
    "n_group": Figure("group index", "1", lambda omega, d: C_UM_PER_PS * d("beta", 1)),
    "beta2_ps2_per_km": Figure("group-velocity dispersion", "ps2/km", _beta(2)),
    "beta3_ps3_per_km": Figure("third-order dispersion", "ps3/km", _beta(3)),
    "beta4_ps4_per_km": Figure("fourth-order dispersion", "ps4/km", _beta(4)),
    "dispersion_ps_per_nm_km": Figure("dispersion D", "ps/(nm km)", _dispersion),
    "effective_area_um2": Figure("effective area", "um2", _integral("effective_area_um2")),
    "intensity_area_um2": Figure("intensity-form area", "um2", _integral("intensity_area_um2")),
    "power_area_um2": Figure("power-form area", "um2", _integral("power_area_um2")),
    "gamma_per_w_m": Figure("nonlinear coefficient", "1/(W m)", _integral("gamma_per_w_m")),
    "loss_db_per_cm": Figure("loss", "dB/cm", _loss),
    "te_fraction": Figure("TE fraction", "1", _integral("te_fraction")),
    "core_power_fraction": Figure("power in the core", "1", _integral("core_power_fraction")),
}


def declared(name: str, dims: Sequence[str] = ()) -> Any:
    """Dataclass field of a figure, with its words and unit."""
    figure = FIGURES[name]
    return quantity(figure.long_name, figure.unit, dims)


def evaluate(omega: Any, derivative: Derivative) -> dict[str, Any]:
    """Every figure at omega."""
    return {name: figure.of(omega, derivative) for name, figure in FIGURES.items()}
