"""Tables to hand on: a curve against wavelength, beta_k about a pump, n_eff of a taper."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, fields, replace
from typing import Any

import numpy as np

from materials.common.alternates import error_bar
from materials.common.constants import PER_UM_TO_PER_KM, omega_from_um
from materials.common.errors import NoGuidedMode, SolverError
from materials.common.results import (
    ErrorBars,
    FullResult,
    frozen_array,
    make_provenance,
    quantity,
)
from modesolve.cross_section import CrossSection
from modesolve.curve import DispersionCurve
from modesolve.mode import Mode, find_mode
from modesolve.quantities import declared

_AXIS = ("wavelength_um",)


@dataclass(frozen=True, slots=True, eq=False)
class ModeTable(FullResult):
    """The modes of a cross-section at one wavelength, highest index first."""

    wavelength_um: float = quantity("wavelength", "um")
    mode: np.ndarray = quantity("mode", "", ("mode",))
    n_eff: np.ndarray = declared("n_eff", ("mode",))
    dispersion_ps_per_nm_km: np.ndarray = declared("dispersion_ps_per_nm_km", ("mode",))
    gamma_per_w_m: np.ndarray = declared("gamma_per_w_m", ("mode",))
    effective_area_um2: np.ndarray = declared("effective_area_um2", ("mode",))
    loss_db_per_cm: np.ndarray = declared("loss_db_per_cm", ("mode",))
    n_group: np.ndarray = declared("n_group", ("mode",))
    beta2_ps2_per_km: np.ndarray = declared("beta2_ps2_per_km", ("mode",))
    beta3_ps3_per_km: np.ndarray = declared("beta3_ps3_per_km", ("mode",))
    beta4_ps4_per_km: np.ndarray = declared("beta4_ps4_per_km", ("mode",))
    te_fraction: np.ndarray = declared("te_fraction", ("mode",))


def mode_table(modes: Sequence[Mode]) -> ModeTable:
    """The numbers of several modes of one cross-section side by side."""
    names = [f.name for f in fields(ModeTable) if f.metadata.get("dims") and f.name != "mode"]
    return ModeTable(
        wavelength_um=modes[0].wavelength_um,
        mode=frozen_array([m.label for m in modes]),
        **{name: frozen_array([getattr(m, name) for m in modes]) for name in names},
        error=ErrorBars({name: np.array([m.error[name] for m in modes]) for name in names}),
        inputs=modes[0].inputs,
        notes=tuple(dict.fromkeys(note for m in modes for note in m.notes)),
        provenance=modes[0].provenance,
    )


@dataclass(frozen=True, slots=True, eq=False)
class DispersionTable(FullResult):
    """A dispersion curve at chosen wavelengths."""

    mode: str = quantity("mode", "")
    wavelength_um: np.ndarray = quantity("wavelength", "um", _AXIS)
    n_eff: np.ndarray = declared("n_eff", _AXIS)
    n_group: np.ndarray = declared("n_group", _AXIS)
    dispersion_ps_per_nm_km: np.ndarray = declared("dispersion_ps_per_nm_km", _AXIS)
    beta2_ps2_per_km: np.ndarray = declared("beta2_ps2_per_km", _AXIS)
    beta3_ps3_per_km: np.ndarray = declared("beta3_ps3_per_km", _AXIS)
    beta4_ps4_per_km: np.ndarray = declared("beta4_ps4_per_km", _AXIS)
    effective_area_um2: np.ndarray = declared("effective_area_um2", _AXIS)
    gamma_per_w_m: np.ndarray = declared("gamma_per_w_m", _AXIS)
    zero_dispersion_um: np.ndarray = quantity(
        "zero-dispersion wavelength", "um", ("zero_crossing",)
    )


#: Figures of a curve that become columns.
CURVE_COLUMNS = (
    "n_eff",
    "n_group",
    "dispersion_ps_per_nm_km",
    "beta2_ps2_per_km",
    "beta3_ps3_per_km",
    "beta4_ps4_per_km",
    "effective_area_um2",
    "gamma_per_w_m",
)


def dispersion_table(
    curve: DispersionCurve, wavelength_um: Any, inputs: Mapping[str, Any] | None = None
) -> DispersionTable:
    """Evaluate a curve with its error bars.

    Parameters
    ----------
    curve : DispersionCurve
    wavelength_um : array_like, shape (n,), um
        Inside the curve's band.
    inputs : mapping, optional
        What the curve was made from, for the header.
    """
    w = frozen_array(wavelength_um, float)
    values = {name: frozen_array(getattr(curve, name)(w)) for name in CURVE_COLUMNS}
    bars = {name: np.asarray(curve.error[name](w)) for name in CURVE_COLUMNS}
    zeros = frozen_array(np.atleast_1d(curve.zero_dispersion_um()))
    return DispersionTable(
        mode=curve.mode,
        wavelength_um=w,
        **values,
        zero_dispersion_um=zeros,
        error=ErrorBars(bars, zero_dispersion_um=curve.error["zero_dispersion_um"]()),
        inputs=inputs or {},
        notes=tuple(curve.notes),
        provenance=curve.provenance,
    )


@dataclass(frozen=True, slots=True, eq=False)
class BetaTable(FullResult):
    """Derivatives of beta by angular frequency about a pump."""

    mode: str = quantity("mode", "")
    pump_um: float = quantity("pump wavelength", "um")
    order: np.ndarray = quantity("order k of the derivative", "1", ("order",))
    beta: np.ndarray = quantity("beta_k = d^k beta/d omega^k", "ps^k/km", ("order",))


def beta_table(
    curve: DispersionCurve,
    pump_um: float,
    *,
    orders: int = 4,
    inputs: Mapping[str, Any] | None = None,
) -> BetaTable:
    """beta_0 to beta_orders about a pump, in ps^k/km.

    Raises
    ------
    OutOfRange
        The pump lies outside the curve's band.
    """
    curve.n_eff(pump_um)  # raises outside the band
    omega = omega_from_um(float(pump_um))

    def betas(one: Any) -> np.ndarray:
        found = [one.beta_rad_per_um(omega, derivative=k) for k in range(orders + 1)]
        return PER_UM_TO_PER_KM * np.asarray(found, dtype=float)

    return BetaTable(
        mode=curve.mode,
        pump_um=float(pump_um),
        order=frozen_array(np.arange(orders + 1)),
        beta=frozen_array(betas(curve)),
        error=ErrorBars(beta=error_bar(betas, curve, curve.alternates)),
        inputs=inputs or {},
        notes=tuple(curve.notes),
        provenance=curve.provenance,
    )


@dataclass(frozen=True, slots=True, eq=False)
class TaperTable(FullResult):
    """Effective index of one mode against core width.

    Where the mode is not guided, or could not be solved, the value is NaN and ``reason``
    says why.
    """

    mode: str = quantity("mode", "")
    wavelength_um: float = quantity("wavelength", "um")
    width_um: np.ndarray = quantity("core width", "um", ("width_um",))
    n_eff: np.ndarray = declared("n_eff", ("width_um",))
    n_group: np.ndarray = declared("n_group", ("width_um",))
    effective_area_um2: np.ndarray = declared("effective_area_um2", ("width_um",))
    reason: np.ndarray = quantity("why there is no value", "", ("width_um",))

    @property
    def failed(self) -> int:
        """Number of widths without a value."""
        return int(np.isnan(self.n_eff).sum())


def taper_table(
    section: CrossSection,
    width_um: Sequence[float],
    wavelength_um: float,
    mode: str = "TE0",
    *,
    progress: Callable[[str], None] = lambda message: None,
) -> TaperTable:
    """n_eff, n_g and area of a mode for each width of a taper.

    Parameters
    ----------
    section : CrossSection
        Everything but the width.
    width_um : sequence of float, um
    wavelength_um : float, um
    mode : str
        Label; it is counted afresh at each width, by falling index among the modes of
        the same polarisation.
    progress : callable, optional
        Told what is being done, one line at a time.

    Raises
    ------
    OutOfRange
        A width outside 0.005 to 100 um, or a wavelength that makes no sense.
    """
    widths = frozen_array(width_um, float)
    sections = [replace(section, width_um=float(w)) for w in widths]
    names = ("n_eff", "n_group", "effective_area_um2")
    values = np.full((3, widths.size), np.nan)
    bars = np.full((3, widths.size), np.nan)
    reasons = np.full(widths.size, "", dtype=object)
    notes: dict[str, None] = {}
    provenance = None
    for i, one in enumerate(sections):
        progress(f"width {i + 1} of {widths.size}: {widths[i]:g} um")
        try:
            found = find_mode(one, wavelength_um, mode)
        except (NoGuidedMode, SolverError) as exc:
            reasons[i] = str(exc)
            continue
        values[:, i] = [getattr(found, name) for name in names]
        bars[:, i] = [found.error[name] for name in names]
        notes.update(dict.fromkeys(found.notes))
        provenance = found.provenance
    if provenance is None:
        provenance = make_provenance([m.key for m in section.media])
    about = {**section.describe(), "wavelength_um": wavelength_um, "mode": mode}
    about.pop("width_um")
    return TaperTable(
        mode=mode,
        wavelength_um=float(wavelength_um),
        width_um=widths,
        **{name: frozen_array(v) for name, v in zip(names, values, strict=True)},
        reason=frozen_array(reasons),
        error=ErrorBars(dict(zip(names, bars, strict=True))),
        inputs=about,
        notes=tuple(notes),
        provenance=provenance,
    )
