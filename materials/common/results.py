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

from materials.common.caution import LASER_CAUTION, states_power
from materials.common.csv_file import csv_text, write_csv
from materials.common.files import Variable, plain
from materials.common.hdf5_file import write_hdf5
from materials.common.printing import format_number, printed

__all__ = [
    "ErrorBars",
    "FullResult",
    "Provenance",
    "Result",
    "Variable",
    "format_number",
    "frozen_array",
    "make_provenance",
    "package_version",
    "quantity",
]


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
        """Everything but the host as plain values; what differs from run to run in "made"."""
        out = {f.name: getattr(self, f.name) for f in dataclasses.fields(self) if f.compare}
        out["details"] = dict(self.details)
        # the host stays with the object: files are handed on, names of machines need not be
        made = {"at": self.made_at, "seconds": self.seconds}
        out["made"] = {k: v for k, v in made.items() if v not in ("",) and v == v}
        return {k: v for k, v in plain(out).items() if v not in ("", [], {})}


def make_provenance(
    materials: Sequence[str] = (), grid: str = "", *, seconds: float = math.nan, **details: Any
) -> Provenance:
    """Provenance of a result made now, by this version on this machine."""
    import scipy

    return Provenance(
        version=package_version(),
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


def package_version() -> str:
    """Version of Idlermap, as installed."""
    from importlib import metadata

    try:
        return metadata.version("idlermap")
    except metadata.PackageNotFoundError:
        return "0+source"


class Result:
    """Mixin of all result dataclasses: a printed table, CSV and HDF5.

    A subclass declares its numbers with `quantity`; `FullResult` gives it the fields
    ``error``, ``inputs``, ``notes`` and ``provenance``. One that keeps its numbers
    otherwise overrides `variables`. Arrays are made read-only, also after unpickling.
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
        inputs = getattr(self, "inputs", None) or {}
        notes = tuple(getattr(self, "notes", ()) or ())
        if states_power(inputs) and LASER_CAUTION not in notes:
            notes = (*notes, LASER_CAUTION)
        return {
            "title": _title(self),
            "inputs": inputs,
            "notes": notes,
            "provenance": provenance.as_dict() if provenance is not None else {},
        }

    def to_csv(self, path: str | os.PathLike[str]) -> None:
        """Write the result as a table with its units and inputs; see `csv_file`."""
        write_csv(path, self.variables(), **self._about())

    def csv_text(self) -> str:
        """The text that `to_csv` writes."""
        return csv_text(self.variables(), **self._about())

    def to_hdf5(self, path: str | os.PathLike[str]) -> None:
        """Write the result as HDF5 that netCDF-4 readers open; see `hdf5_file`."""
        write_hdf5(path, self.variables(), **self._about())

    def __repr__(self) -> str:
        return printed(_title(self), self.variables(), getattr(self, "notes", ()) or ())


@dataclasses.dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class FullResult(Result):
    """A result with the four things that stand beside its numbers.

    Attributes
    ----------
    error : ErrorBars
        Absolute bars by the name of the quantity.
    inputs : mapping
        What was asked for, as plain values.
    notes : tuple of str
        What to know about the numbers.
    provenance : Provenance or None
    """

    error: ErrorBars = dataclasses.field(default_factory=ErrorBars)
    inputs: Mapping[str, Any] = dataclasses.field(default_factory=dict)
    notes: tuple[str, ...] = ()
    provenance: Provenance | None = None


def _title(result: Any) -> str:
    label = getattr(result, "label", "")
    return f"{type(result).__name__} {label}".rstrip() if isinstance(label, str) else str(label)
