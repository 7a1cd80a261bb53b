"""Checks on a design that concern more than one key, or a material's data.

They run on whichever values passed on their own, so that one wrong key does not hide the
next problem. Each yields a line ``table.key = value: what is allowed``.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Mapping
from typing import Any

import materials
from materials.common.errors import InputError
from materials.medium import Medium
from modesolve import CrossSection
from phasematch.design_tables import CrossSectionKeys

Values = Mapping[str, Mapping[str, Any]]


def joint_problems(values: Values) -> list[str]:
    """All problems between keys, in the order of the tables.

    Parameters
    ----------
    values : mapping of str to mapping
        Per table the keys whose values passed on their own (defaults included).
    """
    checks: tuple[Callable[[Values], Iterator[str]], ...] = (
        _unknown_media,
        _refused_section,
        _band_order,
        _media_ranges,
        _core_above_cladding,
        _wavelengths_in_band,
    )
    return [line for check in checks for line in check(values)]


def _named_media(values: Values) -> Iterator[tuple[str, str]]:
    """Key path and material key of every medium named in the cross-section."""
    section = values.get("cross_section", {})
    for key in ("core", "cladding", "substrate"):
        if key in section:
            yield f"cross_section.{key}", section[key]
    for key in ("layers_below", "layers_above"):
        for i, layer in enumerate(section.get(key, ()), start=1):
            yield f"cross_section.{key}[{i}][1]", layer[0]


def _loaded(key: str) -> Medium | None:
    """The medium of a key, None where there is no such medium."""
    try:
        return materials.load(key)
    except InputError:
        return None


def _unknown_media(values: Values) -> Iterator[str]:
    for path, key in _named_media(values):
        try:
            materials.load(key)
        except InputError as exc:
            yield f'{path} = "{key}": {exc}'


def _band_order(values: Values) -> Iterator[str]:
    band = values.get("band", {})
    start, end = band.get("from_um"), band.get("to_um")
    if start is not None and end is not None and start >= end:
        yield f"band.from_um = {start:g}: must be below to_um = {end:g} um"


def _media_ranges(values: Values) -> Iterator[str]:
    """Every medium must be known over the whole band, unless the design says to extrapolate."""
    band = values.get("band", {})
    if band.get("extrapolate"):
        return
    named: dict[str, list[str]] = {}
    for path, key in _named_media(values):
        named.setdefault(key, []).append(path)
    for key, paths in named.items():
        medium = _loaded(key)
        if medium is None or medium.range_um is None:
            continue
        low, high = medium.range_um
        for end in ("from_um", "to_um"):
            if end in band and not low <= band[end] <= high:
                yield (
                    f"band.{end} = {band[end]:g}: outside the range of {key}, {low:g} to {high:g} "
                    f"um ({', '.join(paths)}); keep to it, choose another material or set "
                    "band.extrapolate = true"
                )


def _core_above_cladding(values: Values) -> Iterator[str]:
    """A core guides only where its index is above that of what lies around it."""
    section, band = values.get("cross_section", {}), values.get("band", {})
    core = _loaded(section.get("core", ""))
    if core is None or any(section.get(key) for key in ("layers_below", "layers_above")):
        return  # a flat film may guide in the core's place; the solver finds out
    wavelengths = [band[end] for end in ("from_um", "to_um") if end in band] or [1.55]
    for name in ("cladding", "substrate"):
        outer = _loaded(section.get(name, ""))
        if outer is None:
            continue
        for wavelength in wavelengths:
            if not (_covers(core, wavelength) and _covers(outer, wavelength)):
                continue
            inner_index, outer_index = core.index(wavelength), outer.index(wavelength)
            if inner_index <= outer_index:
                yield (
                    f'cross_section.core = "{core.key}": its index {inner_index:.4f} at '
                    f"{wavelength:g} um must be above {outer_index:.4f}, that of the {name} "
                    f"{outer.key}; exchange them or choose other films"
                )
                break


def _covers(medium: Medium, wavelength_um: float) -> bool:
    low, high = medium.range_um or (0.0, float("inf"))
    return bool(low <= wavelength_um <= high)


def _wavelengths_in_band(values: Values) -> Iterator[str]:
    """Pumps, map axes and the reference wavelength lie inside the band."""
    band = values.get("band", {})
    start, end = band.get("from_um"), band.get("to_um")
    if start is None or end is None or start >= end:
        return
    single = (("mode", "wavelength_um"), ("channel", "pump_um"), ("ring", "pump_um"))
    for table, key in single:
        value = values.get(table, {}).get(key)
        if value is not None and not start <= value <= end:
            yield f"{table}.{key} = {value:g}: must be inside the band, {start:g} to {end:g} um"
    double = (("channel", "map_pump_um"), ("channel", "map_signal_um"), ("ring", "map_pump_um"))
    for table, key in double:
        value = values.get(table, {}).get(key)
        if value is not None and not start <= value[0] < value[1] <= end:
            yield (
                f"{table}.{key} = [{value[0]:g}, {value[1]:g}]: must rise and lie inside the "
                f"band, {start:g} to {end:g} um"
            )


def _refused_section(values: Values) -> Iterator[str]:
    """Whatever the cross-section itself refuses: its sizes, its walls, its temperature.

    It names one problem at a time, so it is made with each key alone, then, when none of
    them is wrong, with all. Keys that have a problem of their own are stood in for.
    """
    section = values.get("cross_section", {})
    unknown = {path for path, key in _named_media(values) if _loaded(key) is None}
    wrong = {re.split(r"[.\[]", path)[1] for path in unknown}
    base = {k: section[k] if k in section and k not in wrong else v for k, v in _STAND_INS.items()}
    keys = {
        k: v
        for k, v in section.items()
        if k not in wrong | set(_STAND_INS) and _NEEDS.get(k, set()) <= set(section)
    }
    alone = [_refusal({**base, k: v}) for k, v in keys.items()]
    found = [line for line in alone if line] or [_refusal({**base, **keys})]
    yield from (line for line in dict.fromkeys(found) if line)


#: What stands in for keys that are missing or wrong.
_STAND_INS = {
    "core": "vacuum",
    "cladding": "vacuum",
    "substrate": "vacuum",
    "width_um": 1.0,
    "height_um": 1.0,
}

#: Sizes without which a key cannot be judged.
_NEEDS = {"slab_um": {"height_um"}, "sidewall_deg": {"width_um", "height_um"}}


def _refusal(section: Mapping[str, Any]) -> str:
    """Why a cross-section is refused, "" when it is not."""
    try:
        CrossSection(**section).layout()
    except InputError as exc:
        line = str(exc)
        own = line.partition(" ")[0] in CrossSectionKeys.model_fields
        return f"cross_section.{line}" if own else f"cross_section: {line}"
    return ""
