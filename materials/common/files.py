"""Files that appear whole or not at all: CSV, HDF5 and text.

Every file is written to a temporary one in the same folder, closed, flushed to the disk
and renamed over the target; the folder's entry is flushed last. A run killed at any
moment leaves the old file or the new one, never half of one.

CSV: comment lines starting with ``#`` carry title, inputs, units, notes and provenance,
then comes one header row (``pandas.read_csv(path, comment="#")`` reads it). HDF5: every
axis is a dimension scale and every dataset has ``units`` and ``long_name``, so that
netCDF-4 readers open it (``xarray.open_dataset(path, engine="h5netcdf")``).

Examples
--------
>>> import pathlib, tempfile
>>> folder = pathlib.Path(tempfile.mkdtemp())
>>> column = Variable("n_eff", np.array([1.8, 1.7]), ("wavelength_um",), "1", "effective index")
>>> write_csv(folder / "a.csv", [column], title="example")
>>> print((folder / "a.csv").read_text().splitlines()[-3:])
['wavelength_um,n_eff', '0,1.8', '1,1.7']
"""

from __future__ import annotations

import contextlib
import csv
import io
import json
import os
import secrets
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from materials.common.errors import InputError, StorageError

_ADVICE = "check that the folder exists and may be written to, and that the disk has room"


@dataclass(frozen=True, slots=True, eq=False)
class Variable:
    """One named quantity as it goes into a file.

    Attributes
    ----------
    name : str
        Column or dataset name, unit suffix included.
    values : ndarray
        Numbers, booleans or strings, one axis per entry of ``dims``.
    dims : tuple of str
        Names of the axes. A variable named like a dimension holds that axis's values.
    unit, long_name : str
        Unit ("1" where there is none) and the axis label in words.
    error : ndarray or None
        Absolute error bar of the same shape and unit.
    """

    name: str
    values: np.ndarray
    dims: tuple[str, ...]
    unit: str
    long_name: str
    error: np.ndarray | None = None

    def __post_init__(self) -> None:
        if np.ndim(self.values) != len(self.dims):
            raise InputError(
                f"{self.name}: an array of shape {np.shape(self.values)} does not fit the "
                f"dimensions {self.dims}; give one name per axis"
            )


@contextlib.contextmanager
def whole_file(path: str | os.PathLike[str]) -> Iterator[Path]:
    """Give a temporary path to write to; put it in place of ``path`` on a clean exit.

    Raises
    ------
    StorageError
        When the file cannot be written, flushed or renamed. The target is untouched then.
    """
    target = Path(os.path.realpath(path))
    temporary = target.with_name(f".{target.name}.{secrets.token_hex(4)}.part")
    try:
        # created here, not by mkstemp, so that the user's umask decides who may read it
        os.close(os.open(temporary, os.O_CREAT | os.O_EXCL | os.O_WRONLY, 0o666))
        yield temporary
        _flush(temporary)
        os.replace(temporary, target)
        _flush(target.parent)
    except StorageError:
        raise
    except OSError as exc:
        raise StorageError(f"cannot write {path}: {exc.strerror or exc}; {_ADVICE}") from exc
    finally:
        with contextlib.suppress(OSError):
            temporary.unlink(missing_ok=True)


def _flush(path: Path) -> None:
    """Flush a closed file or a folder to the disk."""
    descriptor = os.open(path, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)


def write_text(path: str | os.PathLike[str], text: str) -> None:
    """Write a text file, UTF-8, whole or not at all."""
    with whole_file(path) as temporary:
        temporary.write_text(text, encoding="utf-8", newline="\n")


def plain(value: Any) -> Any:
    """Reduce a value to what JSON holds: numbers, strings, None, lists, mappings.

    An object with a ``key`` (a medium of the catalogue) becomes that key.
    """
    if value is None or isinstance(value, str | bool | int | float):
        return value
    if isinstance(value, np.generic):
        return plain(value.item())
    if isinstance(value, complex):
        return {"re": value.real, "im": value.imag}
    if isinstance(value, Mapping):
        return {str(k): plain(v) for k, v in value.items()}
    if isinstance(value, np.ndarray):
        return plain(value.tolist())
    if isinstance(value, Sequence | set | frozenset):
        return [plain(v) for v in value]
    key = getattr(value, "key", None)
    return key if isinstance(key, str) else str(value)


