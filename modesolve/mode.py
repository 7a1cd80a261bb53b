"""Modes of a cross-section at one wavelength: ``solve_modes`` and its result."""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace
from functools import partial
from typing import Any

import numpy as np

from materials.common import inputs
from materials.common.constants import omega_from_um, um_from_omega
from materials.common.errors import NoGuidedMode
from materials.common.results import (
    ErrorBars,
    Provenance,
    Result,
    frozen_array,
    make_provenance,
    quantity,
)
from modesolve.cross_section import CrossSection
from modesolve.fields import FieldMap, field_map
from modesolve.layout import Layout
from modesolve.quantities import FIGURES, declared, evaluate
from modesolve.refine import LADDER, Resolved, SolveReport
from modesolve.scan import (
    MOST_MODES,
    check_core,
    checked_wavelength,
    find_labelled,
    resolve_modes,
)

__all__ = ["Mode", "find_mode", "mode_from", "section_notes", "solve_modes"]


#: A TE fraction this near to a half makes a mode hybrid.
HYBRID = 0.05


@dataclass(frozen=True, slots=True, eq=False, repr=False, kw_only=True)
class Mode(Result):
    """A guided mode with its dispersion, areas and error bars.

    Fields go as exp(i(beta z - omega t)). ``error`` has an absolute bar, in the same
    unit, for every numeric attribute: the ladder of grids, the truncation of the box and
    rounding, and for a medium fitted to a measured table one standard deviation of the
    fit.
    """

    label: str = quantity("mode", "")
    wavelength_um: float = quantity("wavelength", "um")
    n_eff: float = declared("n_eff")
    n_group: float = declared("n_group")
    beta2_ps2_per_km: float = declared("beta2_ps2_per_km")
    beta3_ps3_per_km: float = declared("beta3_ps3_per_km")
    beta4_ps4_per_km: float = declared("beta4_ps4_per_km")
    dispersion_ps_per_nm_km: float = declared("dispersion_ps_per_nm_km")
    te_fraction: float = declared("te_fraction")
    core_power_fraction: float = declared("core_power_fraction")
    effective_area_um2: float = declared("effective_area_um2")
    intensity_area_um2: float = declared("intensity_area_um2")
    power_area_um2: float = declared("power_area_um2")
    gamma_per_w_m: float = declared("gamma_per_w_m")
    loss_db_per_cm: float = declared("loss_db_per_cm")
    n_group_from_energy: float = quantity("group index from the energy integrals", "1")
    medium: np.ndarray = quantity("medium", "", ("medium",))
    index_weight: np.ndarray = quantity("dn_eff/dn of the medium", "1", ("medium",))
    beta_series: np.ndarray = field(repr=False)
    section: CrossSection = field(repr=False)
    field_map: FieldMap = field(repr=False)
    report: SolveReport
    error: ErrorBars
    notes: tuple[str, ...]
    provenance: Provenance

    @property
    def inputs(self) -> dict[str, Any]:
        """What was asked for, as plain values."""
        return {**self.section.describe(), "wavelength_um": self.wavelength_um}

    @property
    def loss_db_per_90deg(self) -> float:
        """Loss of a quarter turn, dB; NaN in a straight guide."""
        radius = self.section.bend_radius_um
        if radius is None:
            return math.nan
        return self.loss_db_per_cm * abs(radius) * 1e-4 * 0.5 * math.pi

    def fields(self) -> FieldMap:
        """Electric field over the whole section, on the cell centres of the finest grid."""
        about: dict[str, Any] = {
            "inputs": self.inputs,
            "notes": self.notes,
            "provenance": self.provenance,
        }
        return replace(self.field_map, **about)


def solve_modes(
    section: CrossSection,
    wavelength_um: float,
    count: int = 4,
    *,
    ladder: tuple[int, ...] = LADDER,
) -> tuple[Mode, ...]:
    """Guided modes of a cross-section, highest index first.

    Parameters
    ----------
    section : CrossSection
    wavelength_um : float, um
        Vacuum wavelength.
    count : int
        Most modes wanted. Fewer is no error: a note on the modes says why.
    ladder : tuple of int
        Refinements of the ladder of grids, rising, at least four.

    Returns
    -------
    tuple of Mode

    Raises
    ------
    NoGuidedMode
        When nothing is guided.
    OutsideMaterialRange
        When a medium's table does not reach the wavelength.
    NotConverged
        When a ladder does not close.

    Examples
    --------
    >>> section = CrossSection(core="Si3N4-Luke2015", cladding="SiO2-Malitson1965",
    ...                        substrate="SiO2-Malitson1965", width_um=1.6, height_um=0.8)
    >>> mode = solve_modes(section, wavelength_um=1.55, count=1)[0]
    >>> mode.label, round(mode.n_eff, 6)
    ('TE0', 1.834544)
    """
    wavelength_um = checked_wavelength(wavelength_um)
    count = inputs.whole("count", count, most=MOST_MODES)
    omega = omega_from_um(wavelength_um)
    layout = section.layout()
    check_core(layout, omega)
    scan = resolve_modes(layout, omega, count, ladder)
    if not scan.modes:
        raise NoGuidedMode(
            f"no guided mode at {wavelength_um:g} um: {'; '.join(scan.notes[1:]) or scan.notes[0]}"
            "; enlarge the core or shorten the wavelength"
        )
    return tuple(
        mode_from(section, layout, resolved, label, scan.notes)
        for resolved, label in zip(scan.modes, scan.labels, strict=True)
    )


