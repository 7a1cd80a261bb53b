"""Shift-invert on one grid: ordering, factorisation, nearest modes, left vectors.

The logical grid gives a nested-dissection order for free: cut the edges in two with a
strip as wide as the stencil, number both halves first and the strip last. SuperLU then
works in natural order on the permuted matrix.

References
----------
A. George, SIAM J. Numer. Anal. 10, 345 (1973): nested dissection of a regular mesh.
R. B. Lehoucq, D. C. Sorensen, C. Yang, ARPACK Users' Guide (SIAM, 1998).
X. S. Li, ACM Trans. Math. Softw. 31, 302 (2005): SuperLU.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np
import scipy.sparse as sp
from scipy.sparse.linalg import ArpackError, ArpackNoConvergence, LinearOperator, eigs, splu

from materials.common.errors import NotConverged, SolverError
from modesolve.operators import Boundary, Operators, topology_of

__all__ = ["Factorisation", "Pencil", "RawMode", "dissection_order", "nearest_modes", "polish"]

#: Largest residual of an eigenpair, beside what rounding leaves (`Pencil.residual_limit`).
RESIDUAL_LIMIT = 1e-8

#: Sets this small are not cut further.
LEAF = 12


@lru_cache(maxsize=64)
def dissection_order(shape: tuple[int, int], boundary: Boundary, reach: float = 1.0) -> np.ndarray:
    """Nested-dissection order of the edges of a grid.

    Parameters
    ----------
    shape : tuple of int
        Cells along u and v.
    boundary : Boundary
    reach : float
        Width of the separating strip, in cells: 1 where the metric has no uv term,
        2 where it has one (the stencil is then wider).

    Returns
    -------
    ndarray of int, shape (edges,)
    """
    positions = topology_of(shape, boundary).edge_positions()
    out: list[np.ndarray] = []
    _dissect(positions, np.arange(len(positions)), reach, out)
    order = np.concatenate(out)
    order.setflags(write=False)
    return order


def _dissect(positions: np.ndarray, members: np.ndarray, reach: float, out: list) -> None:
    """Append ``members`` to ``out``: first half, second half, separating strip."""
    if len(members) <= LEAF:
        out.append(members)
        return
    own = positions[members]
    low, high = own.min(axis=0), own.max(axis=0)
    axis = int(np.argmax(high - low))
    cut = np.floor(0.5 * (low[axis] + high[axis]) - 0.5 * reach + 0.5)
    along = own[:, axis]
    strip = (along >= cut) & (along < cut + reach)
    before, after = along < cut, along >= cut + reach
    if not before.any() or not after.any():
        out.append(members)
        return
    _dissect(positions, members[before], reach, out)
    _dissect(positions, members[after], reach, out)
    out.append(members[strip])


class Factorisation:
    """Sparse LU of A - shift Mn in a given order; ``solve`` works in the natural numbering."""

    def __init__(self, matrix: sp.csr_array, order: np.ndarray) -> None:
        self._order = order
        permuted = sp.csc_array(matrix[order][:, order])
        try:
            self._lu = splu(
                permuted,
                permc_spec="NATURAL",
                diag_pivot_thresh=0.0,
                options={"SymmetricMode": True},
            )
        except RuntimeError as exc:
            raise SolverError(
                f"the shifted matrix of {matrix.shape[0]} unknowns could not be factorised "
                f"({exc}); move the wavelength or the geometry slightly"
            ) from exc

    def solve(self, right: np.ndarray) -> np.ndarray:
        """Solution of the factorised system for one right-hand side."""
        return self._solve(right, "N")

    def solve_transposed(self, right: np.ndarray) -> np.ndarray:
        """Solution of the transposed system (no conjugation)."""
        return self._solve(right, "T")

    def _solve(self, right: np.ndarray, trans: str) -> np.ndarray:
        out = np.empty_like(right, dtype=np.result_type(right, float))
        out[self._order] = self._lu.solve(np.ascontiguousarray(right[self._order]), trans)
        return out


@dataclass(frozen=True, slots=True, eq=False)
class RawMode:
    """One eigenpair of one grid.

    Attributes
    ----------
    eigenvalue : float or complex
        beta^2, 1/um^2.
    right, left : ndarray, shape (edges,)
        e and y, with y^T Mn e = 1.
    residual : float
        |A e - lambda Mn e| / (|lambda| |Mn e|) in the norm of the inverse diagonal of Mn,
        recomputed on the original problem.
    """

    eigenvalue: complex
    right: np.ndarray
    left: np.ndarray
    residual: float


class Pencil:
    """The eigenproblem of one grid at one frequency.

    Parameters
    ----------
    operators : Operators
    k0 : float, rad/um
    permittivity : ndarray, shape (media,)
    """

    def __init__(self, operators: Operators, k0: float, permittivity: np.ndarray) -> None:
        self.operators = operators
        self.k0 = k0
        self.permittivity = permittivity
        self.across, self.along = operators.masses(permittivity)
        self.matrix = operators.pencil(k0, self.across, self.along)
        self.mass = operators.inverse_mu
        self.factorisations = 0

    def residual_limit(self, eigenvalue: complex) -> float:
        """Largest residual to accept: what rounding leaves on the shortest edges, and a floor."""
        stiffest = np.max(np.abs(self.matrix.diagonal() / self.mass.diagonal()))
        return RESIDUAL_LIMIT + float(np.finfo(float).eps * stiffest / abs(eigenvalue))

    def factorise(self, shift: complex) -> Factorisation:
        """LU of A - shift Mn in the grid's own order."""
        self.factorisations += 1
        topology = self.operators.topology
        reach = 1.0 if _is_diagonal(self.mass) else 2.0
        order = dissection_order(topology.shape, topology.boundary, reach)
        return Factorisation(sp.csr_array(self.matrix - shift * self.mass), order)

    def mode(self, eigenvalue: complex, right: np.ndarray) -> RawMode:
        """Left vector, normalisation and residual of an eigenpair.

        The left vector has a closed form, exact on the grid:
        y = e + G Mz^-1 G^T Me e / lambda, then divided by y^T Mn e.
        """
        gradient = self.operators.topology.gradient
        divergence = gradient.T @ (self.across @ right)
        left = right + gradient @ (divergence / self.along) / eigenvalue
        weighted = self.mass @ right
        # two-sided Rayleigh quotient: its error is the square of the vectors'
        eigenvalue = (left @ (self.matrix @ right)) / (left @ weighted)
        rest = self.matrix @ right - eigenvalue * weighted
        # in the norm of Mn^-1, where a grid line close to a wall weighs no more than another
        scale = np.sqrt(np.abs(self.mass.diagonal()))
        size = abs(eigenvalue) * np.linalg.norm(weighted / scale)
        residual = float(np.linalg.norm(rest / scale) / size)
        # the largest entry of e becomes positive and y^T Mn e one
        product = left @ weighted
        scale = np.sqrt(abs(product) if not np.iscomplexobj(right) else product)
        if np.real(right[np.argmax(np.abs(right))] / scale) < 0.0:
            scale = -scale
        right = right / scale
        left = left / product * scale
        return RawMode(eigenvalue, right, left, residual)


