"""Incidence and mass matrices on the logical grid.

Unknowns are the circulations of E along grid edges. Four matrices of entries +-1 and 0
carry the topology and four mass matrices carry metric and media; each mass matrix is
added up from quarter cells, so it is symmetric by construction and no medium is ever
averaged across a wall::

    [k0^2 Me - C^T Mmu^-1 C - Mn G Mz^-1 G^T Me] e = beta^2 Mn e

G takes nodes to edges (gradient), C edges to cells (curl); Me holds epsilon on edges,
Mz on nodes, Mn is the edge mass of the inverse permeability and Mmu the cell mass of
the permeability. A medium epsilon enters as h det(J) J^-1 eps J^-T across and as
det(J)/h eps_zz along the guide.

References
----------
A. J. Ward and J. B. Pendry, J. Mod. Opt. 43, 773 (1996): media under a change of
coordinates. K. S. Yee, IEEE Trans. Antennas Propag. 14, 302 (1966): the staggered grid.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import scipy.sparse as sp

from modesolve.grid import Grid, Metric

__all__ = ["Boundary", "MediumMass", "Operators", "Topology", "topology_of"]

#: A quarter cell's share of the logical unit cell.
QUARTER = 0.25


@dataclass(frozen=True, slots=True)
class Boundary:
    """Boundary condition on each side of the box.

    "electric": tangential E vanishes; "magnetic": tangential H vanishes.
    """

    left: str = "electric"
    right: str = "electric"
    bottom: str = "electric"
    top: str = "electric"


class Topology:
    """Numbering and incidence of a grid with a given boundary.

    Edges along u come first, then edges along v; edges and nodes lying in an electric
    wall carry no unknown and are left out.

    Attributes
    ----------
    edge_u, edge_v, node : ndarray of int
        Number of each edge and node, -1 where there is no unknown. Shapes
        (n_u, n_v + 1), (n_u + 1, n_v), (n_u + 1, n_v + 1).
    gradient : sparse, shape (edges, nodes)
    curl : sparse, shape (cells, edges)
    """

    def __init__(self, shape: tuple[int, int], boundary: Boundary) -> None:
        n_u, n_v = shape
        keep_u = np.ones((n_u, n_v + 1), dtype=bool)
        keep_v = np.ones((n_u + 1, n_v), dtype=bool)
        keep_node = np.ones((n_u + 1, n_v + 1), dtype=bool)
        for side, index in (("bottom", 0), ("top", -1)):
            if getattr(boundary, side) == "electric":
                keep_u[:, index] = False
                keep_node[:, index] = False
        for side, index in (("left", 0), ("right", -1)):
            if getattr(boundary, side) == "electric":
                keep_v[index, :] = False
                keep_node[index, :] = False
        self.shape = shape
        self.boundary = boundary
        self.edge_u = _number(keep_u, 0)
        self.edge_v = _number(keep_v, int(keep_u.sum()))
        self.node = _number(keep_node, 0)
        self.edges = int(keep_u.sum() + keep_v.sum())
        self.nodes = int(keep_node.sum())
        self.gradient = self._gradient()
        self.curl = self._curl()

    def _gradient(self) -> sp.csr_array:
        node = self.node
        pairs = [
            (self.edge_u, node[1:, :], 1.0),
            (self.edge_u, node[:-1, :], -1.0),
            (self.edge_v, node[:, 1:], 1.0),
            (self.edge_v, node[:, :-1], -1.0),
        ]
        return _incidence(pairs, (self.edges, self.nodes))

    def _curl(self) -> sp.csr_array:
        n_u, n_v = self.shape
        cell = np.arange(n_u * n_v).reshape(n_u, n_v)
        pairs = [
            (cell, self.edge_u[:, :-1], 1.0),
            (cell, self.edge_u[:, 1:], -1.0),
            (cell, self.edge_v[1:, :], 1.0),
            (cell, self.edge_v[:-1, :], -1.0),
        ]
        return _incidence(pairs, (n_u * n_v, self.edges))

    def edge_positions(self) -> np.ndarray:
        """Logical coordinates of the edge midpoints, shape (edges, 2)."""
        n_u, n_v = self.shape
        out = np.empty((self.edges, 2))
        for number, u, v in (
            (self.edge_u, np.arange(n_u)[:, None] + 0.5, np.arange(n_v + 1)[None, :]),
            (self.edge_v, np.arange(n_u + 1)[:, None], np.arange(n_v)[None, :] + 0.5),
        ):
            u, v = np.broadcast_arrays(u, v)
            keep = number >= 0
            out[number[keep], 0] = u[keep]
            out[number[keep], 1] = v[keep]
        return out

    def to_quarters(self, edges: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Edge values seen by each quarter cell: two arrays (..., n_u, n_v, 2, 2)."""
        u = _padded(edges, self.edge_u)
        v = _padded(edges, self.edge_v)
        in_u = np.stack([u[..., :-1], u[..., 1:]], axis=-1)[..., None, :]
        in_v = np.stack([v[..., :-1, :], v[..., 1:, :]], axis=-1)[..., :, None]
        return np.broadcast_arrays(in_u, in_v)[0], np.broadcast_arrays(in_u, in_v)[1]

    def nodes_to_quarters(self, nodes: np.ndarray) -> np.ndarray:
        """Node values seen by each quarter cell, shape (..., n_u, n_v, 2, 2)."""
        full = _padded(nodes, self.node)
        low = np.stack([full[..., :-1, :-1], full[..., :-1, 1:]], axis=-1)
        high = np.stack([full[..., 1:, :-1], full[..., 1:, 1:]], axis=-1)
        return np.stack([low, high], axis=-2)


