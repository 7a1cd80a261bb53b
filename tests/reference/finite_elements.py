r"""Full-vector finite elements for guides made of rectangles: outside check of the mode solver.

It shares nothing with the package under test: other unknowns, other mesh, other matrices; the
elements' numbering, quadrature, nodal functions and meshes come from scikit-fem.

Formulation. With the field e(x, y) exp(i beta z), write e_z = i beta phi. Then
curl E = z curl_t e_t + i beta z x (e_t - grad phi), and curl curl E = k0^2 eps E, tested with
(f, i beta psi), reads for every f in H(curl), psi in H1

    (curl_t e, curl_t f) + beta^2 (e - grad phi, f - grad psi)
        = k0^2 (eps e, f) + beta^2 k0^2 (eps phi, psi)

or K x = lambda N x for x = (e, phi), lambda = beta^2, both matrices symmetric:

    K = [ k0^2 T - S   0 ]      N = [  M        -G            ]
        [ 0            0 ]          [ -G^T   L - k0^2 Z       ]

with S = (curl, curl), M = (e, f), T = (eps e, f), G = (grad phi, f), L = (grad phi, grad psi),
Z = (eps phi, psi). The second row makes x^T N x = (e, e - grad phi), which is the power times
k0/beta. Edge functions are Nedelec's of the first kind, order p on rectangles, the nodal ones
are of degree p, so that grad psi is an edge function and no spurious mode arises.

Meshes are tensor grids with lines on all interfaces, refined geometrically towards those where a
corner makes the field singular; unknowns inside an element are eliminated element by element,
the rest is ordered by nested dissection and factorised by SuperLU.

References
----------
J.-F. Lee, D.-K. Sun, Z. J. Cendes, IEEE Trans. Microwave Theory Tech. 39, 1262 (1991).
J. C. Nedelec, Numer. Math. 35, 315 (1980).
"""

from __future__ import annotations

import logging
from dataclasses import dataclass
from functools import cache

import numpy as np
import scipy.sparse as sp
import scipy.sparse.linalg as spla
from numpy.polynomial.legendre import Legendre
from skfem import CellBasis, ElementQuadP, MeshQuad
from skfem.assembly import Dofs
from skfem.element import ElementHcurl
from skfem.refdom import RefQuad

ELECTRIC, MAGNETIC = "electric", "magnetic"

# scikit-fem logs, at every use, that order 2 has a faster special element
logging.getLogger("skfem.element.element_quad.element_quadp").setLevel(logging.ERROR)


class ElementQuadEdge(ElementHcurl):
    """Nedelec's first-kind edge element of order ``p`` on a quadrilateral.

    Tangential functions are Legendre polynomials of degree 0 to p - 1 along an edge, times the
    degree-p nodal functions of :class:`skfem.ElementQuadP` across. For tensor meshes whose
    elements all have the same local axes: no facet is ever turned round, so ``orient`` is one.
    """

    refdom = RefQuad

    def __init__(self, p: int):
        self.p = p
        self.facet_dofs = p
        self.interior_dofs = 2 * p * (p - 1)
        self.maxdeg = 2 * p
        self.dofnames = ["u^t"] * p + ["u"] * self.interior_dofs
        self.doflocs = np.full((4 * p + self.interior_dofs, 2), np.nan)
        # (component, degree along, function across): the four facets, then the inside
        facets = [(0, 0), (1, 1), (0, 1), (1, 0)]
        self._shape = [(c, k, side) for c, side in facets for k in range(p)]
        self._shape += [(c, k, j) for c in (0, 1) for k in range(p) for j in range(2, p + 1)]

    def orient(self, mapping, i, tind=None):
        """One everywhere (tensor meshes only)."""
        count = mapping.mesh.t.shape[1] if tind is None else len(tind)
        return np.ones(count)

    def lbasis(self, X, i):
        """Value and curl of local function ``i`` at reference points ``X``."""
        component, degree, across = self._shape[i]
        s, t = (X[0], X[1]) if component == 0 else (X[1], X[0])
        along = Legendre.basis(degree)(2 * s - 1) * np.sqrt(2 * degree + 1.0)
        nodal, slope = ElementQuadP._reval_legendre(t, self.p)
        phi = np.zeros((2, *s.shape))
        phi[component] = along * nodal[across]
        sign = -1.0 if component == 0 else 1.0
        return phi, sign * along * slope[across][0]


