"""The logical grid laid over a cross-section by a coordinate map.

Grading, core width and height, sloped walls and (later) bends are all in the map; here
its node positions become a Jacobian in every quarter cell.

Examples
--------
>>> from modesolve.maps import Axis, Box, ProductMap
>>> across = Axis((0.0, 0.8), low="mirror", high="open")
>>> up = Axis((0.0, 0.8), low="open", high="open")
>>> grid = Grid.build(across, up, Box(right=2.0, bottom=2.0, top=2.0), refinement=2)
>>> grid.shape                      # cells along u and v
(16, 32)
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from modesolve.maps import Axis, Box, CoordinateMap, ProductMap, Segment

__all__ = ["Grid", "Metric"]


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
    def build(
        cls,
        across: Axis,
        up: Axis,
        box: Box,
        refinement: int,
        shape: Callable[[ProductMap], CoordinateMap] | None = None,
        finer: tuple[tuple[int, ...], tuple[int, ...]] = ((), ()),
    ) -> Grid:
        """Lay a grid over two axes.

        Parameters
        ----------
        across, up : Axis
        box : Box
        refinement : int
            Multiplies the cells of every segment.
        shape : callable, optional
            Takes the plain product map to the one wanted (sloped walls, a bend).
        finer : pair of tuple of int
            Factors for the cells of the inner segments across and up; `Axis.finer`.
        """
        turn = box.turn
        along_u = across.segments(box.left, box.right, refinement, turn, finer[0])
        along_v = up.segments(box.bottom, box.top, refinement, turn, finer[1])
        chart: CoordinateMap = ProductMap(along_u, along_v)
        if shape is not None:
            chart = shape(ProductMap(along_u, along_v))
        return cls.on(chart, _labels(along_u), _labels(along_v))

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
