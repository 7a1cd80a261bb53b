"""The coordinate map and the grids it lays."""

from __future__ import annotations

import numpy as np
import pytest

from modesolve.grid import Grid
from modesolve.maps import EVEN, Axis, Box


def grid(refinement=3, **box):
    across = Axis((0.0, 0.8), low="mirror", high="open")
    up = Axis((0.0, 0.3, 0.8))
    return Grid.build(
        across, up, Box(**{"right": 2.0, "bottom": 1.5, "top": 2.5, **box}), refinement
    )


def test_walls_lie_on_grid_lines_and_lines_rise():
    g = grid()
    x, y = g.x[:, 0], g.y[0, :]
    assert np.all(np.diff(x) > 0) and np.all(np.diff(y) > 0)
    for wall in (0.0, 0.8, 2.8):
        assert np.min(np.abs(x - wall)) < 1e-15
    for wall in (-1.5, 0.0, 0.3, 0.8, 3.3):
        assert np.min(np.abs(y - wall)) < 1e-15


def test_quarters_add_up_to_the_area_of_the_box():
    g = grid()
    assert np.sum(0.25 * g.metric.det) == pytest.approx(2.8 * 4.8, rel=1e-13)


def test_grids_gather_at_walls_but_not_at_the_mirror_plane():
    x = grid().x[:, 0]
    steps = np.diff(x)
    wall = int(np.argmin(np.abs(x - 0.8)))
    assert steps[wall - 1] < 0.05 * steps[:wall].max()
    assert steps[0] > 0.5 * steps[:wall].max()


def test_refinement_multiplies_cells():
    assert grid(4).shape == tuple(2 * n for n in grid(2).shape)


def test_even_grading_has_equal_steps_and_uniform_axes_one_cell():
    g = Grid.build(
        Axis((0.0, 0.01), "wall", "wall", uniform=True, grading=EVEN),
        Axis((0.0, 1.0), "wall", "wall", grading=EVEN),
        Box(),
        2,
    )
    assert g.shape == (1, 16)
    np.testing.assert_allclose(np.diff(g.y[0]), 1.0 / 16, rtol=1e-12)