def tensor_mesh(x: np.ndarray, y: np.ndarray) -> MeshQuad:
    """Quadrilaterals on grid lines ``x``, ``y``; local axes are x and y, element iy * nx + ix."""
    nx, ny = len(x) - 1, len(y) - 1
    points = np.vstack([np.tile(x, ny + 1), np.repeat(y, nx + 1)])
    corner = (np.arange(ny)[:, None] * (nx + 1) + np.arange(nx)).ravel()
    return MeshQuad(points, np.vstack([corner, corner + 1, corner + nx + 2, corner + nx + 1]))


@cache
def _reference_matrices(p: int) -> dict[str, np.ndarray]:
    """Matrices of the forms on the unit square, edge and nodal functions of order ``p``."""
    cell = MeshQuad()
    edge = CellBasis(cell, ElementQuadEdge(p), intorder=2 * p + 1)
    node = CellBasis(cell, ElementQuadP(p), intorder=2 * p + 1)
    w = edge.dx[0]
    vec = np.array([np.asarray(b[0])[:, 0] for b in edge.basis])
    curl = np.array([b[0].curl[0] for b in edge.basis])
    val = np.array([np.asarray(b[0])[0] for b in node.basis])
    grad = np.array([b[0].grad[:, 0] for b in node.basis])
    out = {"S": (curl * w) @ curl.T, "Z": (val * w) @ val.T}
    for c, name in enumerate("xy"):
        out["M" + name] = (vec[:, c] * w) @ vec[:, c].T
        out["G" + name] = (vec[:, c] * w) @ grad[:, c].T
        out["L" + name] = (grad[:, c] * w) @ grad[:, c].T
    return out


@dataclass
class Factor:
    """Factorisation of K - sigma N, the inside of every element eliminated first."""

    pencil: Pencil
    sigma: float
    inverse: np.ndarray
    coupling: np.ndarray
    spread: np.ndarray
    lu: spla.SuperLU

    def solve(self, b: np.ndarray) -> np.ndarray:
        """(K - sigma N)^-1 b."""
        pen = self.pencil
        inside = np.matmul(self.inverse, b[pen.inner][..., None])[..., 0]
        pull = np.matmul(self.coupling.transpose(0, 2, 1), inside[..., None])[..., 0]
        rhs = b - np.bincount(pen.outer.ravel(), pull.ravel(), minlength=pen.size)
        x = np.zeros(pen.size)
        x[pen.skeleton] = self.lu.solve(rhs[pen.skeleton])
        x[pen.inner] = inside - np.matmul(self.spread, x[pen.outer][..., None])[..., 0]
        return x


