"""A medium of one index at every wavelength, and the values that a user states himself."""

from __future__ import annotations

import math
from typing import Any

from materials.common.errors import InputError, OutOfRange
from materials.medium import Medium

_BY_USER = "given by the user"


def constant(
    index: float,
    *,
    name: str = "constant index",
    n2_m2_per_w: float | None = None,
    dn_dt_per_k: float | None = None,
) -> Medium:
    """Non-dispersive medium.

    Parameters
    ----------
    index : float
        Refractive index, 1 to 10.
    name : str
        Also its key.
    n2_m2_per_w : float, optional
        Kerr index, m2/W.
    dn_dt_per_k : float, optional
        Slope of the index with temperature, 1/K; the index is taken to hold at 20 degC.

    Returns
    -------
    Medium

    Raises
    ------
    OutOfRange
        The index is not between 1 and 10.
    InputError
        A value is not a finite number.

    Examples
    --------
    >>> constant(1.9963, name="core").index(1.55)
    1.9963
    """
    value = _finite(index, "index")
    if not 1.0 <= value <= 10.0:
        raise OutOfRange(f"index {value:g} of {name}: give a value from 1 to 10")
    return Medium(
        key=name,
        name=name,
        form="given index",
        formula="constant",
        coefficients=(value,),
        citation=_BY_USER,
        caveats=("non-dispersive",),
        **stated_values(n2_m2_per_w, dn_dt_per_k),
    )


def stated_values(n2_m2_per_w: float | None, dn_dt_per_k: float | None) -> dict[str, Any]:
    """Fields of a Medium for the coefficients that its user states or leaves out."""
    fields: dict[str, Any] = {}
    missing = []
    for field, what, value in (
        ("n2_m2_per_w", "n2", n2_m2_per_w),
        ("dn_dt_per_k", "dn/dT", dn_dt_per_k),
    ):
        if value is None:
            missing.append(what)
        else:
            fields[field] = _finite(value, field)
            citation = "n2_citation" if what == "n2" else "dn_dt_citation"
            fields[citation] = _BY_USER
    return {**fields, "missing": (*missing, "two-photon absorption")}


def _finite(value: float, what: str) -> float:
    try:
        number = float(value)
    except (TypeError, ValueError) as exc:
        raise InputError(f"{what} {value!r}: give a number") from exc
    if not math.isfinite(number):
        raise InputError(f"{what} {number}: give a finite number")
    return number
