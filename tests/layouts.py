"""Slabs and closed boxes as layouts of the solver, for the closed-form checks."""

from __future__ import annotations

import numpy as np

from materials.medium import Medium
from modesolve.layout import SLAB_WIDTH_UM, Layout
from modesolve.maps import EVEN, Axis, Grading
from modesolve.operators import Boundary


def unique(*media: Medium) -> tuple[tuple[Medium, ...], list[int]]:
    """The media once each, and the number of every one given."""
    found: dict[int, int] = {}
    numbers = [found.setdefault(id(m), len(found)) for m in media]
    return tuple({id(m): m for m in media}.values()), numbers


def slab(film: Medium, below: Medium, above: Medium, thickness_um: float, kind: str) -> Layout:
    """An infinitely wide film; ``kind`` "TE" (E along x) or "TM" (H along x)."""
    media, (core, low, high) = unique(film, below, above)
    wall = "electric" if kind == "TE" else "magnetic"
    return Layout(
        across=Axis((0.0, SLAB_WIDTH_UM), "wall", "wall", uniform=True, grading=EVEN),
        up=Axis((0.0, thickness_um)),
        media=media,
        fill=((low, core, high),),
        core=core,
        boundary=Boundary(left=wall, right=wall),
    )


def bent_slab(
    inside: Medium, film: Medium, outside: Medium, thickness_um: float, rim_um: float, kind: str
) -> Layout:
    """A film bent about an axis; ``rim_um`` is the radius of its outer face."""
    media, (low, core, high) = unique(inside, film, outside)
    wall = "electric" if kind == "TE" else "magnetic"
    return Layout(
        across=Axis((-0.5 * thickness_um, 0.5 * thickness_um)),
        up=Axis((0.0, SLAB_WIDTH_UM), "wall", "wall", uniform=True, grading=EVEN),
        media=media,
        fill=((low,), (core,), (high,)),
        core=core,
        boundary=Boundary(bottom=wall, top=wall),
        bend_radius_um=rim_um - 0.5 * thickness_um,
    )


def box(lower: Medium, upper: Medium, a: float, b: float, d: float, grading: Grading) -> Layout:
    """A perfectly conducting box a x b filled with ``lower`` up to height d."""
    return Layout(
        across=Axis((0.0, a), "wall", "wall", grading=grading),
        up=Axis((0.0, d, b), "wall", "wall", grading=grading),
        media=(lower, upper),
        fill=((0, 1),),
        core=0,
    )


def observed_orders(refinements: tuple[int, ...], errors: np.ndarray) -> np.ndarray:
    """Orders of convergence between neighbouring grids."""
    m = np.array(refinements, dtype=float)
    return -np.diff(np.log(np.abs(errors))) / np.diff(np.log(m))
