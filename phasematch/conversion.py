"""The conversion band of a channel: the peak next to the pump and where it has fallen."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np
from scipy.optimize import brentq, minimize_scalar

from materials.common.constants import TWO_PI, um_from_omega
from phasematch.curve_protocol import Curve, inside
from phasematch.quadrature import phase_nodes
from phasematch.reasons import GAMMA_UNKNOWN, OUTSIDE_BAND

#: Signal frequencies -> (efficiency in dB, phase kappa L/2 in rad).
Levels = Callable[[Any], tuple[np.ndarray, np.ndarray]]


@dataclass(frozen=True, slots=True)
class BandEdges:
    """Edges and peak in rad/ps; NaN where missing."""

    low: float
    high: float
    peak: float
    peak_db: float
    reason: str = ""
    notes: tuple[str, ...] = ()

    #: Fields of `ConversionBand` that `numbers` gives, in order.
    names: ClassVar[tuple[str, ...]] = (
        "peak_um",
        "peak_efficiency_db",
        "short_um",
        "long_um",
        "low_thz",
        "high_thz",
        "width_thz",
    )

    def numbers(self) -> np.ndarray:
        """The edges in um and THz, shape (7,), as ``names`` says."""
        low, high = self.low / TWO_PI, self.high / TWO_PI
        um = [um_from_omega(self.peak), um_from_omega(self.high), um_from_omega(self.low)]
        return np.array([um[0], self.peak_db, um[1], um[2], low, high, high - low])


def find_band(
    curve: Curve, pump_rad_per_ps: float, levels: Levels, drop_db: float, *, absolute: bool
) -> BandEdges:
    """The band about the peak that the efficiency climbs to from the pump.

    A lobe that is phase-matched far from the pump does not take its place, even where
    omega_i/omega_s makes it higher; a note tells of it.

    Parameters
    ----------
    curve : Curve
    pump_rad_per_ps : float
    levels : callable
    drop_db : float
        How far the efficiency has fallen at the edges, positive.
    absolute : bool
        False when ``levels`` is known up to a constant only (no power given).

    Returns
    -------
    BandEdges
    """
    nan = math.nan
    if not inside(curve, pump_rad_per_ps):
        return BandEdges(nan, nan, nan, nan, f"pump {OUTSIDE_BAND}")
    low, high = curve.band_rad_per_ps
    low, high = max(low, 2 * pump_rad_per_ps - high), min(high, 2 * pump_rad_per_ps - low)
    if not high > low:
        return BandEdges(nan, nan, nan, nan, f"every signal or idler {OUTSIDE_BAND}")
    points = phase_nodes(lambda w: levels(w)[1], low, high, math.pi / 16, cells=256)
    values = levels(points)[0]
    if not np.isfinite(values).any():
        return BandEdges(nan, nan, nan, nan, GAMMA_UNKNOWN)
    top = _climbed(values, int(np.argmin(np.abs(points - pump_rad_per_ps))))
    peak, peak_db = _refined(levels, points, values, top)
    level = peak_db - drop_db

    def above(signal: float) -> float:
        return float(levels(signal)[0]) - level

    under = np.flatnonzero(values < level)
    left, right = under[under < top], under[under > top]
    # brackets run from the last point above the level to the first below it
    first = _root(above, points[left[-1]], points[left[-1] + 1]) if left.size else nan
    last = _root(above, points[right[0] - 1], points[right[0]]) if right.size else nan
    missing = [s for s, edge in (("low", first), ("high", last)) if math.isnan(edge)]
    reason = ""
    if missing:
        reason = (
            f"{' and '.join(missing)} edge {OUTSIDE_BAND}: the efficiency falls by "
            f"less than {drop_db:g} dB there"
        )
    notes: list[str] = []
    if first > pump_rad_per_ps or last < pump_rad_per_ps:
        notes.append("the band lies beside the pump; the idlers fill its mirror image")
    highest = int(np.nanargmax(values))
    if values[highest] > peak_db + 0.01 and not first <= points[highest] <= last:
        notes.append(
            f"the efficiency is {values[highest] - peak_db:.2g} dB higher for signals about "
            f"{um_from_omega(points[highest]):.4g} um, outside this band"
        )
    return BandEdges(first, last, peak, peak_db if absolute else nan, reason, tuple(notes))


def sampled_band(
    axis: np.ndarray, levels_db: np.ndarray, start: int, drop_db: float
) -> tuple[float, float]:
    """The band of `find_band` from samples alone, such as one row of a map.

    Parameters
    ----------
    axis, levels_db : ndarray, shape (n,)
        Where the efficiency was computed, rising, and the efficiency in dB.
    start : int
        Index of the sample next to the pump.
    drop_db : float

    Returns
    -------
    low, high : float
        On the axis, interpolated between samples; NaN for an end that is not among them.

    Examples
    --------
    >>> x = np.linspace(-2.0, 2.0, 5)
    >>> sampled_band(x, -3.0 * np.abs(x), 2, 4.5)
    (-1.5, 1.5)
    """
    values = np.where(np.isnan(levels_db), -np.inf, levels_db)
    top = _climbed(values, start)
    level = values[top] - drop_db
    under = np.flatnonzero(values < level)
    left, right = under[under < top], under[under > top]

    def crossing(out: int, within: int) -> float:
        if not np.isfinite(values[[out, within]]).all():
            return math.nan
        share = (level - values[out]) / (values[within] - values[out])
        return float(axis[out] + share * (axis[within] - axis[out]))

    low = crossing(left[-1], left[-1] + 1) if left.size else math.nan
    high = crossing(right[0], right[0] - 1) if right.size else math.nan
    return low, high


def _climbed(values: np.ndarray, start: int) -> int:
    """Index of the maximum reached uphill from ``start``."""
    here = start
    while True:
        around = range(max(0, here - 1), min(len(values), here + 2))
        best = max(around, key=lambda i: values[i])
        if not values[best] > values[here]:
            return here
        here = best


def _refined(levels: Levels, points: np.ndarray, values: np.ndarray, top: int) -> Any:
    """The peak between the neighbours of the highest sample."""
    if top in (0, len(points) - 1):
        return float(points[top]), float(values[top])
    found = minimize_scalar(
        lambda w: -float(levels(w)[0]),
        bounds=(points[top - 1], points[top + 1]),
        method="bounded",
        options={"xatol": 1e-9 * (points[top + 1] - points[top - 1])},
    )
    if -found.fun > values[top]:
        return float(found.x), float(-found.fun)
    return float(points[top]), float(values[top])


def _root(function: Callable[[float], float], a: float, b: float) -> float:
    fa, fb = function(a), function(b)
    if fa == 0.0 or fb == 0.0:
        return float(a if fa == 0.0 else b)
    return float(brentq(function, a, b, xtol=1e-15 * b, rtol=8.9e-16))
