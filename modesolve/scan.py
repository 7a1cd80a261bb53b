"""The guided modes of a layout at one frequency: searched, resolved, labelled."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from materials.common import inputs
from materials.common.constants import um_from_omega
from materials.common.errors import NoGuidedMode, NotConverged, OutOfRange, UnknownName
from modesolve.layout import Layout
from modesolve.refine import LADDER, Resolved, refine
from modesolve.seeds import cutoff_index, find_seeds, near_cutoff

__all__ = [
    "LABEL",
    "ModeScan",
    "check_core",
    "checked_wavelength",
    "find_labelled",
    "label_modes",
    "resolve_modes",
]

#: Wavelengths that make sense as micrometres.
SHORTEST_UM, LONGEST_UM = 0.1, 100.0

#: Modes whose coarse index lies within this of the last one wanted are resolved too,
#: since the coarse grid may have put them in the wrong order.
ORDER_SLACK = 0.02


#: Most modes searched or listed.
MOST_MODES = 40

#: A label: polarisation and number.
LABEL = re.compile(r"(TE|TM)(\d{1,2})")


@dataclass(frozen=True, slots=True, eq=False)
class ModeScan:
    """Resolved modes of a layout in falling index, and why there are no more."""

    modes: tuple[Resolved, ...]
    notes: tuple[str, ...]

    @property
    def labels(self) -> list[str]:
        """TE0, TM0, TE1 ... of the modes."""
        return label_modes([float(r.values["te_fraction"][0]) for r in self.modes])


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


def checked_wavelength(wavelength_um: float, name: str = "wavelength_um") -> float:
    """A wavelength as a float that makes sense in um."""
    value = inputs.number(name, wavelength_um, "um")
    if not SHORTEST_UM <= value <= LONGEST_UM:
        raise OutOfRange(
            f"{name} = {value:g} um: allowed {SHORTEST_UM:g} to {LONGEST_UM:g} um; check the unit"
        )
    return value


def check_core(layout: Layout, omega: float) -> None:
    """Refuse a section in which no film has a higher index than what surrounds it.

    Raises
    ------
    NoGuidedMode
    """
    n = layout.indices(omega)
    stack = layout.fill[0]
    around = max(stack[0], stack[-1], key=lambda i: n[i])
    if n.max() <= n[around]:
        raise NoGuidedMode(
            f"core {layout.media[layout.core].key} has index {n[layout.core]:.6f} at "
            f"{um_from_omega(omega):g} um, not above {layout.media[around].key} with "
            f"{n[around]:.6f}: nothing is guided; choose a core of higher index"
        )


def find_labelled(
    layout: Layout, omega: float, label: str, ladder: tuple[int, ...] = LADDER
) -> Resolved:
    """The mode that carries ``label`` at ``omega``.

    Raises
    ------
    UnknownName
        When the text is no label.
    NoGuidedMode
        When no mode there carries it.
    """
    if not isinstance(label, str) or LABEL.fullmatch(label) is None:
        raise UnknownName(f"mode = {label!r}: give a label such as TE0, TM0 or TE1")
    seeds = find_seeds(layout, omega, MOST_MODES // 4, cutoff_index(layout, omega))
    coarse = label_modes([s.te_fraction for s in seeds])
    count = coarse.index(label) + 1 if label in coarse else len(seeds) + 1
    labels: list[str] = []
    while count <= MOST_MODES:
        scan = resolve_modes(layout, omega, count, ladder)
        labels = scan.labels
        if label in labels:
            return scan.modes[labels.index(label)]
        if len(scan.modes) < count:
            break
        count += 2
    raise NoGuidedMode(
        f"no guided mode {label} at {um_from_omega(omega):g} um: guided there "
        f"{'are ' + ', '.join(labels) if labels else 'is none'}; "
        "enlarge the core, shorten the wavelength or name another mode"
    )