class Pencil:
    """The matrices K and N of one mesh, for any frequency and media.

    Parameters
    ----------
    x, y : (nx + 1,), (ny + 1,) arrays
        Grid lines, um.
    order : int
        Order p of both elements.
    walls : tuple of four str
        Wall at x[0], x[-1], y[0], y[-1]: "electric" (tangential E is zero) or "magnetic".

    Attributes
    ----------
    size : int
        Number of unknowns, those inside elements included, walls not.
    """

    def __init__(self, x, y, order: int, walls=(ELECTRIC,) * 4):
        self.x, self.y, self.order = np.asarray(x, float), np.asarray(y, float), order
        self.mesh = tensor_mesh(self.x, self.y)
        hx, hy = np.diff(self.x), np.diff(self.y)
        self.hx, self.hy = np.tile(hx, len(hy)), np.repeat(hy, len(hx))
        self.ref = _reference_matrices(order)
        self._number(walls)
        self._sort()

    def _number(self, walls):
        """Unknowns of every element, split in inner and outer; those on electric walls fixed."""
        edge = Dofs(self.mesh, ElementQuadEdge(self.order))
        node = Dofs(self.mesh, ElementQuadP(self.order))
        self.n_edge = edge.N
        self.size = edge.N + node.N
        self.edge_dofs = edge.element_dofs.T
        self.node_dofs = node.element_dofs.T + edge.N
        cut = 4 * self.order
        ne, nn = len(edge.element_dofs), len(node.element_dofs)
        self.local_outer = np.r_[0:cut, ne : ne + cut]
        self.local_inner = np.r_[cut:ne, ne + cut : ne + nn]
        both = np.hstack([self.edge_dofs, self.node_dofs])
        self.outer, self.inner = both[:, self.local_outer], both[:, self.local_inner]
        # logical position (twice the line's number) of every facet and vertex
        place = np.full((2, self.size), -1)
        mid = self.mesh.p[:, self.mesh.facets].mean(axis=1)
        for axis, lines in enumerate((self.x, self.y)):
            half = np.empty(2 * len(lines) - 1)
            half[::2], half[1::2] = lines, (lines[1:] + lines[:-1]) / 2
            near = (half[1:] + half[:-1]) / 2
            place[axis, edge.facet_dofs] = np.searchsorted(near, mid[axis])
            place[axis, node.facet_dofs + edge.N] = np.searchsorted(near, mid[axis])
            place[axis, node.nodal_dofs + edge.N] = np.searchsorted(near, self.mesh.p[axis])
        self.place = place
        self.free = np.ones(self.size, bool)
        ends = (0, 2 * len(self.x) - 2, 0, 2 * len(self.y) - 2)
        for side, (wall, end) in enumerate(zip(walls, ends, strict=True)):
            if wall == ELECTRIC:
                self.free &= place[side // 2] != end

    def _sort(self):
        """Nested dissection of the unknowns on element boundaries."""
        on = self.free & (self.place[0] >= 0)

        def dissect(ids):
            if len(ids) < 100:
                return [ids]
            px, py = self.place[:, ids]
            pos = px if np.ptp(px) >= np.ptp(py) else py
            line = 2 * round((pos.min() + pos.max()) / 4)
            low, high = ids[pos < line], ids[pos > line]
            if not len(low) or not len(high):
                return [ids]
            return [*dissect(low), *dissect(high), ids[pos == line]]

        self.skeleton = np.concatenate(dissect(np.flatnonzero(on)))
        self.position = np.full(self.size, -1)
        self.position[self.skeleton] = np.arange(len(self.skeleton))
        self.unknowns = int(self.free.sum())

    def _scatter(self, edge_part, node_part):
        out = np.zeros(self.size)
        if edge_part is not None:
            out += np.bincount(self.edge_dofs.ravel(), edge_part.ravel(), minlength=self.size)
        if node_part is not None:
            out += np.bincount(self.node_dofs.ravel(), node_part.ravel(), minlength=self.size)
        out[~self.free] = 0.0
        return out

    def apply_k(self, weight, x, curl: bool = True) -> np.ndarray:
        """K x with ``weight`` = k0^2 eps per element; without the curl term if not ``curl``."""
        e, r = x[self.edge_dofs], self.ref
        a, b = (weight * self.hy / self.hx)[:, None], (weight * self.hx / self.hy)[:, None]
        out = a * (e @ r["Mx"]) + b * (e @ r["My"])
        if curl:
            out -= (e @ r["S"]) / (self.hx * self.hy)[:, None]
        return self._scatter(out, None)

    def apply_n(self, weight, x, fixed: bool = True) -> np.ndarray:
        """N x with ``weight`` = k0^2 eps per element; the part with it alone if not ``fixed``."""
        e, f, r = x[self.edge_dofs], x[self.node_dofs], self.ref
        bottom = -(weight * self.hx * self.hy)[:, None] * (f @ r["Z"])
        if not fixed:
            return self._scatter(None, bottom)
        a, b = (self.hy / self.hx)[:, None], (self.hx / self.hy)[:, None]
        top = a * (e @ r["Mx"] - f @ r["Gx"].T) + b * (e @ r["My"] - f @ r["Gy"].T)
        bottom += a * (f @ r["Lx"] - e @ r["Gx"]) + b * (f @ r["Ly"] - e @ r["Gy"])
        return self._scatter(top, bottom)

    def fields(self, x, intorder: int) -> dict[str, np.ndarray]:
        """Fields of the vector ``x`` at quadrature points, arrays (elements, points).

        Keys ex, ey, phi, gx, gy (gradient of phi) and area (weights, um^2).
        """
        cell = MeshQuad()
        edge = CellBasis(cell, ElementQuadEdge(self.order), intorder=intorder)
        node = CellBasis(cell, ElementQuadP(self.order), intorder=intorder)
        e, f, hx, hy = x[self.edge_dofs], x[self.node_dofs], self.hx[:, None], self.hy[:, None]
        vec = np.array([np.asarray(b[0])[:, 0] for b in edge.basis])
        grad = np.array([b[0].grad[:, 0] for b in node.basis])
        return {
            "ex": e @ vec[:, 0] / hx,
            "ey": e @ vec[:, 1] / hy,
            "phi": f @ np.array([np.asarray(b[0])[0] for b in node.basis]),
            "gx": f @ grad[:, 0] / hx,
            "gy": f @ grad[:, 1] / hy,
            "area": edge.dx[0] * hx * hy,
        }

    def _local(self, weight, sigma: float) -> np.ndarray:
        """K - sigma N of every element."""
        r, ne = self.ref, len(self.ref["S"])
        n = ne + len(r["Z"])
        a, b = (self.hy / self.hx)[:, None, None], (self.hx / self.hy)[:, None, None]
        area, w = (self.hx * self.hy)[:, None, None], weight[:, None, None]
        out = np.empty((len(self.hx), n, n))
        out[:, :ne, :ne] = (w - sigma) * (a * r["Mx"] + b * r["My"]) - r["S"] / area
        out[:, :ne, ne:] = sigma * (a * r["Gx"] + b * r["Gy"])
        out[:, ne:, :ne] = out[:, :ne, ne:].transpose(0, 2, 1)
        out[:, ne:, ne:] = -sigma * (a * r["Lx"] + b * r["Ly"] - w * area * r["Z"])
        return out

    def factorise(self, weight, sigma: float) -> Factor:
        """Eliminate the inside of every element, assemble and factorise the rest."""
        local = self._local(weight, sigma)
        o, i = self.local_outer, self.local_inner
        coupling = local[:, i[:, None], o]
        inverse = np.linalg.inv(local[:, i[:, None], i])
        spread = np.matmul(inverse, coupling)
        schur = local[:, o[:, None], o] - np.matmul(coupling.transpose(0, 2, 1), spread)
        at = self.position[self.outer].astype(np.int32)
        at[at < 0] = n = len(self.skeleton)  # unknowns on walls end in a last row, cut off
        rows = np.repeat(at, at.shape[1], axis=1).ravel()
        cols = np.tile(at, at.shape[1]).ravel()
        matrix = sp.coo_matrix((schur.ravel(), (rows, cols)), (n + 1, n + 1)).tocsc()[:n, :n]
        lu = spla.splu(
            matrix,
            permc_spec="NATURAL",
            diag_pivot_thresh=0.01,
            options={"SymmetricMode": True},
        )
        return Factor(self, sigma, inverse, coupling, spread, lu)

    def nearest(self, weight, sigma: float, start=None, rtol: float = 1e-11):
        """The eigenvalue nearest to ``sigma`` and its vector, by inverse iteration.

        For a shift that is already close: each pass divides the vector's error by the distance
        to the next eigenvalue over that to this one, the Rayleigh quotient's by its square.
        """
        factor = self.factorise(weight, sigma)
        x = np.where(self.free, np.cos(np.arange(self.size)), 0.0) if start is None else start
        lam, n_x = np.inf, self.apply_n(weight, x)
        for _ in range(40):
            y = factor.solve(n_x)
            n_y = self.apply_n(weight, y)
            # (K - sigma N) y = N x, so the quotient needs no product with K
            old, lam = lam, sigma + (y @ n_x) / (y @ n_y)
            scale = np.sqrt(abs(y @ n_y))
            x, n_x = y / scale, n_y / scale
            if abs(lam - old) <= rtol * abs(lam):
                return lam, x
        raise RuntimeError(f"inverse iteration has not settled near {sigma}")

    def eigenpairs(
        self, weight, sigma: float, count: int, rtol: float = 1e-12
    ) -> tuple[np.ndarray, np.ndarray]:
        """The ``count`` eigenvalues beta^2 nearest to ``sigma``, largest first, and vectors."""
        factor = self.factorise(weight, sigma)
        op = spla.LinearOperator(
            (self.size, self.size), lambda v: factor.solve(self.apply_n(weight, v)), dtype=float
        )
        start = np.where(self.free, np.cos(np.arange(self.size)), 0.0)
        mu, vec = spla.eigs(op, count, v0=start, which="LM", tol=rtol, ncv=max(12, 3 * count))
        lam = sigma + 1.0 / mu
        good = np.argsort(-lam.real)
        return lam.real[good], vec.real[:, good]
