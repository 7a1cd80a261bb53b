"""The tables of a design file: every key with its meaning, unit, range and default.

Declared once here; the checks, the messages, the commented starter file and the resolved
design all follow from these declarations. Limits of the mode solver are its own constants;
what only a whole cross-section can tell is left to `modesolve.CrossSection`.
"""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, Field, Strict
from pydantic.fields import FieldInfo

from modesolve.cross_section import FLATTEST_DEG, LARGEST_UM, SMALLEST_UM, STRAIGHTEST_UM
from modesolve.scan import LABEL, LONGEST_UM, MOST_MODES, SHORTEST_UM

Number = Annotated[float, Strict()]
Whole = Annotated[int, Strict()]
Text = Annotated[str, Strict()]

_SIZE_UM = (SMALLEST_UM, LARGEST_UM)
_WAVELENGTH_UM = (SHORTEST_UM, LONGEST_UM)


def number(
    about: str,
    unit: str,
    low: float,
    high: float,
    default: Any = ...,
    *,
    above: bool = False,
    below: bool = False,
) -> Any:
    """A finite number from ``low`` to ``high``; ``above`` or ``below`` leave an end out."""
    ends = f"{'above' if above else 'from'} {low:g} {'to below' if below else 'to'} {high:g}"
    return Field(
        default,
        description=about,
        allow_inf_nan=False,
        json_schema_extra={"allowed": f"a number {ends}{' ' + unit if unit else ''}"},
        gt=low if above else None,
        ge=None if above else low,
        lt=high if below else None,
        le=None if below else high,
    )


def whole(about: str, low: int, high: int, default: Any = ...) -> Any:
    """A whole number from ``low`` to ``high``."""
    allowed = f"a whole number from {low} to {high}"
    return Field(
        default, description=about, ge=low, le=high, json_schema_extra={"allowed": allowed}
    )


def key(about: str, allowed: str, default: Any = ...) -> Any:
    """A key whose values its type, or a later check, limits; ``allowed`` says them in words."""
    return Field(default, description=about, json_schema_extra={"allowed": allowed})


_MEDIUM = 'a material key (see "idlermap materials list")'
_LAYERS = 'pairs [material key, thickness in um], from the core outwards, e.g. [["air", 0.5]]'


class Table(BaseModel):
    """Base of the tables: unknown keys are errors, values are kept as they are."""

    model_config = ConfigDict(extra="forbid", frozen=True)


Layer = tuple[Text, Annotated[float, Strict(), Field(ge=SMALLEST_UM, le=LARGEST_UM)]]


class CrossSectionKeys(Table):
    """The guide: films, sizes, walls. Argument names of `modesolve.CrossSection`."""

    core: Text = key("core film", _MEDIUM)
    cladding: Text = key("beside and above the core", _MEDIUM)
    substrate: Text = key("below the core", _MEDIUM)
    width_um: Number = number("core width", "um", *_SIZE_UM)
    height_um: Number = number("total height of the core film", "um", *_SIZE_UM)
    slab_um: Number = number(
        "film left beside the rib; 0 is etched through", "um", 0.0, LARGEST_UM, 0.0
    )
    sidewall_deg: Number = number(
        "wall angle: 90 is vertical, less is wider at the bottom",
        "degrees",
        FLATTEST_DEG,
        180.0 - FLATTEST_DEG,
        90.0,
    )
    width_at: Number = number(
        "height fraction of the wall where the width holds: 1 top, 0 bottom", "", 0.0, 1.0, 1.0
    )
    layers_below: tuple[Layer, ...] = key("flat films below the core", _LAYERS, ())
    layers_above: tuple[Layer, ...] = key("flat films above the core", _LAYERS, ())
    bend_radius_um: Number | None = number(
        "bend radius at the core's centre, negative to bend the other way; leave out for a "
        "straight guide (a [ring] is solved at its own radius)",
        "um",
        -STRAIGHTEST_UM,
        STRAIGHTEST_UM,
        None,
    )
    temperature_degc: Number | None = number(
        "temperature; leave out for each table's own", "degC", -273.15, 1000.0, None, above=True
    )