@lru_cache(maxsize=32)
def topology_of(shape: tuple[int, int], boundary: Boundary) -> Topology:
    """The topology of a grid; the same for every geometry and frequency, so made once."""
    return Topology(shape, boundary)


def _number(keep: np.ndarray, first: int) -> np.ndarray:
    out = np.full(keep.shape, -1)
    out[keep] = first + np.arange(int(keep.sum()))
    return out


def _incidence(pairs: list, shape: tuple[int, int]) -> sp.csr_array:
    rows, columns, values = [], [], []
    for row, column, value in pairs:
        keep = (row >= 0) & (column >= 0)
        rows.append(row[keep])
        columns.append(column[keep])
        values.append(np.full(int(keep.sum()), value))
    entries = (np.concatenate(values), (np.concatenate(rows), np.concatenate(columns)))
    return sp.csr_array(sp.coo_array(entries, shape=shape))


def _padded(values: np.ndarray, number: np.ndarray) -> np.ndarray:
    """Spread unknowns over the full grid; zero where a wall took the unknown away."""
    padded = np.concatenate([values, np.zeros((*values.shape[:-1], 1), values.dtype)], axis=-1)
    return padded[..., number]


def _to_edges_u(quarters: np.ndarray) -> np.ndarray:
    """Add quarter cells up on u-edges, (n_u, n_v, 2, 2) -> (n_u, n_v + 1)."""
    n_u, n_v = quarters.shape[:2]
    out = np.zeros((n_u, n_v + 1), quarters.dtype)
    both = quarters.sum(axis=2)
    out[:, :-1] += both[..., 0]
    out[:, 1:] += both[..., 1]
    return out


def _to_edges_v(quarters: np.ndarray) -> np.ndarray:
    """Add quarter cells up on v-edges, (n_u, n_v, 2, 2) -> (n_u + 1, n_v)."""
    n_u, n_v = quarters.shape[:2]
    out = np.zeros((n_u + 1, n_v), quarters.dtype)
    both = quarters.sum(axis=3)
    out[:-1, :] += both[..., 0]
    out[1:, :] += both[..., 1]
    return out


def _to_nodes(quarters: np.ndarray) -> np.ndarray:
    """Add quarter cells up on nodes, (n_u, n_v, 2, 2) -> (n_u + 1, n_v + 1)."""
    n_u, n_v = quarters.shape[:2]
    out = np.zeros((n_u + 1, n_v + 1), quarters.dtype)
    for a in (0, 1):
        for b in (0, 1):
            out[a : n_u + a, b : n_v + b] += quarters[:, :, a, b]
    return out


def edge_mass(topology: Topology, uu: np.ndarray, vv: np.ndarray, uv: np.ndarray) -> sp.csr_array:
    """Symmetric edge mass from a 2 x 2 tensor in quarter cells (already weighted)."""
    diagonal = np.zeros(topology.edges, np.result_type(uu, vv, uv))
    for number, full in ((topology.edge_u, _to_edges_u(uu)), (topology.edge_v, _to_edges_v(vv))):
        keep = number >= 0
        diagonal[number[keep]] = full[keep]
    matrix = sp.csr_array(sp.dia_array((diagonal[None, :], [0]), shape=(topology.edges,) * 2))
    if not np.any(uv):
        return matrix
    rows, columns, values = [], [], []
    n_u, n_v = topology.shape
    for a in (0, 1):
        for b in (0, 1):
            row = topology.edge_u[:, b : n_v + b]
            column = topology.edge_v[a : n_u + a, :]
            keep = (row >= 0) & (column >= 0)
            rows.append(row[keep])
            columns.append(column[keep])
            values.append(uv[:, :, a, b][keep])
    entries = (np.concatenate(values), (np.concatenate(rows), np.concatenate(columns)))
    coupling = sp.csr_array(sp.coo_array(entries, shape=matrix.shape))
    return sp.csr_array(matrix + coupling + coupling.T)