def polish(pencil: Pencil, factorisation: Factorisation, mode: RawMode) -> RawMode:
    """Clean an eigenpair of the noise a Krylov basis leaves on the shortest edges.

    That noise is harmless in the eigenvalue and ruinous in the left vector's closed form,
    which differentiates twice. One inverse-iteration step of each vector damps it by the
    ratio of the shift's distance to this eigenvalue and to the far end of the spectrum.
    """
    right = factorisation.solve(pencil.mass @ mode.right)
    cleaned = pencil.mode(mode.eigenvalue, right / np.linalg.norm(right))
    left = factorisation.solve_transposed(pencil.mass.T @ cleaned.left)
    left = left / (left @ (pencil.mass @ cleaned.right))
    return replace(cleaned, left=left)


def _is_diagonal(matrix: sp.csr_array) -> bool:
    return matrix.nnz == matrix.shape[0]


def nearest_modes(
    pencil: Pencil,
    factorisation: Factorisation,
    shift: complex,
    count: int,
    basis: int | None = None,
) -> list[RawMode]:
    """The ``count`` eigenpairs nearest to the shift, highest beta^2 first.

    Parameters
    ----------
    pencil : Pencil
    factorisation : Factorisation
        Of A - shift Mn.
    shift : float or complex
        1/um^2.
    count : int
    basis : int, optional
        Size of the Krylov basis.

    Raises
    ------
    NotConverged
        When ARPACK gives up.
    """
    size = pencil.matrix.shape[0]
    count = min(count, size - 2)
    start = 1.0 + 0.5 * np.cos(np.arange(size))  # fixed, so that a run can be repeated
    operator = LinearOperator(
        (size, size),
        matvec=lambda x: factorisation.solve(pencil.mass @ x),
        dtype=np.result_type(pencil.matrix.dtype, float),
    )
    try:
        values, vectors = eigs(
            operator, k=count, which="LM", v0=start, tol=1e-13, ncv=basis, maxiter=600
        )
    except ArpackNoConvergence as exc:
        raise NotConverged(
            f"the eigen-solver found {len(exc.eigenvalues)} of {count} modes; "
            "ask for fewer modes or change the wavelength slightly"
        ) from exc
    except ArpackError as exc:
        raise SolverError(f"the eigen-solver failed: {exc}") from exc
    modes = []
    for value, vector in zip(values, vectors.T, strict=True):
        eigenvalue = shift + 1.0 / value
        if not np.iscomplexobj(pencil.matrix):
            if abs(eigenvalue.imag) > 1e-8 * abs(eigenvalue):
                continue  # a pair of complex box modes; never a guided one without loss
            eigenvalue = float(eigenvalue.real)
            pivot = vector[np.argmax(np.abs(vector))]
            vector = (vector / pivot).real
        modes.append(pencil.mode(eigenvalue, vector))
    return sorted(modes, key=lambda m: -np.real(m.eigenvalue))
