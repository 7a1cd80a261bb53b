"""A design file: read, checked as a whole, completed with its defaults, written out again.

Every problem in the file is found in one pass and said in one line each: file, key, value
and what is allowed.
"""

from __future__ import annotations

import difflib
import json
import os
import tomllib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from materials.common.caution import LASER_CAUTION, states_power
from materials.common.constants import middle_um
from materials.common.errors import DesignFileError, StorageError, UnknownName
from materials.common.results import Provenance
from phasematch.design_checks import joint_problems
from phasematch.design_tables import TABLES, DesignTables, Table, allowed


@dataclass(frozen=True, slots=True, eq=False)
class Design:
    """A checked design with every default filled in.

    Attributes
    ----------
    tables : DesignTables
        The tables; ``design.tables.ring.radius_um`` and so on.
    source : str
        The file it came from.
    """

    tables: DesignTables
    source: str

    @property
    def reference_um(self) -> float:
        """Wavelength at which the modes are listed and labelled, um."""
        return _reference_um(self.tables)

    def as_dict(self) -> dict[str, Any]:
        """All keys that have a value, as plain nested mappings."""
        return self.tables.model_dump(exclude_none=True)

    def to_toml(self, provenance: Provenance | None = None) -> str:
        """The resolved design as a design file that can be run again.

        Provenance stands in comment lines at its top.
        """
        lines = ["# Resolved design: every default written out. It can be run again as it is."]
        if provenance is not None:
            lines += [f"# {k}: {json.dumps(v)}" for k, v in provenance.as_dict().items()]
        if states_power(self.as_dict()):
            lines.append(f"# {LASER_CAUTION}")
        for name, table in self.as_dict().items():
            lines += ["", f"[{name}]"]
            lines += [f"{key} = {toml_value(value)}" for key, value in table.items()]
        return "\n".join(lines) + "\n"


def toml_value(value: Any) -> str:
    """A plain value as TOML."""
    if isinstance(value, list | tuple):
        return "[" + ", ".join(toml_value(v) for v in value) + "]"
    if isinstance(value, str):
        return json.dumps(value, ensure_ascii=False)
    return json.dumps(value) if isinstance(value, bool) else repr(value)


def read_design(path: str | os.PathLike[str], changes: Sequence[str] = ()) -> Design:
    """Read and check a design file.

    Parameters
    ----------
    path : path
        The TOML file.
    changes : sequence of str
        ``"table.key=value"`` each, with a TOML value, laid over the file before checking.

    Returns
    -------
    Design

    Raises
    ------
    DesignFileError
        One or more problems, one line each.
    StorageError
        The file cannot be read.
    """
    source = str(path)
    try:
        raw = tomllib.loads(Path(path).read_text(encoding="utf-8"))
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as exc:
        raise DesignFileError((f"{source}: not readable as TOML: {exc}",)) from exc
    except OSError as exc:
        raise StorageError(
            f"cannot read {source}: {exc.strerror or exc}; give the path of a design file"
        ) from exc
    for change in changes:
        _apply(raw, change)
    return check_design(raw, source)


def _apply(raw: dict[str, Any], change: str) -> None:
    """Lay one ``table.key=value`` over the file's content."""
    key, sign, value = change.partition("=")
    names = key.strip().split(".")
    try:
        if not sign or len(names) != 2:
            raise ValueError
        parsed = tomllib.loads(f"value = {value}")["value"]
    except ValueError as exc:  # TOMLDecodeError is one
        raise UnknownName(
            f"--set {change}: write table.key=value with a TOML value, e.g. "
            f"cross_section.width_um=1.7 or 'mode.label=\"TM0\"'"
        ) from exc
    table = raw.setdefault(names[0], {})
    if isinstance(table, dict):
        table[names[1]] = parsed


def check_design(raw: Mapping[str, Any], source: str = "design") -> Design:
    """Check the content of a design file and fill in its defaults.

    Raises
    ------
    DesignFileError
        One or more problems, one line each: file, key, value, what is allowed.
    """
    problems = []
    bad: set[tuple[Any, ...]] = set()
    try:
        tables = DesignTables.model_validate(raw)
    except ValidationError as exc:
        for error in exc.errors(include_url=False, include_context=True):
            bad.add(tuple(error["loc"][:2]))
            problems.append(_problem(source, error))
        tables = None
    sound = _sound_values(raw, bad)
    problems += [f"{source}: {line}" for line in joint_problems(sound)]
    if problems or tables is None:
        raise DesignFileError(tuple(dict.fromkeys(problems)))
    return Design(_with_defaults(tables), source)


