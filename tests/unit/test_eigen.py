"""Ordering, factorisation, left vectors."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.sparse as sp
from scipy.sparse.linalg import splu

import materials
from materials.common.constants import C_UM_PER_PS, omega_from_um
from modesolve import CrossSection
from modesolve.eigen import Pencil, dissection_order, nearest_modes, polish
from modesolve.maps import Box
from modesolve.operators import Boundary

OMEGA = omega_from_um(1.55)


@pytest.fixture(scope="module")
def pencil():
    section = CrossSection(
        core="Si3N4-Luke2015",
        cladding=materials.constant(1.0),
        substrate="SiO2-Malitson1965",
        width_um=1.2,
        height_um=0.6,
    )
    layout = section.layout()
    grid = layout.grid(Box(right=2.0, bottom=2.0, top=1.5), 4)
    operators = layout.operators(grid, layout.parities()[0])
    return Pencil(operators, OMEGA / C_UM_PER_PS, layout.permittivity(OMEGA, 0)[:, 0])


@pytest.fixture(scope="module")
def shift(pencil):
    return (1.72 * pencil.k0) ** 2


@pytest.mark.parametrize("reach", [1.0, 2.0])
def test_order_is_a_permutation_with_any_walls(reach):
    for boundary in (Boundary(), Boundary(left="magnetic")):
        order = dissection_order((13, 21), boundary, reach)
        assert np.array_equal(np.sort(order), np.arange(order.size))


def multiplications(lu) -> float:
    """Multiplications of a factorisation: columns of L times rows of U, pivot by pivot."""
    columns = np.diff(sp.csc_array(lu.L).indptr).astype(float)
    rows = np.diff(sp.csr_array(lu.U).indptr).astype(float)
    return float(columns @ rows)


def test_dissection_takes_fewer_multiplications_than_the_default_order(pencil, shift):
    """The default is a column minimum-degree order."""
    matrix = sp.csr_array(pencil.matrix - shift * pencil.mass)
    topology = pencil.operators.topology
    order = dissection_order(topology.shape, topology.boundary, 1.0)
    own = splu(
        sp.csc_array(matrix[order][:, order]),
        permc_spec="NATURAL",
        diag_pivot_thresh=0.0,
        options={"SymmetricMode": True},
    )
    default = splu(sp.csc_array(matrix))
    assert multiplications(own) < 0.75 * multiplications(default)


def test_modes_solve_the_original_problem_and_repeat(pencil, shift):
    factorisation = pencil.factorise(shift)
    first = nearest_modes(pencil, factorisation, shift, 3)
    again = nearest_modes(pencil, pencil.factorise(shift), shift, 3)
    for a, b in zip(first, again, strict=True):
        assert a.residual < pencil.residual_limit(a.eigenvalue)
        assert a.eigenvalue == b.eigenvalue
        assert np.array_equal(a.right, b.right)


def test_closed_left_vector_is_the_transposed_eigenvector(pencil, shift):
    factorisation = pencil.factorise(shift)
    mode = polish(pencil, factorisation, nearest_modes(pencil, factorisation, shift, 1)[0])
    closed = pencil.mode(mode.eigenvalue, mode.right).left
    rest = pencil.matrix.T @ mode.left - mode.eigenvalue * (pencil.mass.T @ mode.left)
    scale = np.sqrt(pencil.mass.diagonal())
    size = abs(mode.eigenvalue) * np.linalg.norm(scale * mode.left)
    assert np.linalg.norm(rest / scale) < 1e-8 * size
    # both are normalised by y^T Mn e = 1, so they must agree, not only be parallel
    difference = scale * (closed - mode.left)
    assert np.linalg.norm(difference) < 1e-8 * np.linalg.norm(scale * mode.left)


def test_left_and_right_vectors_of_two_modes_are_orthogonal(pencil, shift):
    factorisation = pencil.factorise(shift)
    first, second = nearest_modes(pencil, factorisation, shift, 2)
    cross = polish(pencil, factorisation, first).left @ (pencil.mass @ second.right)
    assert abs(cross) < 1e-9  # both are normalised to one
