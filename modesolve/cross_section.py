"""The cross-section of a guide as a designer states it.

x runs across the chip, y up, y = 0 at the core's bottom face. The core film is
``height_um`` thick; beside the rib ``slab_um`` of it is left. Substrate below, cladding
beside and above; flat layers may lie between, listed from the core outwards.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, fields

import materials
from materials.common.errors import InputError, OutOfRange
from materials.medium import Medium
from modesolve.layout import Layout
from modesolve.maps import Axis, WallLine

__all__ = ["CrossSection"]

#: Allowed sizes, um.
SMALLEST_UM, LARGEST_UM = 0.005, 100.0

#: Least distance of a core from the axis of its bend, and the largest radius, um.
CLOSEST_TO_AXIS_UM, STRAIGHTEST_UM = 0.1, 1e6

#: Temperatures of a chip, degC.
COLDEST_DEGC, HOTTEST_DEGC = -273.15, 1000.0

#: Least inclination of an etched wall, degrees from the chip's plane.
FLATTEST_DEG = 60.0


@dataclass(frozen=True, slots=True)
class CrossSection:
    """A rectangular or partly etched core in a stack of films.

    Parameters
    ----------
    core, cladding, substrate : Medium or str
        Media, or catalogue keys. ``cladding`` is beside and above the core,
        ``substrate`` below it.
    width_um : float
        Width of the core at the height fraction ``width_at`` of its etched wall.
    height_um : float
        Total height of the core film.
    slab_um : float
        What is left of the core film beside the rib, 0 <= slab < height.
    sidewall_deg : float
        Angle of the etched walls, 60 to 120: 90 is vertical, less is wider at the bottom.
    width_at : float
        Height fraction of the etched wall where ``width_um`` holds: 1 its top, 0 its
        bottom.
    layers_below, layers_above : tuple of (medium, thickness_um)
        Flat films from the core outwards. Those above lie on the plane of the core's
        top face, with the cladding filling in beside the core.
    bend_radius_um : float or None
        Radius of the core's centre line, negative to bend the other way (towards
        positive x); None for a straight guide.
    temperature_degc : float or None
        Temperature of the chip; None leaves every medium at its own table's.

    Raises
    ------
    OutOfRange
        A size outside 0.005 to 100 um, a slab as thick as the core, an angle or
        fraction outside its range, NaN.
    MissingData
        A temperature with a medium that has no dn/dT.

    Examples
    --------
    >>> section = CrossSection(core="Si3N4-Luke2015", cladding="SiO2-Malitson1965",
    ...                        substrate="SiO2-Malitson1965", width_um=1.6, height_um=0.8)
    >>> section.core.key
    'Si3N4-Luke2015'
    """

    core: Medium
    cladding: Medium
    substrate: Medium
    width_um: float
    height_um: float
    slab_um: float = 0.0
    sidewall_deg: float = 90.0
    width_at: float = 1.0
    layers_below: tuple[tuple[Medium, float], ...] = ()
    layers_above: tuple[tuple[Medium, float], ...] = ()
    bend_radius_um: float | None = None
    temperature_degc: float | None = None

    def __post_init__(self) -> None:
        put = object.__setattr__
        for name in ("core", "cladding", "substrate"):
            put(self, name, _medium(getattr(self, name), name))
        for name in ("layers_below", "layers_above"):
            put(self, name, _layers(getattr(self, name), name))
        for name in ("width_um", "height_um"):
            put(self, name, _size(getattr(self, name), name))
        put(self, "slab_um", _number(self.slab_um, "slab_um", "um"))
        if not 0.0 <= self.slab_um < self.height_um:
            raise OutOfRange(
                f"slab_um = {self.slab_um:g} um: allowed 0 up to less than height_um "
                f"({self.height_um:g} um), the total height of the core film; "
                "a film without a rib guides no channel mode"
            )
        if 0.0 < self.slab_um < SMALLEST_UM or self.height_um - self.slab_um < SMALLEST_UM:
            raise OutOfRange(
                f"slab_um = {self.slab_um:g} um: slab and etch depth must each be at least "
                f"{SMALLEST_UM:g} um (or the slab exactly 0)"
            )
        self._check_shape()
        if self.temperature_degc is not None:
            put(self, "temperature_degc", _temperature(self.temperature_degc))
            _ = self.media  # a medium without dn/dT speaks now

    def _check_shape(self) -> None:
        put = object.__setattr__
        angle = _number(self.sidewall_deg, "sidewall_deg", "deg")
        if not FLATTEST_DEG <= angle <= 180.0 - FLATTEST_DEG:
            raise OutOfRange(
                f"sidewall_deg = {angle:g}: allowed {FLATTEST_DEG:g} to {180.0 - FLATTEST_DEG:g}; "
                "90 is vertical, less is wider at the bottom"
            )
        put(self, "sidewall_deg", angle)
        if not 0.0 <= _number(self.width_at, "width_at", "") <= 1.0:
            raise OutOfRange(
                f"width_at = {self.width_at:g}: allowed 0 (bottom of the etched wall) "
                "to 1 (its top)"
            )
        line = self.wall_line()
        narrowest = 2.0 * min(line.half_bottom_um, line.half_top_um)
        if narrowest < SMALLEST_UM:
            raise OutOfRange(
                f"sidewall_deg = {angle:g}: with width_um = {self.width_um:g} um at "
                f"width_at = {self.width_at:g} the core is {narrowest:.4g} um wide at its "
                f"narrow end; at least {SMALLEST_UM:g} um is needed: steepen the wall or widen "
                "the core"
            )
        if self.bend_radius_um is not None:
            put(self, "bend_radius_um", self._checked_radius())

    def _checked_radius(self) -> float:
        radius = _number(self.bend_radius_um, "bend_radius_um", "um")
        line = self.wall_line()
        widest = max(line.half_bottom_um, line.half_top_um)
        least = widest + CLOSEST_TO_AXIS_UM
        if not least <= abs(radius) <= STRAIGHTEST_UM:
            raise OutOfRange(
                f"bend_radius_um = {radius:g} um: allowed {least:g} um (the core must clear the "
                f"bend's axis by {CLOSEST_TO_AXIS_UM:g} um) to {STRAIGHTEST_UM:g} um, negative to "
                "bend the other way; leave it out for a straight guide"
            )
        return radius

    def wall_line(self) -> WallLine:
        """The etched wall: half the core's width at the wall's bottom and top."""
        depth = self.height_um - self.slab_um
        slope = depth / math.tan(math.radians(self.sidewall_deg))  # how far it leans inwards
        if self.sidewall_deg == 90.0:
            slope = 0.0
        half = 0.5 * self.width_um
        return WallLine(
            bottom_um=self.slab_um,
            top_um=self.height_um,
            half_bottom_um=half + self.width_at * slope,
            half_top_um=half - (1.0 - self.width_at) * slope,
        )

    @property
    def media(self) -> tuple[Medium, ...]:
        """Every medium in use, once each, core first, at the chip's temperature."""
        found = {id(medium): medium for medium in self._stated()}.values()
        if self.temperature_degc is None:
            return tuple(found)
        return tuple(medium.at_temperature(self.temperature_degc) for medium in found)

    def layout(self) -> Layout:
        """Axes and media for the solver.

        A straight guide is solved on half of the section, mirror plane at x = 0; a bent one
        on the whole.
        """
        stated = {id(medium): medium for medium in self._stated()}
        number = {key: i for i, key in enumerate(stated)}
        core, cladding = number[id(self.core)], number[id(self.cladding)]
        rows: list[tuple[int, int]] = [(number[id(self.substrate)],) * 2]
        walls = [0.0]
        for medium, thickness in self.layers_below:
            rows.insert(1, (number[id(medium)],) * 2)
            walls.insert(0, walls[0] - thickness)
        if self.slab_um > 0.0:
            rows.append((core, core))
            walls.append(self.slab_um)
        rows.append((core, cladding))
        walls.append(self.height_um)
        for medium, thickness in self.layers_above:
            rows.append((number[id(medium)],) * 2)
            walls.append(walls[-1] + thickness)
        rows.append((cladding, cladding))
        half = 0.5 * self.width_um
        straight = self.bend_radius_um is None
        across = Axis((0.0, half), low="mirror") if straight else Axis((-half, half))
        columns = (0, 1) if straight else (1, 0, 1)
        return Layout(
            across=across,
            up=Axis(tuple(walls)),
            media=self.media,
            fill=tuple(tuple(row[i] for row in rows) for i in columns),
            core=core,
            mirror=straight,
            bend_radius_um=self.bend_radius_um,
            etched_wall=None if self.sidewall_deg == 90.0 else self.wall_line(),
        )

    def _stated(self) -> tuple[Medium, ...]:
        layers = (*self.layers_below, *self.layers_above)
        return (self.core, self.cladding, self.substrate, *(m for m, _ in layers))

    def describe(self) -> dict[str, object]:
        """Inputs as plain values, media by key: for headers and provenance."""
        out: dict[str, object] = {}
        for f in fields(self):
            value = getattr(self, f.name)
            if isinstance(value, Medium):
                value = value.key
            elif f.name.startswith("layers"):
                value = tuple((m.key, t) for m, t in value)
            out[f.name] = value
        return out