class BandKeys(Table):
    """The wavelengths that the dispersion curve spans."""

    from_um: Number = number("shortest wavelength", "um", *_WAVELENGTH_UM)
    to_um: Number = number("longest wavelength", "um", *_WAVELENGTH_UM)
    points: Whole = whole("rows of the dispersion table", 2, 100_000, 201)
    extrapolate: Annotated[bool, Strict()] = key(
        "use materials outside their measured range; every result is then marked",
        "true or false",
        False,
    )


class ModeKeys(Table):
    """Which mode everything is about, and where the list of modes is made."""

    label: Text = Field(
        "TE0",
        pattern=f"^{LABEL.pattern}$",
        description="the mode: TE or TM and its number, by falling n_eff",
        json_schema_extra={"allowed": 'a mode label such as "TE0" or "TM1"'},
    )
    wavelength_um: Number | None = number(
        "where the modes are listed and labelled; default: the pump, else the middle of the band",
        "um",
        *_WAVELENGTH_UM,
        None,
    )
    count: Whole = whole("modes listed, at most", 1, MOST_MODES, 4)


class ChannelKeys(Table):
    """A channel: four-wave mixing along a straight length."""

    length_mm: Number = number("length", "mm", 0.0, 1e6, above=True)
    loss_db_per_cm: Number = number("propagation loss", "dB/cm", 0.0, 100.0, 0.0)
    pump_um: Number = number("pump wavelength", "um", *_WAVELENGTH_UM)
    pump_w: Number = number("pump power in the guide", "W", 0.0, 1e4, above=True)
    map_pump_um: tuple[Number, Number] | None = key(
        "pump axis of the map; default: the pump and 2 % to either side",
        "two wavelengths [from, to] in um",
        None,
    )
    map_signal_um: tuple[Number, Number] | None = key(
        "signal axis of the map; default: the whole band", "two wavelengths [from, to] in um", None
    )
    map_points: Whole = whole("points along each axis of the map", 2, 2001, 201)


class RingKeys(Table):
    """A ring: which resonance pairs around a pump are aligned."""

    radius_um: Number = number("radius at the core's centre", "um", 1.0, 1e6)
    q_intrinsic: Number = number("quality factor without couplers", "", 1e2, 1e10)
    q_coupling: Number = number("quality factor of all couplers together", "", 1e2, 1e10)
    pump_um: Number = number("the pump is the resonance nearest to this", "um", *_WAVELENGTH_UM)
    pump_w: Number = number("pump power in the bus", "W", 0.0, 1e3, 0.0)
    pairs: Whole = whole("resonance pairs on either side of the pump", 1, 5000, 60)
    map_pump_um: tuple[Number, Number] | None = key(
        "pump resonances of the detuning map; default: the whole band",
        "two wavelengths [from, to] in um",
        None,
    )


class OutputKeys(Table):
    """What is written."""

    figures: Literal["png", "pdf", "svg", "none"] = key(
        "file format of the figures", '"png", "pdf", "svg" or "none"', "png"
    )
    resolution_dpi: Whole = whole("dots per inch of a png", 50, 1200, 300)


class DesignTables(Table):
    """A design file as a whole."""

    cross_section: CrossSectionKeys
    band: BandKeys
    mode: ModeKeys = ModeKeys.model_validate({})
    channel: ChannelKeys | None = None
    ring: RingKeys | None = None
    output: OutputKeys = OutputKeys.model_validate({})


#: The tables of a design file by name, in their order.
TABLES: dict[str, type[Table]] = {
    "cross_section": CrossSectionKeys,
    "band": BandKeys,
    "mode": ModeKeys,
    "channel": ChannelKeys,
    "ring": RingKeys,
    "output": OutputKeys,
}


def allowed(field: FieldInfo) -> str:
    """What a key may hold, in words."""
    extra = field.json_schema_extra
    return str(extra["allowed"]) if isinstance(extra, dict) else ""
