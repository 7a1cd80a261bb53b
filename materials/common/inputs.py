"""Checks of what a caller gives, with one clear line where it makes no sense."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from materials.common.errors import InputError, OutOfRange


def number(name: str, value: Any, unit: str, *, above: float = 0.0, least: bool = False) -> float:
    """A finite number above (or, with ``least``, at least) a bound.

    Raises
    ------
    OutOfRange
        For NaN, infinity or a value outside the range.
    InputError
        When it is no number at all.
    """
    try:
        out = float(value)
    except (TypeError, ValueError) as exc:
        raise InputError(f"{name} = {value!r} is no number; give one in {unit or '1'}") from exc
    if not math.isfinite(out) or out < above or (out == above and not least):
        sign = ">=" if least else ">"
        shown = f"{out:g} {unit}".rstrip()
        bound = f"{above:g} {unit}".rstrip()
        raise OutOfRange(
            f"{name} = {shown} is outside the range; give a finite number {sign} {bound}"
        )
    return out


def numbers(name: str, value: Any, unit: str, *, zero_allowed: bool = False) -> np.ndarray:
    """A float array whose entries are all finite and positive (or zero).

    Raises
    ------
    OutOfRange
        Naming the first entry that is not.
    InputError
        When the values are no numbers.
    """
    try:
        out = np.asarray(value, dtype=float)
    except (TypeError, ValueError) as exc:
        raise InputError(f"{name} holds something that is no number; give {unit}") from exc
    good = np.isfinite(out) & ((out >= 0.0) if zero_allowed else (out > 0.0))
    if not np.all(good):
        first = out[~good].flat[0]
        sign = ">= 0" if zero_allowed else "> 0"
        raise OutOfRange(
            f"{name} = {first:g} {unit} is outside the range; give finite numbers {sign} {unit}"
        )
    return out


def scalar_or_array(values: Any) -> Any:
    """A plain float where there is one number, the array where there are more.

    Examples
    --------
    >>> scalar_or_array(np.float64(0.5))
    0.5
    """
    return float(values) if np.ndim(values) == 0 else np.asarray(values)


def whole(name: str, value: Any, *, least: int = 1, most: int = 1_000_000) -> int:
    """A whole number within bounds.

    Raises
    ------
    OutOfRange
        When it is not within them.
    InputError
        When it is not whole.
    """
    if isinstance(value, bool | np.bool_) or not isinstance(value, int | np.integer):
        raise InputError(f"{name} = {value!r} is no whole number; give {least} to {most}")
    if not least <= value <= most:
        raise OutOfRange(f"{name} = {value} is outside the range; give {least} to {most}")
    return int(value)


def interval(name: str, value: Any, unit: str) -> tuple[float, float]:
    """Two positive numbers, returned in rising order.

    Raises
    ------
    OutOfRange
        For numbers that are equal, not positive or not finite.
    InputError
        When it is no pair.
    """
    out = numbers(name, value, unit)
    if out.shape != (2,):
        raise InputError(f"{name} must be a pair (from, to) in {unit}, not {value!r}")
    low, high = sorted(out.tolist())
    if low == high:
        raise OutOfRange(f"{name}: both ends are {low:g} {unit}; give two different ones")
    return low, high
