"""The caution that goes with every pump power that is stated."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from materials.common.files import flatten

LASER_CAUTION = (
    "Caution: pump powers here are those of class 3B and 4 infrared lasers, invisible to the "
    "eye. Follow IEC 60825-1 and the local laser safety rules, and defer to the laser safety "
    "officer."
)


def states_power(inputs: Mapping[str, Any]) -> bool:
    """Whether inputs, nested or not, state a pump power (0 states none).

    Examples
    --------
    >>> states_power({"design": {"channel": {"pump_w": 0.1}}}), states_power({"pump_w": 0.0})
    (True, False)
    """
    return any(
        name.rpartition(".")[2] == "pump_w" and bool(value)
        for name, value in flatten(inputs).items()
    )
