"""The coordinate map: one logical tensor grid for every cross-section.

A cross-section is laid out on two axes. Each axis is a chain of segments between
walls (flat material interfaces); inside a segment one analytic function takes the
logical coordinate to the physical one and gathers the grid lines algebraically at the
walls, where fields are singular at corners. The grid lines therefore always lie on the
walls and nothing is ever averaged across one.

Everything the solver knows of the geometry is where a ``CoordinateMap`` puts the nodes
and its arc-length factor. Here the map is a product of two axes; sloped walls and bends
are other maps with the same methods.

Examples
--------
>>> across = Axis((0.0, 0.8), low="mirror", high="open")
>>> up = Axis((0.0, 0.8), low="open", high="open")
>>> grid = Grid.build(across, up, Margins(right=2.0, bottom=2.0, top=2.0), refinement=2)
>>> grid.shape                      # cells along u and v
(16, 32)
"""

from __future__ import annotations

from dataclasses import dataclass, field
from itertools import pairwise
from typing import Literal, Protocol

import numpy as np
from scipy.special import betainc

__all__ = ["EVEN", "Axis", "CoordinateMap", "Grading", "Grid", "Margins", "Metric", "ProductMap"]

End = Literal["wall", "mirror", "open"]
Kind = Literal["inner", "from_mirror", "outer_low", "outer_high"]


@dataclass(frozen=True, slots=True)
class Grading:
    """How grid lines gather at walls.

    ``between`` is q of the regularised incomplete beta function I_s(q, q) between two
    walls; outwards a segment runs as (1 - far_share) s^outwards + far_share s^6.
    ``cells`` is the number of cells of a segment a unit of refinement: a full segment
    between two walls has twice as many as a half one or an outer one.
    """

    between: float = 3.5
    outwards: float = 3.5
    far_share: float = 0.4
    cells: int = 4


#: Equal cells, for closed boxes and comparisons.
EVEN = Grading(between=1.0, outwards=1.0, far_share=0.0)


@dataclass(frozen=True, slots=True)
class Margins:
    """Thickness of the outer segments, um: how far the box reaches beyond the last walls."""

    left: float = 0.0
    right: float = 0.0
    bottom: float = 0.0
    top: float = 0.0


@dataclass(frozen=True, slots=True)
class Axis:
    """A chain of segments along one direction.

    Parameters
    ----------
    walls : tuple of float, um
        Positions of the walls, rising. With ``low="mirror"`` the first one is the
        mirror plane.
    low, high : {"wall", "mirror", "open"}
        What lies at the ends: a wall of the box, a mirror plane (no grading towards
        it), or an outer segment as thick as the margin.
    uniform : bool
        One cell from the first wall to the last whatever the refinement: nothing
        varies along this axis.
    """

    walls: tuple[float, ...]
    low: End = "open"
    high: End = "open"
    uniform: bool = False
    grading: Grading = field(default_factory=Grading)

    @property
    def segment_count(self) -> int:
        """Number of segments, outer ones included."""
        return len(self.walls) - 1 + (self.low == "open") + (self.high == "open")

    def segments(self, low_margin: float, high_margin: float, refinement: int) -> list[Segment]:
        """The segments from low to high, with their cell counts."""
        grading = self.grading
        out: list[Segment] = []
        if self.low == "open":
            outer = grading.cells * refinement
            out.append(Segment("outer_low", self.walls[0], -low_margin, outer, grading))
        for i, (a, b) in enumerate(pairwise(self.walls)):
            mirrored = i == 0 and self.low == "mirror"
            cells = (grading.cells if mirrored else 2 * grading.cells) * refinement
            kind: Kind = "from_mirror" if mirrored else "inner"
            out.append(Segment(kind, a, b - a, 1 if self.uniform else cells, grading))
        if self.high == "open":
            outer = grading.cells * refinement
            out.append(Segment("outer_high", self.walls[-1], high_margin, outer, grading))
        return out


@dataclass(frozen=True, slots=True)
class Segment:
    """One analytic piece of an axis: the position as a function of s in 0..1."""

    kind: Kind
    start: float
    length: float
    cells: int
    grading: Grading

    def position(self, s: np.ndarray) -> np.ndarray:
        """Physical coordinate, um; ``start`` is the segment's wall, s = 0 its low end."""
        q = self.grading.between
        if self.kind == "inner":
            return self.start + self.length * betainc(q, q, s)
        if self.kind == "from_mirror":
            return self.start + self.length * (2.0 * betainc(q, q, 0.5 * (1.0 + s)) - 1.0)
        t = 1.0 - s if self.kind == "outer_low" else s
        p, a = self.grading.outwards, self.grading.far_share
        return self.start + self.length * ((1.0 - a) * t**p + a * t**6)


