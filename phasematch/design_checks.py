"""Checks on a design that concern more than one key, or a material's data.

They run on whichever values passed on their own, so that one wrong key does not hide the
next problem. Each yields a line ``table.key = value: what is allowed``.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Mapping
from typing import Any

import materials
from materials.common.errors import InputError
from materials.medium import Medium
from modesolve import CrossSection

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
        _slab_below_height,
        _walls_meet,
        _band_order,
        _media_ranges,
        _core_above_cladding,
        _wavelengths_in_band,
    )
    problems = [line for check in checks for line in check(values)]
    return problems or list(_refused_section(values))


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
            yield f'{path} = "{key}": {exc}; "idlermap materials list" shows all'


def _slab_below_height(values: Values) -> Iterator[str]:
    section = values.get("cross_section", {})
    slab, height = section.get("slab_um"), section.get("height_um")
    if slab is not None and height is not None and slab >= height:
        yield (
            f"cross_section.slab_um = {slab:g}: must be below height_um = {height:g} um, "
            "the total height of the core film"
        )


def _walls_meet(values: Values) -> Iterator[str]:
    """A sloped core must keep some width at its top."""
    section = values.get("cross_section", {})
    names = ("width_um", "height_um", "slab_um", "sidewall_deg", "width_at")
    if any(name not in section for name in names):
        return
    width, height, slab, angle, at = (section[name] for name in names)
    top = width - 2 * (1 - at) * (height - slab) / math.tan(math.radians(angle))
    if top <= 0 < height - slab:
        yield (
            f"cross_section.sidewall_deg = {angle:g}: the walls meet below the top of a core "
            f"{width:g} um wide and {height - slab:g} um deep in its etch; must be nearer to 90"
        )


def _band_order(values: Values) -> Iterator[str]:
    band = values.get("band", {})
    start, end = band.get("from_um"), band.get("to_um")
    if start is not None and end is not None and start >= end:
        yield f"band.from_um = {start:g}: must be below to_um = {end:g} um"


def _media_ranges(values: Values) -> Iterator[str]:
    """Every medium must be known over the whole band, unless extrapolation is asked for."""
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
    """Whatever else the cross-section itself refuses, once all else is in order."""
    section = values.get("cross_section", {})
    if not {"core", "cladding", "substrate", "width_um", "height_um"} <= set(section):
        return
    try:
        CrossSection(**section).layout()
    except InputError as exc:
        yield f"cross_section: {exc}"
