"""Incidence and mass matrices."""

from __future__ import annotations

import numpy as np
import pytest
from layouts import box, observed_orders

import materials
from materials.common.constants import C_UM_PER_PS, omega_from_um
from modesolve.eigen import Pencil, nearest_modes
from modesolve.grid import Grid
from modesolve.maps import EVEN, Box, Grading
from modesolve.operators import Boundary, Operators, Topology


class Wavy:
    """A box's map with its inner lines bent: x and y both depend on u and v."""

    def __init__(self, inner, a, b, d, strength):
        self.inner, self.shape = inner, inner.shape
        self.a, self.b, self.d, self.strength = a, b, d, strength

    def position(self, u, v):
        x, y = self.inner.position(u, v)
        bump = np.sin(np.pi * x / self.a)
        across = self.strength * bump * np.sin(np.pi * y / self.b)
        # y keeps the interface at d and the walls at 0 and b straight
        up = self.strength * bump * y * (y - self.d) * (y - self.b) / self.b**2
        return x + across, y + up

    def arc(self, x):
        return np.ones_like(x)


def wavy_operators(layout, refinement, strength):
    plain = layout.grid(Box(), refinement)
    chart = Wavy(plain.map, 0.6, 0.5, 0.2, strength)
    grid = Grid.on(chart, plain.segment_u, plain.segment_v)
    return layout.operators(grid, layout.boundary)


def test_curl_of_a_gradient_vanishes_with_any_walls():
    for boundary in (Boundary(), Boundary(left="magnetic", top="magnetic")):
        topology = Topology((5, 7), boundary)
        product = topology.curl @ topology.gradient
        assert product.nnz == 0 or np.abs(product.data).max() == 0.0


@pytest.mark.parametrize("strength", [0.0, 0.08])
def test_masses_are_symmetric_and_positive(strength):
    layout = box(materials.constant(2.0), materials.constant(1.0), 0.6, 0.5, 0.2, EVEN)
    operators = wavy_operators(layout, 2, strength)
    for matrix in (operators.inverse_mu, *(m.across for m in operators.media)):
        assert abs(matrix - matrix.T).max() == 0.0
    total = sum(m.across for m in operators.media).toarray()
    assert np.linalg.eigvalsh(total).min() > 0.0


def test_media_share_the_vacuum_mass():
    """In a straight guide the media's unit masses add up to the inverse-mu mass."""
    layout = box(materials.constant(2.0), materials.constant(1.0), 0.6, 0.5, 0.2, Grading())
    operators = layout.operators(layout.grid(Box(), 2), layout.boundary)
    total = sum(m.across for m in operators.media)
    assert abs(total - operators.inverse_mu).max() < 1e-12 * abs(operators.inverse_mu).max()


def test_a_curved_grid_gives_the_same_modes_to_second_order():
    """The uv terms of the metric: a box on wavy lines, exact index 1.455687638679405 (LSM 1).

    Collin, Field Theory of Guided Waves, chapter 6, computed.
    """
    layout = box(materials.constant(2.0), materials.constant(1.0), 0.6, 0.5, 0.2, EVEN)
    omega = omega_from_um(1.0)
    exact = 1.455687638679405
    errors = []
    refinements = (2, 3, 4, 6)
    for m in refinements:
        operators = wavy_operators(layout, m, 0.08)
        assert operators.inverse_mu.nnz > operators.inverse_mu.shape[0]
        pencil = Pencil(operators, omega / C_UM_PER_PS, layout.permittivity(omega, 0)[:, 0])
        shift = (exact * pencil.k0) ** 2 * 1.001
        mode = nearest_modes(pencil, pencil.factorise(shift), shift, 1)[0]
        errors.append(np.sqrt(mode.eigenvalue) / pencil.k0 - exact)
    assert np.all(np.abs(observed_orders(refinements, np.array(errors)) - 2.0) < 0.1)


def test_operators_are_free_of_frequency_and_linear_in_permittivity():
    layout = box(materials.constant(2.0), materials.constant(1.0), 0.6, 0.5, 0.2, EVEN)
    operators: Operators = layout.operators(layout.grid(Box(), 1), layout.boundary)
    across, along = operators.masses(np.array([4.0, 1.0]))
    one, two = (operators.pencil(k0, across, along) for k0 in (0.0, 3.0))
    assert abs(across - 4.0 * operators.media[0].across - operators.media[1].across).max() < 1e-12
    assert abs(two - one - 9.0 * across).max() < 1e-9
