"""The guided modes of a layout at one frequency: searched, resolved, labelled."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

from materials.common import inputs
from materials.common.constants import um_from_omega
from materials.common.errors import NoGuidedMode, NotConverged, OutOfRange, UnknownName
from modesolve.layout import Layout
from modesolve.refine import LADDER, ORDER, Resolved, refine
from modesolve.seeds import Seed, cutoff_index, find_seeds, near_cutoff, overlap

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


#: Two climbs with indices this near and fields this alike are one mode.
SAME_INDEX, SAME_OVERLAP = 1e-6, 0.9

#: Most modes searched or listed.
MOST_MODES = 40

#: A label: polarisation and number.
LABEL = re.compile(r"(TE|TM)(\d{1,2})")


@dataclass(frozen=True, slots=True, eq=False)
class ModeScan:
    """Resolved modes of a layout in falling index, and why there are no more.

    ``labels`` count candidates that could not be resolved as well, so that one failure
    does not rename the modes after it.
    """

    modes: tuple[Resolved, ...]
    labels: tuple[str, ...]
    notes: tuple[str, ...]


def resolve_modes(
    layout: Layout,
    omega: float,
    count: int,
    ladder: tuple[int, ...] = LADDER,
    seeds: list[Seed] | None = None,
    order: int = ORDER,
) -> ModeScan:
    """The ``count`` highest guided modes of a layout.

    ``seeds`` are the candidates where they are known already, ``order`` that of the
    frequency series.

    Candidates of a coarse grid are climbed one by one. One that turns out not to be
    guided is dropped with a note, one that does not converge is left out with a note but
    keeps its place in the numbering, and one that leads to a mode already found is dropped.
    """
    cutoff = cutoff_index(layout, omega)
    modes: list[Resolved] = []
    failed: list[Seed] = []
    notes: list[str] = []
    for seed in find_seeds(layout, omega, count, cutoff) if seeds is None else seeds:
        if len(modes) >= count and seed.n_eff < _last(modes, count) - ORDER_SLACK:
            break
        try:
            found = refine(layout, omega, seed, ladder, order)
        except NoGuidedMode as exc:
            notes.append(str(exc))
        except NotConverged as exc:
            if near_cutoff(layout, omega, seed.n_eff, cutoff):
                notes.append(f"a candidate near index {seed.n_eff:.4f} did not hold up: {exc}")
            else:
                failed.append(seed)
                notes.append(f"a mode near index {seed.n_eff:.4f} is left out: {exc}")
        else:
            if not any(_same(found, other) for other in modes):
                modes.append(found)
    return _labelled(modes, failed, notes, count, cutoff)


def _labelled(
    modes: list[Resolved], failed: list[Seed], notes: list[str], count: int, cutoff: float
) -> ModeScan:
    """Order, number and count what was found."""
    entries: list[tuple[float, float, Resolved | None]] = [
        (r.seed.n_eff, float(r.values["te_fraction"][0]), r) for r in modes
    ]
    entries += [(seed.n_eff, seed.te_fraction, None) for seed in failed]
    entries.sort(key=lambda entry: -entry[0])
    labels = label_modes([share for _, share, _ in entries])
    kept = [
        (resolved, label)
        for (_, _, resolved), label in zip(entries, labels, strict=True)
        if resolved is not None
    ][:count]
    if len(kept) < count:
        notes.insert(
            0,
            f"{len(kept)} guided mode(s) where {count} were asked for: no other was found with "
            f"an index above the cut-off {cutoff:.6f}",
        )
    elif not failed:
        notes = []
    return ModeScan(
        tuple(resolved for resolved, _ in kept), tuple(label for _, label in kept), tuple(notes)
    )


def _same(a: Resolved, b: Resolved) -> bool:
    """Whether two climbs ended at one mode."""
    gap = abs(a.seed.n_eff - b.seed.n_eff)
    alike = a.seed.boundary == b.seed.boundary and gap < SAME_INDEX
    return alike and overlap(a.seed.fingerprint, b.seed.fingerprint) > SAME_OVERLAP


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
    layout: Layout,
    omega: float,
    label: str,
    ladder: tuple[int, ...] = LADDER,
    order: int = ORDER,
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
    wanted = 2 * int(label[2:]) + 2  # TE and TM take turns, more or less
    labels: list[str] = []
    while wanted <= 2 * MOST_MODES:
        seeds = find_seeds(layout, omega, wanted, cutoff_index(layout, omega))
        coarse = label_modes([seed.te_fraction for seed in seeds])
        count = coarse.index(label) + 1 if label in coarse else len(seeds) + 1
        scan = resolve_modes(layout, omega, count, ladder, seeds, order)
        labels = list(scan.labels)
        if label in labels:
            return scan.modes[labels.index(label)]
        if len(seeds) < wanted:
            break
        wanted += 4
    raise NoGuidedMode(
        f"no guided mode {label} at {um_from_omega(omega):g} um: guided there "
        f"{'are ' + ', '.join(labels) if labels else 'is none'}; "
        "enlarge the core, shorten the wavelength or name another mode"
    )
