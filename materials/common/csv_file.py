"""CSV files: comment lines with title, inputs, units and notes, then one plain table.

``pandas.read_csv(path, comment="#")`` reads them; every digit is kept.

Examples
--------
>>> column = Variable("n_eff", np.array([1.8, 1.7]), ("wavelength_um",), "1", "effective index")
>>> csv_text([column], title="example").splitlines()[-3:]
['wavelength_um,n_eff', '0,1.8', '1,1.7']
"""

from __future__ import annotations

import csv
import io
import json
import os
from collections.abc import Iterator, Mapping, Sequence
from typing import Any

import numpy as np

from materials.common.files import Variable, axes, flatten, parts, plain, write_text


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
    lengths = axes(variables)
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
    for name, values in parts(variable):
        yield name, np.transpose(values, order).reshape(shape)


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
        for name, values in parts(variable):
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