def flatten(mapping: Mapping[str, Any], prefix: str = "") -> dict[str, Any]:
    """Nested mappings as one level, keys joined by dots."""
    out: dict[str, Any] = {}
    for key, value in mapping.items():
        name = f"{prefix}{key}"
        if isinstance(value, Mapping):
            out.update(flatten(value, name + "."))
        else:
            out[name] = value
    return out


def _axes(variables: Sequence[Variable]) -> dict[str, int]:
    """Length of every dimension, in order of first use; a clash of lengths is refused."""
    lengths: dict[str, int] = {}
    for variable in variables:
        for dim, length in zip(variable.dims, np.shape(variable.values), strict=True):
            if lengths.setdefault(dim, length) != length:
                raise InputError(
                    f"{variable.name}: {length} values along {dim}, where others have "
                    f"{lengths[dim]}; all must agree"
                )
    return lengths


# ---------------------------------------------------------------- CSV


def csv_text(
    variables: Sequence[Variable],
    *,
    title: str,
    inputs: Mapping[str, Any] | None = None,
    notes: Sequence[str] = (),
    provenance: Mapping[str, Any] | None = None,
) -> str:
    """Variables as the text of one table.

    Scalars go to the comment lines; where there is nothing else they are a table of one
    row. Everything else becomes a column, repeated along the axes it does not have: a map
    over two axes comes out with one row per point. A short list along an axis of its own
    goes to the comment lines too. An error bar is the column ``<name>_error``; complex
    values are two columns, ``_re`` and ``_im``.

    Parameters
    ----------
    variables : sequence of Variable
        Columns in their order. A dimension without a variable of its name becomes a
        column of the numbers 0, 1, 2 ...
    title : str
        First comment line.
    inputs, provenance : mapping, optional
        Written as ``# input name = value`` and ``# provenance name = value``.
    notes : sequence of str
        Written as ``# note ...``.

    Raises
    ------
    InputError
        Two variables disagree about the length of an axis.
    """
    lengths = _table_axes(variables)
    aside = [v for v in variables if not set(v.dims) <= set(lengths) or (lengths and not v.dims)]
    tabled = _with_counters([v for v in variables if v not in aside], lengths)
    text = io.StringIO()
    for line in _comments(title, aside, tabled, inputs or {}, notes, provenance or {}):
        text.write("# " + line.replace("\n", " ") + "\n")
    columns = {
        name: np.broadcast_to(values, tuple(lengths.values())).ravel()
        for variable in tabled
        for name, values in _columns(variable, lengths)
    }
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(columns)
    rows = zip(*([_cell(x) for x in column.tolist()] for column in columns.values()), strict=True)
    writer.writerows(rows)
    return text.getvalue()


def write_csv(path: str | os.PathLike[str], variables: Sequence[Variable], **about: Any) -> None:
    """Write a table of `csv_text`, whole or not at all; raises `StorageError` as well."""
    write_text(path, csv_text(variables, **about))


def _table_axes(variables: Sequence[Variable]) -> dict[str, int]:
    """Axes of the table: those of the largest array and all that are tied to them."""
    lengths = _axes(variables)
    chosen: set[str] = set(max(variables, key=lambda v: (bool(v.dims), np.size(v.values))).dims)
    for _ in lengths:
        for variable in variables:
            if chosen & set(variable.dims):
                chosen |= set(variable.dims)
    return {dim: length for dim, length in lengths.items() if dim in chosen}


def _with_counters(variables: Sequence[Variable], lengths: dict[str, int]) -> list[Variable]:
    """The variables plus a counter for each dimension that has no values of its own."""
    named = {v.name for v in variables}
    counters = [
        Variable(dim, np.arange(length), (dim,), "1", "counter")
        for dim, length in lengths.items()
        if dim not in named
    ]
    return [*counters, *variables]


def _columns(variable: Variable, lengths: dict[str, int]) -> Iterator[tuple[str, np.ndarray]]:
    """Named columns of one variable, with an axis of length one where it has none."""
    order = sorted(range(len(variable.dims)), key=lambda i: list(lengths).index(variable.dims[i]))
    shape = tuple(n if dim in variable.dims else 1 for dim, n in lengths.items())
    for name, values in _parts(variable):
        yield name, np.transpose(values, order).reshape(shape)