def node_mass(topology: Topology, zz: np.ndarray) -> np.ndarray:
    """Diagonal node mass from quarter cells (already weighted), shape (nodes,)."""
    full = _to_nodes(zz)
    return full[topology.node >= 0]


@dataclass(frozen=True, slots=True, eq=False)
class MediumMass:
    """Masses of one medium at unit permittivity.

    Attributes
    ----------
    inside : ndarray of bool, shape (n_u, n_v)
        The cells the medium fills.
    across : sparse, shape (edges, edges)
        Share of Me.
    along : ndarray, shape (nodes,)
        Share of the diagonal Mz.
    """

    inside: np.ndarray
    across: sp.csr_array
    along: np.ndarray


class Operators:
    """The matrices of one grid: free of frequency, which enters through the permittivities.

    Parameters
    ----------
    grid : Grid
    boundary : Boundary
    medium_of_cell : ndarray of int, shape (n_u, n_v)
        Index of the medium filling each cell, 0 .. media - 1.
    media : int
        Number of media.
    """

    def __init__(
        self, grid: Grid, boundary: Boundary, medium_of_cell: np.ndarray, media: int
    ) -> None:
        self.grid = grid
        self.topology = topology_of(grid.shape, boundary)
        metric = grid.metric
        self.medium_of_cell = medium_of_cell
        uu, vv, uv = _isotropic_across(metric)
        arc, det = metric.arc, metric.det
        self.media = tuple(
            self._medium_mass(medium_of_cell == m, uu * arc, vv * arc, uv * arc, det / arc)
            for m in range(media)
        )
        self.inverse_mu = edge_mass(
            self.topology, QUARTER * uu / arc, QUARTER * vv / arc, QUARTER * uv / arc
        )
        cells = (QUARTER * det / arc).sum(axis=(2, 3)).ravel()
        self.inverse_cell_mass = 1.0 / cells
        scaled = sp.csr_array(self.topology.curl.multiply(self.inverse_cell_mass[:, None]))
        self.curl_curl = sp.csr_array(self.topology.curl.T @ scaled)

    def _medium_mass(
        self, inside: np.ndarray, uu: np.ndarray, vv: np.ndarray, uv: np.ndarray, zz: np.ndarray
    ) -> MediumMass:
        weight = QUARTER * inside[:, :, None, None]
        across = edge_mass(self.topology, weight * uu, weight * vv, weight * uv)
        return MediumMass(inside, across, node_mass(self.topology, weight * zz))

    def transverse(self, circulations: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """x and y components in the quarter cells from circulations: E = J^-T E_covariant."""
        u_x, u_y, v_x, v_y = self.grid.metric.inverse
        along_u, along_v = self.topology.to_quarters(circulations)
        return u_x * along_u + v_x * along_v, u_y * along_u + v_y * along_v

    def masses(self, permittivity: np.ndarray) -> tuple[sp.csr_array, np.ndarray]:
        """Me and the diagonal of Mz for one permittivity a medium."""
        pairs = list(zip(permittivity, self.media, strict=True))
        across = sp.csr_array(sum(value * medium.across for value, medium in pairs))
        return across, np.sum([value * medium.along for value, medium in pairs], axis=0)

    def pencil(self, k0: float, across: sp.csr_array, along: np.ndarray) -> sp.csr_array:
        """A(omega) = k0^2 Me - C^T Mmu^-1 C - Mn G Mz^-1 G^T Me.

        Parameters
        ----------
        k0 : float, rad/um
        across, along : sparse and ndarray
            Me and the diagonal of Mz.
        """
        gradient = self.topology.gradient
        scaled = sp.csr_array(gradient.multiply((1.0 / along)[None, :]))
        longitudinal = self.inverse_mu @ (scaled @ (gradient.T @ across))
        return sp.csr_array(k0**2 * across - self.curl_curl - longitudinal)


def _isotropic_across(metric: Metric) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """det(J) J^-1 J^-T, the transverse tensor of a unit isotropic medium."""
    u_x, u_y, v_x, v_y = metric.inverse
    det = metric.det
    return det * (u_x**2 + u_y**2), det * (v_x**2 + v_y**2), det * (u_x * v_x + u_y * v_y)
