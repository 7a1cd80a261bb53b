"""Field of a mode over the whole cross-section, for figures and files."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from materials.common.results import FullResult, frozen_array, quantity
from modesolve.integrals import quarter_fields
from modesolve.jets import Jet
from modesolve.layout import Layout
from modesolve.operators import Boundary, Operators

__all__ = ["FieldMap", "field_map"]

#: Columns that sheared rows are interpolated to.
COLUMNS = 401


@dataclass(frozen=True, slots=True, eq=False, repr=False, kw_only=True)
class FieldMap(FullResult):
    """Electric field on cell centres, scaled so that the largest |E| is 1.

    In a lossless guide the transverse components are real and E_z is imaginary.
    """

    x_um: np.ndarray = quantity("x", "um", ("x_um",))
    y_um: np.ndarray = quantity("y", "um", ("y_um",))
    e_x: np.ndarray = quantity("Ex", "1", ("x_um", "y_um"))
    e_y: np.ndarray = quantity("Ey", "1", ("x_um", "y_um"))
    e_z: np.ndarray = quantity("Ez", "1", ("x_um", "y_um"))


def field_map(layout: Layout, operators: Operators, jet: Jet, boundary: Boundary) -> FieldMap:
    """Field of a mode on its finest grid, unfolded at the mirror plane."""
    f = quarter_fields(operators, jet)
    parts = (f.e_x[0], f.e_y[0], -1j * f.e_along[0])
    components = [np.mean(part, axis=(-2, -1)) for part in parts]
    x, y = (np.real(part) for part in operators.grid.centres())
    if layout.etched_wall is not None:
        components, x = _on_columns(components, x)
    x, y = x[:, 0], y[0, :]
    if layout.mirror:
        # an electric wall leaves the normal component even and the tangential ones odd
        even = 1.0 if boundary.left == "electric" else -1.0
        signs = (even, -even, -even)
        components = [
            np.concatenate([sign * part[::-1], part])
            for sign, part in zip(signs, components, strict=True)
        ]
        x = np.concatenate([-x[::-1], x])
    scale = np.sqrt(max(np.max(sum(np.abs(part) ** 2 for part in components)), 1e-300))
    e_x, e_y, e_z = (frozen_array(part / scale) for part in components)
    return FieldMap(x_um=frozen_array(x), y_um=frozen_array(y), e_x=e_x, e_y=e_y, e_z=e_z)


def _on_columns(components: list[np.ndarray], x: np.ndarray) -> tuple[list[np.ndarray], np.ndarray]:
    """Fields of sheared rows interpolated to one set of columns."""
    low, high = float(x.min(axis=0).max()), float(x.max(axis=0).min())
    columns = np.linspace(low, high, COLUMNS)
    out = []
    for part in components:
        rows = [np.interp(columns, x[:, j], part[:, j]) for j in range(x.shape[1])]
        out.append(np.stack(rows, axis=1))
    return out, np.broadcast_to(columns[:, None], out[0].shape)
