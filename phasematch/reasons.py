"""Why a number is missing, and which missing numbers make a run one with failed points.

The solved band is the user's choice: what lies outside it has no value by design, and no
verb counts it, but for the pairs of a ring that are listed one by one (``outside_counts`` of
a result): they were asked for. Every other missing value counts, whatever the verb: a mode
that is not guided at some width, an efficiency without n2, a ring at its threshold of
oscillation. A whole column that no medium has the data for (gamma in a list of modes) is no
such point; a note tells of it.

Examples
--------
>>> from types import SimpleNamespace
>>> count_failed([SimpleNamespace(reason=["", OUTSIDE_BAND, "gamma not known"])])
1
"""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

import numpy as np

#: Stands in the reason of every number that lies outside the solved band.
OUTSIDE_BAND = "outside the solved band"

GAMMA_UNKNOWN = "gamma not known"


def outside_or_good(good: np.ndarray) -> np.ndarray:
    """Reasons of points that are in the band or not: "" where ``good``."""
    return np.where(good, "", OUTSIDE_BAND)


def count_failed(results: Iterable[Any]) -> int:
    """Points of results without a value that count as failed, see above.

    Results that have no field ``reason`` have no such points.
    """
    return sum(_failed(result) for result in results)


def _failed(result: Any) -> int:
    all_count = getattr(result, "outside_counts", False)
    reasons = np.ravel(getattr(result, "reason", "")).tolist()
    return sum(bool(why) and (all_count or OUTSIDE_BAND not in why) for why in reasons)