def _sound_values(raw: Mapping[str, Any], bad: set[tuple[Any, ...]]) -> dict[str, dict[str, Any]]:
    """The values that passed on their own, with the defaults of absent keys."""
    sound: dict[str, dict[str, Any]] = {}
    for name, model in TABLES.items():
        given = raw.get(name)
        if not isinstance(given, Mapping):
            continue
        values = {
            key: given.get(key, None if field.is_required() else field.default)
            for key, field in model.model_fields.items()
            if (name, key) not in bad
        }
        sound[name] = {key: value for key, value in values.items() if value is not None}
    return sound


def _problem(source: str, error: Any) -> str:
    """One line about one error of the data model."""
    where, kind, value = error["loc"], error["type"], error["input"]
    key = _path(where)
    table = TABLES.get(str(where[0]))
    if kind == "extra_forbidden":
        return f"{source}: {key} = {_shown(value)}: {_unknown(where)}"
    if kind == "missing":
        if len(where) == 1:
            return f"{source}: [{key}]: this table is missing; {_purpose(table)}"
        if len(where) == 2:
            return f"{source}: {key}: this key is missing; give {_allowed(table, where)}"
        key = _path(where[:-1])  # a list that is too short
    if len(where) == 1:
        return f"{source}: {key} = {_shown(value)}: must be a table [{key}]; {_purpose(table)}"
    hint = _in_nanometres(table, where, value)
    return f"{source}: {key} = {_shown(value)}: must be {_allowed(table, where)}{hint}"


def _in_nanometres(table: type[Table] | None, where: Sequence[Any], value: Any) -> str:
    """A word on a length that would be allowed if it were in nm, "" for any other."""
    field = table.model_fields.get(str(where[1])) if table else None
    if field is None or len(where) != 2 or not str(where[1]).endswith("_um"):
        return ""
    if isinstance(value, bool) or not isinstance(value, int | float) or value < 100.0:
        return ""
    low = next((m.ge for m in field.metadata if hasattr(m, "ge")), 0.0)
    high = next((m.le for m in field.metadata if hasattr(m, "le")), 0.0)
    return f" (nm? {value:g} nm are {1e-3 * value:g} um)" if low <= 1e-3 * value <= high else ""


def _path(where: Sequence[Any]) -> str:
    """``table.key[2][1]``, entries counted from 1."""
    parts = [str(where[0])]
    for step in where[1:]:
        parts.append(f"[{step + 1}]" if isinstance(step, int) else f".{step}")
    return "".join(parts)


def _purpose(table: type[Table] | None) -> str:
    """What a table is for: the first sentence about it, as the end of a line."""
    about = (table.__doc__ or "").strip().partition(". ")[0].rstrip(".") if table else ""
    return about[:1].lower() + about[1:]


def _allowed(table: type[Table] | None, where: Sequence[Any]) -> str:
    field = table.model_fields.get(str(where[1])) if table else None
    return allowed(field) if field else "something else"


def _unknown(where: Sequence[Any]) -> str:
    """What to say about a name that does not exist, with the nearest one that does."""
    name = str(where[-1])
    table = TABLES.get(str(where[0])) if len(where) > 1 else None
    names = list(table.model_fields if table else TABLES)
    near = difflib.get_close_matches(name, names, n=1, cutoff=0.5)
    what = f"no such key in [{where[0]}]" if table else "no such table"
    return f"{what}; {f'did you mean {near[0]}?' if near else 'allowed: ' + ', '.join(names)}"


def _shown(value: Any) -> str:
    """A value as the file would write it, cut to a readable length."""
    if isinstance(value, Mapping):
        return "{...}"
    shown = toml_value(value)
    return shown if len(shown) <= 40 else shown[:37] + "..."


def _reference_um(tables: DesignTables) -> float:
    """Where modes are listed and labelled: as given, else a pump, else the middle of the band."""
    if tables.mode.wavelength_um is not None:
        return tables.mode.wavelength_um
    for table in (tables.ring, tables.channel):
        if table is not None:
            return table.pump_um
    return middle_um(tables.band.from_um, tables.band.to_um)


def _with_defaults(tables: DesignTables) -> DesignTables:
    """Fill in the defaults that depend on other keys."""
    band, channel, ring = tables.band, tables.channel, tables.ring
    changes: dict[str, Any] = {
        "mode": tables.mode.model_copy(update={"wavelength_um": _reference_um(tables)})
    }
    if channel is not None:
        about_pump = (
            max(band.from_um, round(0.98 * channel.pump_um, 6)),
            min(band.to_um, round(1.02 * channel.pump_um, 6)),
        )
        changes["channel"] = channel.model_copy(
            update={
                "map_pump_um": channel.map_pump_um or about_pump,
                "map_signal_um": channel.map_signal_um or (band.from_um, band.to_um),
            }
        )
    if ring is not None:
        whole_band = (band.from_um, band.to_um)
        changes["ring"] = ring.model_copy(update={"map_pump_um": ring.map_pump_um or whole_band})
    return tables.model_copy(update=changes)
