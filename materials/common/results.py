"""What every result object has in common: declared quantities, printing, files, provenance.

A result is a frozen dataclass whose numeric fields are declared once, with unit, name in
words and axes; its printed table, CSV columns and HDF5 datasets all follow from there.
Error bars stand apart in ``error``, a read-only mapping with the fields' names as keys.

Examples
--------
>>> from dataclasses import dataclass, field
>>> import numpy as np
>>> @dataclass(frozen=True, slots=True, eq=False)
... class Line(Result):
...     label: str = quantity("mode", "")
...     n_eff: float = quantity("effective index", "1")
...     area_um2: float = quantity("effective area", "um2")
...     error: ErrorBars = field(default_factory=ErrorBars)
>>> Line("TE0", 1.83454381, 1.06, error=ErrorBars(n_eff=4e-8))
Line TE0
  n_eff      1.83454381(4)
  area_um2   1.06            um2
"""

from __future__ import annotations

import dataclasses
import math
import os
import platform
import socket
import time
from collections.abc import Iterator, Mapping, Sequence
from typing import Any

import numpy as np

from materials.common.files import Variable, plain, write_csv, write_hdf5

__all__ = [
    "ErrorBars",
    "Provenance",
    "Result",
    "Variable",
    "format_number",
    "frozen_array",
    "make_provenance",
    "quantity",
]

_ROWS_SHOWN = 8


def quantity(long_name: str, unit: str, dims: Sequence[str] = (), **field_kwargs: Any) -> Any:
    """Declare a field of a result: its name in words, its unit and its axes.

    Parameters
    ----------
    long_name : str
        What it is, as an axis label would say it, without the unit.
    unit : str
        "um", "ps2/km" ...; "1" for a pure number, "" for text.
    dims : sequence of str
        One name per axis of the array. A field named like an axis holds its values.
    **field_kwargs
        Passed to `dataclasses.field` (``default``, ``kw_only`` ...).

    Returns
    -------
    dataclasses.Field
    """
    metadata = {"long_name": long_name, "unit": unit, "dims": tuple(dims)}
    return dataclasses.field(metadata=metadata, **field_kwargs)


def frozen_array(values: Any, dtype: Any = None) -> np.ndarray:
    """A read-only copy of ``values`` that owns its memory."""
    out = np.array(values, dtype=dtype)
    out.flags.writeable = False
    return out


class ErrorBars(Mapping[str, Any]):
    """Absolute error bars by the name of the quantity, read-only.

    Values are floats, arrays, or functions of the wavelength for a curve. Unlike
    `types.MappingProxyType` it survives pickling, so results can come from a worker.

    Examples
    --------
    >>> bars = ErrorBars(n_eff=1e-8)
    >>> bars["n_eff"]
    1e-08
    """

    __slots__ = ("_bars",)

    def __init__(self, bars: Mapping[str, Any] | None = None, /, **more: Any) -> None:
        both = {**(bars or {}), **more}
        frozen = {k: frozen_array(v) if isinstance(v, np.ndarray) else v for k, v in both.items()}
        object.__setattr__(self, "_bars", frozen)

    def __getitem__(self, key: str) -> Any:
        return self._bars[key]  # type: ignore[attr-defined]

    def __iter__(self) -> Iterator[str]:
        return iter(self._bars)  # type: ignore[attr-defined]

    def __len__(self) -> int:
        return len(self._bars)  # type: ignore[attr-defined]

    def __setattr__(self, name: str, value: Any) -> None:
        raise AttributeError("error bars are read-only")

    def __reduce__(self) -> tuple[Any, ...]:
        return (ErrorBars, (dict(self._bars),))  # type: ignore[attr-defined]

    def __repr__(self) -> str:
        return f"ErrorBars({dict(self)!r})"


@dataclasses.dataclass(frozen=True, slots=True)
class Provenance:
    """Where a result comes from.

    Two results of the same inputs have equal provenance: time, duration and host stand
    apart and take no part in the comparison.

    Attributes
    ----------
    version : str
        Version of Idlermap.
    materials : tuple of str
        Keys of the media used.
    grid : str
        Ladder or grid in words, e.g. "ladder 3:4:5, 12512 unknowns".
    details : tuple of (str, str)
        Anything else that decides the numbers.
    python, numpy, scipy : str
        Their versions.
    made_at, seconds, host : str, float, str
        When (UTC), how long it took, on which machine.
    """

    version: str
    materials: tuple[str, ...] = ()
    grid: str = ""
    details: tuple[tuple[str, str], ...] = ()
    python: str = ""
    numpy: str = ""
    scipy: str = ""
    made_at: str = dataclasses.field(default="", compare=False)
    seconds: float = dataclasses.field(default=math.nan, compare=False)
    host: str = dataclasses.field(default="", compare=False)

    def as_dict(self) -> dict[str, Any]:
        """Everything as plain values, ``details`` as a mapping."""
        out = {f.name: getattr(self, f.name) for f in dataclasses.fields(self)}
        out["details"] = dict(self.details)
        return {k: v for k, v in plain(out).items() if v not in ("", [], {}) and v == v}