class CoordinateMap(Protocol):
    """A map from the logical grid to the cross-section; one cell is a unit square."""

    shape: tuple[int, int]

    def position(self, u: np.ndarray, v: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """x and y in um at logical points; ``u`` and ``v`` broadcast."""
        ...

    def arc(self, x: np.ndarray) -> np.ndarray:
        """Arc-length factor h at ``x``: 1 in a straight guide, 1 + x/R in a bend."""
        ...


class ProductMap:
    """x a function of u alone, y of v alone: vertical walls, straight guide.

    Parameters
    ----------
    along_u, along_v : list of Segment
        Chains of segments along the two logical axes.
    """

    def __init__(self, along_u: list[Segment], along_v: list[Segment]) -> None:
        self._along_u = along_u
        self._along_v = along_v
        self.shape = (sum(s.cells for s in along_u), sum(s.cells for s in along_v))

    def position(self, u: np.ndarray, v: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """x and y in um at logical points; ``u`` and ``v`` broadcast."""
        x = _follow(self._along_u, np.asarray(u, dtype=float))
        y = _follow(self._along_v, np.asarray(v, dtype=float))
        x, y = np.broadcast_arrays(x, y)
        return x, y

    def arc(self, x: np.ndarray) -> np.ndarray:
        """1: the guide is straight."""
        return np.ones_like(x)


def _follow(segments: list[Segment], u: np.ndarray) -> np.ndarray:
    """Position along a chain at logical coordinates ``u`` (cells count from 0)."""
    position = np.empty_like(u)
    first = 0
    for i, segment in enumerate(segments):
        last = first + segment.cells
        inside = (u >= first) & ((u < last) if i + 1 < len(segments) else (u <= last))
        position[inside] = segment.position((u[inside] - first) / segment.cells)
        first = last
    return position


@dataclass(frozen=True, slots=True, eq=False)
class Metric:
    """Jacobian and arc-length factor in every quarter cell, shape (n_u, n_v, 2, 2).

    A quarter takes its Jacobian from the two whole edges it touches, that is from node
    positions alone. Measured on graded grids, this keeps the error a clean series in the
    square of the cell size; the analytic slope of the map at the quarter's centre does
    not, since a power law of the distance to a wall is then integrated wrongly in the
    first cell.
    """

    x_u: np.ndarray
    x_v: np.ndarray
    y_u: np.ndarray
    y_v: np.ndarray
    arc: np.ndarray

    @property
    def det(self) -> np.ndarray:
        """Determinant of the Jacobian: physical area a unit of logical area, um^2."""
        return self.x_u * self.y_v - self.x_v * self.y_u

    @property
    def inverse(self) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
        """(u_x, u_y, v_x, v_y), the inverse Jacobian, 1/um."""
        det = self.det
        return self.y_v / det, -self.x_v / det, -self.y_u / det, self.x_u / det


@dataclass(frozen=True, slots=True, eq=False)
class Grid:
    """A logical grid with the metric in every quarter cell.

    A quarter cell belongs to a node, to half of each adjoining edge and to one cell;
    quarter (a, b) of cell (i, j) touches node (i + a, j + b), the u-edge (i, j + b)
    and the v-edge (i + a, j).

    Attributes
    ----------
    shape : tuple of int
        Cells along u and v.
    segment_u, segment_v : ndarray of int, shape (n_u,), (n_v,)
        The segment of each axis that a column (row) of cells lies in.
    x, y : ndarray, shape (n_u + 1, n_v + 1), um
        Positions of the nodes.
    metric : Metric, arrays of shape (n_u, n_v, 2, 2)
    """

    map: CoordinateMap
    shape: tuple[int, int]
    segment_u: np.ndarray
    segment_v: np.ndarray
    x: np.ndarray
    y: np.ndarray
    metric: Metric

    @classmethod
    def build(cls, across: Axis, up: Axis, margins: Margins, refinement: int) -> Grid:
        """Lay a product grid over two axes; ``refinement`` multiplies the cells."""
        along_u = across.segments(margins.left, margins.right, refinement)
        along_v = up.segments(margins.bottom, margins.top, refinement)
        return cls.on(ProductMap(along_u, along_v), _labels(along_u), _labels(along_v))

    @classmethod
    def on(cls, chart: CoordinateMap, segment_u: np.ndarray, segment_v: np.ndarray) -> Grid:
        """The grid that a map lays, with the segment of each column and row of cells."""
        n_u, n_v = chart.shape
        x, y = chart.position(np.arange(n_u + 1.0)[:, None], np.arange(n_v + 1.0)[None, :])
        arc = chart.arc(_cell_means(x))[:, :, None, None]
        metric = Metric(*_increments(x), *_increments(y), np.broadcast_to(arc, (n_u, n_v, 2, 2)))
        return cls(chart, (n_u, n_v), segment_u, segment_v, x, y, metric)

    def centres(self) -> tuple[np.ndarray, np.ndarray]:
        """Positions of the cell centres, each of shape (n_u, n_v), um."""
        return _cell_means(self.x), _cell_means(self.y)


def _cell_means(nodes: np.ndarray) -> np.ndarray:
    """Mean of each cell's four corners."""
    return 0.25 * (nodes[1:, 1:] + nodes[1:, :-1] + nodes[:-1, 1:] + nodes[:-1, :-1])


def _increments(position: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Increments of a node quantity along the u- and the v-edge each quarter touches."""
    n_u, n_v = position.shape[0] - 1, position.shape[1] - 1
    along_u = np.diff(position, axis=0)
    along_v = np.diff(position, axis=1)
    of_u = np.stack([along_u[:, :-1], along_u[:, 1:]], axis=-1)[:, :, None, :]
    of_v = np.stack([along_v[:-1, :], along_v[1:, :]], axis=-1)[:, :, :, None]
    shape = (n_u, n_v, 2, 2)
    return np.broadcast_to(of_u, shape), np.broadcast_to(of_v, shape)


def _labels(segments: list[Segment]) -> np.ndarray:
    return np.repeat(np.arange(len(segments)), [s.cells for s in segments])
