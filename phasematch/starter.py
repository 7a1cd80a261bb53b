"""The commented starter design: each key, what it is, what it may be, a working value."""

from __future__ import annotations

import textwrap

from pydantic.fields import FieldInfo

from phasematch.caution import LASER_CAUTION
from phasematch.design_file import toml_value
from phasematch.design_tables import TABLES, allowed

#: Values of the keys that have no default: a thick-nitride ring and the channel of its bus.
_EXAMPLE = {
    ("cross_section", "core"): "Si3N4-Luke2015",
    ("cross_section", "cladding"): "SiO2-Malitson1965",
    ("cross_section", "substrate"): "SiO2-Malitson1965",
    ("cross_section", "width_um"): 1.6,
    ("cross_section", "height_um"): 0.8,
    ("band", "from_um"): 1.3,
    ("band", "to_um"): 1.9,
    ("channel", "length_mm"): 10.0,
    ("channel", "pump_um"): 1.55,
    ("channel", "pump_w"): 0.1,
    ("ring", "radius_um"): 100.0,
    ("ring", "q_intrinsic"): 2e6,
    ("ring", "q_coupling"): 2e6,
    ("ring", "pump_um"): 1.55,
}


def starter_text() -> str:
    """A design file that runs as it is, with a comment on every key."""
    lines = [
        '# A design for Idlermap. Check it with "idlermap check", run it with',
        '# "idlermap run FILE -o FOLDER". Keys that are commented out show their defaults.',
        "# Leave out [channel] or [ring] if the design has none.",
        *textwrap.wrap(LASER_CAUTION, 84, initial_indent="# ", subsequent_indent="# "),
    ]
    for name, table in TABLES.items():
        lines += ["", f"# {(table.__doc__ or '').strip()}", f"[{name}]"]
        for key, field in table.model_fields.items():
            lines += _key_lines(name, key, field)
    return "\n".join(lines) + "\n"


def _key_lines(table: str, key: str, field: FieldInfo) -> list[str]:
    comment = f"{field.description} ({allowed(field)})"
    lines = textwrap.wrap(comment, 84, initial_indent="# ", subsequent_indent="#   ")
    if (table, key) in _EXAMPLE:
        return [*lines, f"{key} = {toml_value(_EXAMPLE[table, key])}"]
    if field.default is None:
        return [*lines, f"# {key} ="]
    return [*lines, f"# {key} = {toml_value(field.default)}"]
