"""Adaptive quadrature of many panels at once, for spectra that oscillate.

Each panel is a 12-point Gauss-Legendre rule; a panel is halved until the two halves agree
with it. Panels are laid out by the phase of the oscillation first, so that no rule ever
sees more than a quarter of a wave and its error estimate can be believed.

Examples
--------
>>> value, error = integrate(np.cos, np.linspace(0.0, np.pi / 2, 5))
>>> abs(value - 1.0) < 1e-14
True
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from materials.common.errors import NotConverged

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(12)
_MOST_PANELS = 400_000
_MOST_LEVELS = 40


def phase_nodes(
    phase: Callable[[np.ndarray], np.ndarray], low: float, high: float, step: float, cells: int = 64
) -> np.ndarray:
    """Points between two frequencies such that the phase moves by at most ``step`` between them.

    Parameters
    ----------
    phase : callable
        Phase in rad of an array of points; smooth on the scale of a cell.
    low, high : float
        Ends, both included.
    step : float, rad
    cells : int
        Even cells laid out first; each is then divided evenly.

    Returns
    -------
    ndarray, shape (n + 1,)

    Raises
    ------
    NotConverged
        When more than 400 000 intervals would be needed.
    """
    base = np.linspace(low, high, cells + 1)
    middle = 0.5 * (base[:-1] + base[1:])
    at_base, at_middle = phase(base), phase(middle)
    turned = np.abs(at_middle - at_base[:-1]) + np.abs(at_base[1:] - at_middle)
    turned = np.where(np.isfinite(turned), turned, 0.0)
    if turned.sum() / step > _MOST_PANELS:
        raise NotConverged(
            f"the spectrum turns by {turned.sum():.3g} rad over the band, more than can be "
            "resolved; shorten the channel or narrow the band"
        )
    parts = np.maximum(1, np.ceil(turned / step)).astype(int)
    pieces = [
        np.linspace(a, b, n, endpoint=False)
        for a, b, n in zip(base[:-1], base[1:], parts, strict=True)
    ]
    return np.concatenate([*pieces, [high]])


def integrate(
    function: Callable[[np.ndarray], np.ndarray], edges: np.ndarray, *, rtol: float = 1e-9
) -> tuple[float, float]:
    """Integral over the panels between ``edges``, and an estimate of its error.

    Parameters
    ----------
    function : callable
        Real values of an array of any shape, in one call a level.
    edges : ndarray, shape (n + 1,)
        First panels, rising.
    rtol : float
        Wanted error over the integral of the absolute value.

    Returns
    -------
    value, error : float
        NaN where the function is.

    Raises
    ------
    NotConverged
        When halving forty times does not reach it.
    """
    left, right = np.asarray(edges[:-1], float), np.asarray(edges[1:], float)
    total = error = size = 0.0
    whole = _panels(function, left, right)
    span = max(float(right[-1] - left[0]), 1e-300) if left.size else 1.0
    for _ in range(_MOST_LEVELS):
        if not left.size:
            return total, error
        middle = 0.5 * (left + right)
        first, second = _panels(function, left, middle), _panels(function, middle, right)
        change = np.abs(first + second - whole)
        scale = size + float(np.sum(np.abs(first) + np.abs(second)))
        share = (right - left) / span
        # a NaN compares false: such panels are closed, and the total says NaN
        split = change > rtol * scale * np.maximum(share, 1e-3)
        kept = ~split
        total += float(np.sum((first + second)[kept]))
        size += float(np.sum((np.abs(first) + np.abs(second))[kept]))
        error += float(np.sum(change[kept]))
        left = np.concatenate([left[split], middle[split]])
        right = np.concatenate([middle[split], right[split]])
        whole = np.concatenate([first[split], second[split]])
    raise NotConverged(
        f"the integral did not settle to {rtol:g}; is the spectrum discontinuous in the band?"
    )


def _panels(
    function: Callable[[np.ndarray], np.ndarray], left: np.ndarray, right: np.ndarray
) -> np.ndarray:
    half, middle = 0.5 * (right - left), 0.5 * (right + left)
    points = middle[:, None] + half[:, None] * _NODES
    return half * (function(points) @ _WEIGHTS)