def _parts(variable: Variable) -> Iterator[tuple[str, np.ndarray]]:
    """The real arrays that stand for a variable: value (or _re, _im) and error bar."""
    values = np.asarray(variable.values)
    if np.iscomplexobj(values):
        yield f"{variable.name}_re", values.real
        yield f"{variable.name}_im", values.imag
    else:
        yield variable.name, values
    if variable.error is not None:
        error = np.broadcast_to(np.asarray(variable.error, dtype=float), values.shape)
        yield f"{variable.name}_error", error


def _comments(
    title: str,
    aside: Sequence[Variable],
    tabled: Sequence[Variable],
    inputs: Mapping[str, Any],
    notes: Sequence[str],
    provenance: Mapping[str, Any],
) -> Iterator[str]:
    yield title
    for name, value in flatten(plain(inputs)).items():
        yield f"input {name} = {json.dumps(value)}"
    for variable in aside:
        for name, values in _parts(variable):
            cells = [_cell(value) for value in values.ravel().tolist()]
            shown = f"[{', '.join(cells)}]" if variable.dims else cells[0]
            yield f"value {name} = {shown}" + (f" [{variable.unit}]" if variable.unit else "")
    for variable in tabled:
        unit = f" [{variable.unit}]" if variable.unit else ""
        yield f"column {variable.name}: {variable.long_name}{unit}"
    for note in notes:
        yield f"note {note}"
    for name, value in flatten(plain(provenance)).items():
        yield f"provenance {name} = {json.dumps(value)}"


def _cell(value: Any) -> str:
    """Text of one cell; floats keep every digit."""
    if isinstance(value, bool):
        return "true" if value else "false"
    return repr(value) if isinstance(value, float) else str(value)


# ---------------------------------------------------------------- HDF5


def write_hdf5(
    path: str | os.PathLike[str],
    variables: Sequence[Variable],
    *,
    title: str,
    inputs: Mapping[str, Any] | None = None,
    notes: Sequence[str] = (),
    provenance: Mapping[str, Any] | None = None,
) -> None:
    """Write variables to an HDF5 file that netCDF-4 readers open, whole or not at all.

    Root attributes: ``title``, ``inputs`` and ``provenance`` (JSON), ``notes`` (one a
    line). Complex values are ``_re`` and ``_im`` pairs, booleans int8 (0 and 1), strings
    UTF-8; an error bar is the dataset ``<name>_error``. Parameters and errors as for
    `csv_text`, and `StorageError`.
    """
    import h5py  # here, because reading it takes longer than the rest of this package

    lengths = _axes(variables)
    attributes = {
        "title": title,
        "inputs": json.dumps(plain(inputs or {})),
        "notes": "\n".join(notes),
        "provenance": json.dumps(plain(provenance or {})),
    }
    with whole_file(path) as temporary:
        try:
            with h5py.File(temporary, "w", track_order=True) as file:
                file.attrs.update(attributes)
                _write_datasets(file, variables, lengths)
        except RuntimeError as exc:  # how h5py reports a failed flush
            raise StorageError(f"cannot write {path}: {exc}; {_ADVICE}") from exc


def _write_datasets(file: Any, variables: Sequence[Variable], lengths: dict[str, int]) -> None:
    scales = {v.name: v for v in variables if v.dims == (v.name,)}
    for dim, length in lengths.items():
        if dim in scales:
            _dataset(file, scales[dim], dim, np.asarray(scales[dim].values)).make_scale(dim)
        else:  # the netCDF-4 form of an axis without values
            blank = file.create_dataset(dim, shape=(length,), dtype="f4")
            blank.make_scale(f"This is a netCDF dimension but not a netCDF variable.{length:10d}")
    for variable in variables:
        for name, values in _parts(variable):
            if name not in lengths:
                dataset = _dataset(file, variable, name, values)
                for axis, dim in enumerate(variable.dims):
                    dataset.dims[axis].attach_scale(file[dim])


def _dataset(file: Any, variable: Variable, name: str, values: np.ndarray) -> Any:
    import h5py

    attributes: dict[str, Any] = {"units": variable.unit, "long_name": variable.long_name}
    if name.endswith("_error") and name != variable.name:
        attributes["long_name"] = f"error bar of {variable.long_name}"
    if values.dtype == bool:
        values = values.astype(np.int8)
        attributes["flag_values"] = np.array([0, 1], dtype=np.int8)
        attributes["flag_meanings"] = "false true"
    if values.dtype.kind in "UO":
        dataset = file.create_dataset(name, data=values.astype(object), dtype=h5py.string_dtype())
    else:
        dataset = file.create_dataset(name, data=values)
    dataset.attrs.update(attributes)
    return dataset