def make_provenance(
    materials: Sequence[str] = (), grid: str = "", *, seconds: float = math.nan, **details: Any
) -> Provenance:
    """Provenance of a result made now, by this version on this machine."""
    import scipy

    return Provenance(
        version=_version(),
        materials=tuple(dict.fromkeys(materials)),
        grid=grid,
        details=tuple((k, str(v)) for k, v in details.items()),
        python=platform.python_version(),
        numpy=np.__version__,
        scipy=scipy.__version__,
        made_at=time.strftime("%Y-%m-%dT%H:%M:%SZ", time.gmtime()),
        seconds=seconds,
        host=socket.gethostname(),
    )


def _version() -> str:
    from importlib import metadata

    try:
        return metadata.version("idlermap")
    except metadata.PackageNotFoundError:
        return "0+source"


def format_number(value: Any, bar: float | None = None, *, digits: int = 6) -> str:
    """A number as text, its error bar in brackets behind the last digits.

    The bar is rounded up, to one digit, or two where it starts with a 1; a bar of 1 or
    more is written out behind ``+-``. Without a bar (None, 0 or NaN) ``digits``
    significant digits are shown.

    Examples
    --------
    >>> format_number(1.83454380, 1e-7)
    '1.83454380(10)'
    >>> format_number(-1234.567, 23.4)
    '-1230 +- 30'
    >>> format_number(1.23456e-7, 3e-11)
    '1.2346(3)e-07'
    >>> format_number(88.07, None)
    '88.07'
    """
    if isinstance(value, str | bool | np.bool_ | int | np.integer):
        return str(value)
    value = float(value)
    if bar is None or not math.isfinite(value) or not (0 < bar < math.inf):
        return f"{value:.{digits}g}"
    place = math.floor(math.log10(bar))
    leading = bar / 10.0**place
    place -= 1 if leading < 1.9 else 0
    units = math.ceil(bar / 10.0**place * (1 - 1e-9))
    if units >= 100 or (units == 10 and leading >= 1.9):
        units, place = units // 10, place + 1
    if bar >= 1:
        return f"{round(value, -place):.{max(0, -place)}f} +- {units * 10.0**place:g}"
    size = max(math.floor(math.log10(abs(value))) if value else 0, place)
    if size - place > 15:  # below the rounding of the value itself
        return f"{value:.16g} +- {bar:.0e}"
    if size < -3 and place < -4:  # too small to write out
        return f"{value / 10.0**size:.{size - place}f}({units})e{size:+03d}"
    return f"{value:.{-place}f}({units})"


