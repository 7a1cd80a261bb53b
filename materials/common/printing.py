"""Numbers with their error bars as text, and results as short aligned tables."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

import numpy as np

from materials.common.files import Variable

_ROWS_SHOWN = 8


def format_number(value: Any, bar: float | None = None, *, digits: int = 6, most: int = 16) -> str:
    """A number as text, its error bar in brackets behind the last digits.

    The bar is rounded up, to one digit, or two where it starts with a 1; one of 1 or more
    is written out behind ``+-``, and from a million on the number has a power of ten.
    Without a bar (None, 0 or NaN) ``digits`` significant digits are shown. At most
    ``most`` digits are shown (one more where the bar has two); where the bar is below the
    last of them, all ``most`` stand without brackets.

    Examples
    --------
    >>> format_number(1.83454380, 1e-7)
    '1.83454380(10)'
    >>> format_number(-1234.567, 23.4)
    '-1230 +- 30'
    >>> format_number(1.54916323, 1e-8, most=9), format_number(1.54916323, 9e-9, most=9)
    ('1.549163230(10)', '1.54916323')
    >>> format_number(29667950.0, 144.0)
    '2.966795(15)e+07'
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
    last = math.floor(math.log10(abs(value))) + 1 - most if value else -308
    if bar < 10.0**last * (1 - 1e-9):
        return _digits(value, last)
    units, place = _rounded_up(bar)
    size = max(math.floor(math.log10(abs(value))) if value else 0, place)
    shown = units * 10.0**place
    if shown >= 1 and size < 6:
        return f"{round(value, -place):.{max(0, -place)}f} +- {shown:g}"
    if _needs_power(size, place):
        return f"{value / 10.0**size:.{size - place}f}({units})e{size:+03d}"
    return f"{value:.{-place}f}({units})"


def _needs_power(size: int, place: int) -> bool:
    """Whether a number of these first and last digits is too large or small to write out."""
    return size >= 6 or (size < -3 and place < -4)


def _digits(value: float, place: int) -> str:
    """All digits down to one place, zeros at the end included."""
    size = math.floor(math.log10(abs(value)))
    if _needs_power(size, place):
        return f"{value:.{size - place}e}"
    return f"{value:.{max(0, -place)}f}"


def _rounded_up(bar: float) -> tuple[int, int]:
    """A bar as a whole number of powers of ten: 10 to 19, or 2 to 9."""
    place = math.floor(math.log10(bar))
    leading = bar / 10.0**place
    place -= 1 if leading < 1.9 else 0
    units = math.ceil(bar / 10.0**place * (1 - 1e-9))
    if units == 10 and leading >= 1.9:
        units, place = 1, place + 1
    return units, place


def printed(title: str, variables: Sequence[Variable], notes: Sequence[str] = ()) -> str:
    """A result as a short table: scalars, then arrays by their extent or first rows."""
    variables = [v for v in variables if v.name != "label" and _says_something(v)]
    scalars = [v for v in variables if not v.dims]
    rows = [(v.name, format_number(*_pair(v)), _unit(v.unit)) for v in scalars]
    tables = [[v for v in variables if v.dims == dim] for dim in _axes_with_columns(variables)]
    listed = {v.name for table in tables for v in table}
    rows += [
        (v.name, _range(v), _unit(v.unit)) for v in variables if v.dims and v.name not in listed
    ]
    lines = [title, *_aligned(rows)]
    for table in tables:
        lines += _listing(table)
    lines += [f"  note: {note}" for note in notes]
    return "\n".join(lines)


def _says_something(variable: Variable) -> bool:
    """False for text that is empty throughout, such as reasons where nothing failed."""
    values = np.asarray(variable.values)
    return values.dtype.kind not in "UO" or bool((values != "").any())


def _axes_with_columns(variables: Sequence[Variable]) -> list[tuple[str, ...]]:
    """Single axes that carry more than their own values."""
    named = [v for v in variables if len(v.dims) == 1 and v.dims != (v.name,)]
    return list(dict.fromkeys(v.dims for v in named))


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
