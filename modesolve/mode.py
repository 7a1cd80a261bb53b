"""Modes of a cross-section at one wavelength: ``solve_modes`` and its result."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from materials.common import series
from materials.common.constants import (
    C_UM_PER_PS,
    DB_PER_CM_PER_IM_BETA,
    PER_UM_TO_PER_KM,
    dispersion_from_beta2,
    omega_from_um,
    um_from_omega,
)
from materials.common.errors import NoGuidedMode, NotConverged, OutOfRange
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
from modesolve.refine import LADDER, Resolved, SolveReport, refine
from modesolve.seeds import cutoff_index, find_seeds, near_cutoff

__all__ = ["Mode", "ModeScan", "label_modes", "resolve_modes", "solve_modes"]

#: Wavelengths that make sense as micrometres.
SHORTEST_UM, LONGEST_UM = 0.1, 100.0

#: Modes whose coarse index lies within this of the last one wanted are resolved too,
#: since the coarse grid may have put them in the wrong order.
ORDER_SLACK = 0.02


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
    n_eff: float = quantity("effective index", "1")
    n_group: float = quantity("group index", "1")
    beta2_ps2_per_km: float = quantity("group-velocity dispersion", "ps2/km")
    beta3_ps3_per_km: float = quantity("third-order dispersion", "ps3/km")
    beta4_ps4_per_km: float = quantity("fourth-order dispersion", "ps4/km")
    dispersion_ps_per_nm_km: float = quantity("dispersion D", "ps/(nm km)")
    te_fraction: float = quantity("TE fraction", "1")
    core_power_fraction: float = quantity("power in the core", "1")
    effective_area_um2: float = quantity("effective area", "um2")
    intensity_area_um2: float = quantity("intensity-form area", "um2")
    power_area_um2: float = quantity("power-form area", "um2")
    gamma_per_w_m: float = quantity("nonlinear coefficient", "1/(W m)")
    loss_db_per_cm: float = quantity("loss", "dB/cm")
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

    def fields(self) -> FieldMap:
        """Electric field over the whole section, on the cell centres of the finest grid."""
        return self.field_map


@dataclass(frozen=True, slots=True, eq=False)
class ModeScan:
    """Resolved modes of a layout in falling index, and why there are no more."""

    modes: tuple[Resolved, ...]
    notes: tuple[str, ...]


def resolve_modes(
    layout: Layout, omega: float, count: int, ladder: tuple[int, ...] = LADDER
) -> ModeScan:
    """The ``count`` highest guided modes of a layout.

    Candidates of a coarse grid are climbed one by one; one that turns out not to be
    guided is dropped with a note.
    """
    cutoff = cutoff_index(layout, omega)
    seeds = find_seeds(layout, omega, count, cutoff)
    modes: list[Resolved] = []
    notes: list[str] = []
    for seed in seeds:
        if len(modes) >= count and seed.n_eff < _last(modes, count) - ORDER_SLACK:
            break
        try:
            modes.append(refine(layout, omega, seed, ladder))
        except NoGuidedMode as exc:
            notes.append(str(exc))
        except NotConverged as exc:
            if not near_cutoff(layout, omega, seed.n_eff, cutoff):
                raise
            notes.append(f"a candidate near index {seed.n_eff:.4f} is a mode of the box: {exc}")
    modes.sort(key=lambda r: -float(np.real(r.values["beta"][0])))
    if len(modes) < count:
        notes.insert(
            0,
            f"{len(modes)} guided mode(s) where {count} were asked for: no other has an index "
            f"above the cut-off {cutoff:.6f}",
        )
        return ModeScan(tuple(modes), tuple(notes))
    return ModeScan(tuple(modes[:count]), ())


def _last(modes: Sequence[Resolved], count: int) -> float:
    """Index of the last of the ``count`` best modes so far."""
    return sorted((m.seed.n_eff for m in modes), reverse=True)[count - 1]


def label_modes(te_fractions: Sequence[float]) -> list[str]:
    """TE0, TM0, TE1 ... for modes in falling index; TE where te_fraction >= 0.5."""
    counts = {"TE": 0, "TM": 0}
    labels = []
    for share in te_fractions:
        kind = "TE" if share >= 0.5 else "TM"
        labels.append(f"{kind}{counts[kind]}")
        counts[kind] += 1
    return labels


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
    if isinstance(count, bool) or int(count) != count or not 1 <= count <= 200:
        raise OutOfRange(f"count = {count}: allowed 1 to 200 modes")
    omega = omega_from_um(wavelength_um)
    layout = section.layout()
    check_core(section, layout, omega)
    scan = resolve_modes(layout, omega, int(count), ladder)
    if not scan.modes:
        raise NoGuidedMode(
            f"no guided mode at {wavelength_um:g} um: {'; '.join(scan.notes[1:]) or scan.notes[0]}"
            "; enlarge the core or shorten the wavelength"
        )
    labels = label_modes([float(r.values["te_fraction"][0]) for r in scan.modes])
    return tuple(
        mode_from(section, layout, resolved, label, scan.notes)
        for resolved, label in zip(scan.modes, labels, strict=True)
    )


def checked_wavelength(wavelength_um: float, name: str = "wavelength_um") -> float:
    """A wavelength as a float that makes sense in um."""
    value = float(wavelength_um)
    if not (math.isfinite(value) and SHORTEST_UM <= value <= LONGEST_UM):
        raise OutOfRange(
            f"{name} = {wavelength_um} um: allowed {SHORTEST_UM:g} to {LONGEST_UM:g} um; "
            "check the unit"
        )
    return value


def check_core(section: CrossSection, layout: Layout, omega: float) -> None:
    """Refuse a section in which no film has a higher index than what surrounds it."""
    n = layout.indices(omega)
    around = max(section.cladding, section.substrate, key=lambda m: n[_position(section, m)])
    outside = n[_position(section, around)]
    if n.max() <= outside:
        raise NoGuidedMode(
            f"core {section.core.key} has index {n[layout.core]:.6f} at "
            f"{um_from_omega(omega):g} um, not above {around.key} with {outside:.6f}: "
            "nothing is guided; choose a core of higher index"
        )


def _position(section: CrossSection, medium: Any) -> int:
    return next(i for i, m in enumerate(section.media) if m is medium)


def mode_from(
    section: CrossSection, layout: Layout, resolved: Resolved, label: str, notes: tuple[str, ...]
) -> Mode:
    """The public result of a resolved mode."""
    wavelength = um_from_omega(resolved.omega)
    names = list(_headline(resolved.omega, resolved.values))

    def headline(values: dict[str, np.ndarray]) -> np.ndarray:
        return np.array(list(_headline(resolved.omega, values).values()))

    def weights(values: dict[str, np.ndarray]) -> np.ndarray:
        return np.array([values[f"weight_{i}"][0] for i in range(len(layout.media))])

    value = dict(zip(names, headline(resolved.values).tolist(), strict=True))
    bars = dict(zip(names, resolved.bar(headline).tolist(), strict=True))
    group = np.array([m.group_index(wavelength) for m in layout.media])
    return Mode(
        label=label,
        wavelength_um=wavelength,
        **value,
        n_group_from_energy=float(group @ weights(resolved.values)),
        medium=frozen_array([m.key for m in layout.media]),
        index_weight=frozen_array(weights(resolved.values)),
        beta_series=frozen_array(resolved.values["beta"]),
        section=section,
        field_map=field_map(layout, *resolved.finest, resolved.seed.boundary),
        report=resolved.report,
        error=ErrorBars(
            bars,
            wavelength_um=0.0,
            index_weight=resolved.bar(weights),
            n_group_from_energy=float(resolved.bar(lambda values: group @ weights(values))),
        ),
        notes=(*notes, *section_notes(layout)),
        provenance=make_provenance(
            [m.key for m in layout.media],
            f"ladder {':'.join(map(str, resolved.report.ladder))}, "
            f"{resolved.report.unknowns} unknowns",
            seconds=resolved.report.seconds,
        ),
    )


def _headline(omega: float, values: dict[str, np.ndarray]) -> dict[str, float]:
    """Trade quantities at the centre of the series."""
    d = series.derivatives(np.real(values["beta"]))
    beta2 = PER_UM_TO_PER_KM * d[2]
    return {
        "n_eff": C_UM_PER_PS * d[0] / omega,
        "n_group": C_UM_PER_PS * d[1],
        "beta2_ps2_per_km": beta2,
        "beta3_ps3_per_km": PER_UM_TO_PER_KM * d[3],
        "beta4_ps4_per_km": PER_UM_TO_PER_KM * d[4],
        "dispersion_ps_per_nm_km": dispersion_from_beta2(beta2, um_from_omega(omega)),
        "loss_db_per_cm": DB_PER_CM_PER_IM_BETA * float(np.imag(values["beta"][0])),
        **{key: float(values[key][0]) for key in PLAIN},
    }


#: Quantities that are taken over as they are.
PLAIN = (
    "te_fraction",
    "core_power_fraction",
    "effective_area_um2",
    "intensity_area_um2",
    "power_area_um2",
    "gamma_per_w_m",
)


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