def _medium(value: object, name: str) -> Medium:
    if isinstance(value, Medium):
        return value
    if isinstance(value, str):
        return materials.load(value)
    raise InputError(f"{name} = {value!r}: give a medium or a catalogue key")


def _layers(value: object, name: str) -> tuple[tuple[Medium, float], ...]:
    try:
        pairs = [(medium, thickness) for medium, thickness in value]  # type: ignore[attr-defined]
    except (TypeError, ValueError) as exc:
        raise InputError(
            f"{name} = {value!r}: give (medium, thickness_um) pairs, from the core outwards"
        ) from exc
    return tuple((_medium(m, name), _size(t, f"{name} thickness_um")) for m, t in pairs)


def _number(value: object, name: str, unit: str) -> float:
    try:
        number = float(value)  # type: ignore[arg-type]
    except (TypeError, ValueError) as exc:
        raise InputError(
            f"{name} = {value!r}: give a number {f'in {unit}' if unit else ''}"
        ) from exc
    if not math.isfinite(number):
        raise OutOfRange(f"{name} = {value}: give a finite number {f'in {unit}' if unit else ''}")
    return number


def _temperature(value: object) -> float:
    degc = _number(value, "temperature_degc", "degC")
    if not COLDEST_DEGC <= degc <= HOTTEST_DEGC:
        raise OutOfRange(
            f"temperature_degc = {degc:g} degC: allowed {COLDEST_DEGC:g} to {HOTTEST_DEGC:g}, "
            "where a constant dn/dT means something"
        )
    return degc


def _size(value: object, name: str) -> float:
    number = _number(value, name, "um")
    if not SMALLEST_UM <= number <= LARGEST_UM:
        raise OutOfRange(
            f"{name} = {number:g} um: allowed {SMALLEST_UM:g} to {LARGEST_UM:g} um; check the unit"
        )
    return number
