"""Error bars by alternates: one mechanism for every derived number.

A result that carries an error bar keeps the versions of itself that it would be under
each change the bar stands for: a grid lower, other outer walls, a fitted constant one
standard deviation off. The bar of anything derived from the result then follows by
deriving it from those versions too, however involved the derivation is.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from typing import Any, NamedTuple

import numpy as np

__all__ = ["Alternate", "error_bar"]


class Alternate(NamedTuple):
    """One changed version of a result.

    Attributes
    ----------
    name : str
        The change, in words.
    weight : float
        Share of the change that goes into a bar.
    version : object
        The result under that change, of the same type.
    random : bool
        True for one of several independent standard deviations: those are added in
        squares, all other changes straight.
    """

    name: str
    weight: float
    version: Any
    random: bool = False


def error_bar(functional: Callable[[Any], Any], best: Any, alternates: Iterable[Alternate]) -> Any:
    """Error bar of a number, or an array of them, derived from a result.

    Parameters
    ----------
    functional : callable
        Takes a version of the result to a float or ndarray, always of the same shape.
    best : object
        The result itself.
    alternates : iterable of Alternate

    Returns
    -------
    float or ndarray
        sum over the alternates of weight |functional(version) - functional(best)|, the
        random ones among them added in squares; NaN where the number itself is not finite.

    Examples
    --------
    >>> error_bar(lambda x: x**2, 3.0, [Alternate("a step", 0.5, 3.5)])
    1.625
    """
    value = np.asarray(functional(best), dtype=float)
    bar, variance = np.zeros(value.shape), np.zeros(value.shape)
    with np.errstate(invalid="ignore"):
        for one in (Alternate(*entry) for entry in alternates):
            change = one.weight * np.abs(np.asarray(functional(one.version), dtype=float) - value)
            if one.random:
                variance = variance + change**2
            else:
                bar = bar + change
    bar = bar + np.sqrt(variance)
    out = np.where(np.isfinite(value), bar, np.nan)
    return float(out) if out.ndim == 0 else out