class Result:
    """Mixin of all result dataclasses: a printed table, CSV and HDF5.

    A subclass declares its numbers with `quantity` and has, by convention, the fields
    ``error`` (`ErrorBars`), ``inputs`` (mapping), ``notes`` (tuple of str) and
    ``provenance`` (`Provenance`). One that keeps its numbers otherwise overrides
    `variables`. Arrays are made read-only, also after unpickling.
    """

    __slots__ = ()

    def __init_subclass__(cls, **kwargs: Any) -> None:
        super().__init_subclass__(**kwargs)
        # set on the class itself, where the dataclass decorator leaves them in peace
        for name in ("__repr__", "__setstate__", "__getstate__"):
            if name not in cls.__dict__:
                setattr(cls, name, Result.__dict__[name])

    def __getstate__(self) -> list[Any]:
        return [getattr(self, f.name) for f in dataclasses.fields(self)]  # type: ignore[arg-type]

    def __setstate__(self, state: list[Any]) -> None:
        fields = dataclasses.fields(self)  # type: ignore[arg-type]
        for declared, value in zip(fields, state, strict=True):
            if isinstance(value, np.ndarray):
                value.flags.writeable = False
            object.__setattr__(self, declared.name, value)

    def variables(self) -> list[Variable]:
        """The declared quantities with their values and error bars, in order."""
        error = getattr(self, "error", {})
        out = []
        for declared in dataclasses.fields(self):  # type: ignore[arg-type]
            value = getattr(self, declared.name)
            if "long_name" not in declared.metadata or value is None:
                continue
            about = declared.metadata
            bar = error.get(declared.name)
            out.append(
                Variable(
                    name=declared.name,
                    values=np.asarray(value),
                    dims=about["dims"],
                    unit=about["unit"],
                    long_name=about["long_name"],
                    error=None if bar is None or callable(bar) else np.asarray(bar, dtype=float),
                )
            )
        return out

    def _about(self) -> dict[str, Any]:
        """Title, inputs, notes and provenance as the file writers want them."""
        provenance = getattr(self, "provenance", None)
        return {
            "title": _title(self),
            "inputs": getattr(self, "inputs", None) or {},
            "notes": tuple(getattr(self, "notes", ()) or ()),
            "provenance": provenance.as_dict() if provenance is not None else {},
        }

    def to_csv(self, path: str | os.PathLike[str]) -> None:
        """Write the result as a table with its units and inputs; see `files.write_csv`."""
        write_csv(path, self.variables(), **self._about())

    def to_hdf5(self, path: str | os.PathLike[str]) -> None:
        """Write the result as HDF5 that netCDF-4 readers open; see `files.write_hdf5`."""
        write_hdf5(path, self.variables(), **self._about())

    def __repr__(self) -> str:
        variables = [v for v in self.variables() if v.name != "label"]
        scalars = [v for v in variables if not v.dims]
        rows = [(v.name, format_number(*_pair(v)), _unit(v.unit)) for v in scalars]
        rows += [(v.name, _range(v), _unit(v.unit)) for v in variables if len(v.dims) > 1]
        lines = [_title(self), *_aligned(rows)]
        for dim in dict.fromkeys(v.dims for v in variables if len(v.dims) == 1):
            lines += _listing([v for v in variables if v.dims == dim])
        lines += [f"  note: {note}" for note in getattr(self, "notes", ()) or ()]
        return "\n".join(lines)


def _title(result: Any) -> str:
    label = getattr(result, "label", "")
    return f"{type(result).__name__} {label}".rstrip() if isinstance(label, str) else str(label)


def _unit(unit: str) -> str:
    return "" if unit == "1" else unit


def _pair(variable: Variable, index: Any = ()) -> tuple[Any, float | None]:
    """Value and bar of a scalar variable, or of one entry of an array."""
    value = np.asarray(variable.values)[index]
    value = value.item() if hasattr(value, "item") else value
    if isinstance(value, complex):
        return f"{value:.6g}", None
    if variable.error is None:
        return value, None
    return value, float(np.broadcast_to(variable.error, np.shape(variable.values))[index])


def _range(variable: Variable) -> str:
    """Shape and extent of an array that is too large to print."""
    values = np.asarray(variable.values)
    shape = " x ".join(map(str, values.shape))
    if values.dtype.kind not in "fiu" or not np.isfinite(values).any():
        return f"{shape} values"
    low, high = np.nanmin(values), np.nanmax(values)
    return f"{format_number(low)} .. {format_number(high)} ({shape})"


def _aligned(rows: Sequence[tuple[str, ...]]) -> list[str]:
    """Rows of cells as lines, columns left-aligned and two blanks in front."""
    if not rows:
        return []
    widths = [max(len(row[i]) for row in rows) for i in range(len(rows[0]))]
    joined = ("   ".join(c.ljust(w) for c, w in zip(row, widths, strict=True)) for row in rows)
    return ["  " + line.rstrip() for line in joined]


def _listing(variables: Sequence[Variable]) -> list[str]:
    """Arrays along one axis, side by side: the first rows and the last; columns to fit 80."""
    length = len(variables[0].values)
    shown = list(range(length))
    if length > _ROWS_SHOWN:
        shown = [*range(_ROWS_SHOWN - 2), length - 1]
    columns: list[list[str]] = []
    width = 2
    for variable in variables:
        cells = [variable.name, *(format_number(*_pair(variable, i)) for i in shown)]
        width += max(map(len, cells)) + 3
        if columns and width > 80:
            break
        columns.append(cells)
    rows = list(zip(*columns, strict=True))
    if length > _ROWS_SHOWN:
        rows.insert(len(rows) - 1, tuple("..." if i == 0 else "" for i in range(len(columns))))
    left = [v.name for v in variables[len(columns) :]]
    return [*_aligned(rows), *([f"  and {', '.join(left)}"] if left else [])]