def find_mode(
    section: CrossSection,
    wavelength_um: float,
    label: str,
    *,
    ladder: tuple[int, ...] = LADDER,
) -> Mode:
    """The mode of a label, looking at as few modes as will do.

    Raises
    ------
    UnknownName
        When the text is no label.
    NoGuidedMode
        When there is no such mode; the message lists those that there are.
    """
    omega = omega_from_um(checked_wavelength(wavelength_um))
    layout = section.layout()
    check_core(layout, omega)
    resolved = find_labelled(layout, omega, label, ladder)
    return mode_from(section, layout, resolved, label, ())


def mode_from(
    section: CrossSection, layout: Layout, resolved: Resolved, label: str, notes: tuple[str, ...]
) -> Mode:
    """The public result of a resolved mode."""
    wavelength = um_from_omega(resolved.omega)
    group = np.array([medium.group_index(wavelength) for medium in layout.media])

    def figures(values: dict[str, np.ndarray]) -> np.ndarray:
        found = evaluate(resolved.omega, partial(_derivative, values)).values()
        return np.array([float(np.real(v)) for v in found])

    def weights(values: dict[str, np.ndarray]) -> np.ndarray:
        return np.array([values[f"weight_{i}"][0] for i in range(len(layout.media))])

    return Mode(
        label=label,
        wavelength_um=wavelength,
        **dict(zip(FIGURES, figures(resolved.values).tolist(), strict=True)),
        n_group_from_energy=float(group @ weights(resolved.values)),
        medium=frozen_array([medium.key for medium in layout.media]),
        index_weight=frozen_array(weights(resolved.values)),
        beta_series=frozen_array(resolved.values["beta"]),
        section=section,
        field_map=field_map(layout, *resolved.finest, resolved.seed.boundary),
        report=resolved.report,
        error=ErrorBars(
            dict(zip(FIGURES, resolved.bar(figures).tolist(), strict=True)),
            wavelength_um=0.0,
            index_weight=resolved.bar(weights),
            n_group_from_energy=resolved.bar(lambda values: group @ weights(values)),
        ),
        notes=(*notes, *_hybrid(float(resolved.values["te_fraction"][0])), *section_notes(layout)),
        provenance=make_provenance(
            [medium.key for medium in layout.media],
            f"ladder {':'.join(map(str, resolved.report.ladder))}, "
            f"{resolved.report.unknowns} unknowns",
            seconds=resolved.report.seconds,
        ),
    )


def _derivative(values: dict[str, np.ndarray], key: str, order: int) -> float:
    """d^k/domega^k at the centre of a series."""
    return math.factorial(order) * values[key][order]


def _hybrid(te_fraction: float) -> tuple[str, ...]:
    """A word where TE and TM mean little."""
    if abs(te_fraction - 0.5) > HYBRID:
        return ()
    return (f"hybrid mode, TE fraction {te_fraction:.3f}: its label hangs on a small difference",)


def section_notes(layout: Layout) -> tuple[str, ...]:
    """What the media make one say: caveats of their tables and missing nonlinearities."""
    notes = [f"{m.key}: {caveat}" for m in layout.media for caveat in m.caveats]
    without = [m.key for m in layout.media if m.n2_m2_per_w is None]
    core = layout.media[layout.core]
    if core.n2_m2_per_w is None:
        notes.append(f"gamma is NaN: {core.key} has no n2; the effective area is the core's alone")
    elif without:
        notes.append(f"no n2 for {', '.join(without)}: counted as zero in gamma and area")
    fitted = [m.key for m in layout.media if m.fit is not None]
    if fitted:
        notes.append(
            f"error bars of n_eff and dispersion include one standard deviation of the fit of "
            f"{', '.join(fitted)}; those of areas and gamma do not"
        )
    return tuple(notes)
