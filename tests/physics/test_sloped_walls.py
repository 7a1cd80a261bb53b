"""Sloped walls: order of convergence, the ladder, symmetry and smoothness in the angle."""

from __future__ import annotations

import numpy as np
import pytest
from layouts import observed_orders

from materials.common.constants import C_UM_PER_PS, omega_from_um
from modesolve import CrossSection, solve_modes
from modesolve.refine import refine, solve_level
from modesolve.seeds import cutoff_index, find_seeds

SILICA = "SiO2-Malitson1965"
OMEGA = omega_from_um(1.55)


def nitride(angle: float, **more) -> CrossSection:
    base = dict(core="Si3N4-Luke2015", cladding=SILICA, substrate=SILICA, width_um=1.6,
                height_um=0.8, width_at=0.5, sidewall_deg=angle)  # fmt: skip
    return CrossSection(**{**base, **more})


def first_seed(layout):
    return find_seeds(layout, OMEGA, 1, cutoff_index(layout, OMEGA))[0]


@pytest.mark.parametrize("angle", [90.0, 82.0, 70.0])
def test_order_and_ladder_at_each_angle(angle):
    """Four grids fall with order 2; the ladder agrees with one of twice the cells to 1e-7."""
    layout = nitride(angle).layout()
    seed = first_seed(layout)
    resolved = refine(layout, OMEGA, seed)
    fine = refine(layout, OMEGA, seed, ladder=(4, 5, 6, 8, 10), order=1)
    exact = fine.values["beta"][0]
    refinements = (3, 4, 6, 8)
    box = resolved.report.box
    betas = [solve_level(layout, OMEGA, seed, m, box, 0).beta[0] for m in refinements]
    orders = observed_orders(refinements, np.array(betas) - exact)
    assert np.all(np.abs(orders - 2.0) < 0.1)
    gap = C_UM_PER_PS * abs(resolved.values["beta"][0] - exact) / OMEGA
    assert gap < 1e-7
    assert gap < C_UM_PER_PS * resolved.bar(lambda v: v["beta"])[0] / OMEGA


def test_a_core_and_its_upside_down_twin_have_the_same_mode():
    """In one cladding, 80 degrees and 100 degrees about the middle are mirror images."""
    up, down = (solve_modes(nitride(a), 1.55, 1)[0] for a in (80.0, 100.0))
    assert up.n_eff == pytest.approx(down.n_eff, abs=1e-10)
    assert up.beta2_ps2_per_km == pytest.approx(down.beta2_ps2_per_km, abs=1e-5)
    assert up.effective_area_um2 == pytest.approx(down.effective_area_um2, rel=1e-9)


def test_index_is_smooth_through_ninety_degrees():
    """First and second differences of n_eff in the angle run on through the vertical wall.

    The vertical wall takes the plain product map, its neighbours the sheared one with the
    uv terms; a step of either derivative would show in the fourth difference.
    """
    step = 0.5
    angles = 90.0 + step * np.arange(-3, 4)
    n = np.array([solve_modes(nitride(float(a)), 1.55, 1)[0].n_eff for a in angles])
    second = np.diff(n, 2) / step**2
    assert np.max(np.abs(np.diff(second))) < 0.05 * np.max(np.abs(second))
    # a kink of size k per degree at 90 would put k/step into one second difference
    assert np.ptp(second) * step < 1e-6


def test_width_at_moves_the_same_wall():
    """A width stated at the top equals the one the wall then has at its bottom."""
    top = nitride(78.0, width_um=1.5, width_at=1.0)
    bottom_width = 2.0 * top.wall_line().half_bottom_um
    bottom = nitride(78.0, width_um=bottom_width, width_at=0.0)
    a, b = (solve_modes(s, 1.55, 1)[0] for s in (top, bottom))
    assert a.n_eff == pytest.approx(b.n_eff, abs=2e-9)


@pytest.mark.slow
@pytest.mark.parametrize("slab", [0.0, 0.09])
@pytest.mark.parametrize("angle", [60.0, 75.0, 105.0, 120.0])
def test_silicon_walls_from_60_to_120_degrees(angle, slab):
    section = CrossSection(
        core="Si-Salzberg1957", cladding=SILICA, substrate=SILICA, width_um=0.5,
        height_um=0.22, slab_um=slab, sidewall_deg=angle, width_at=0.5,
    )  # fmt: skip
    mode = solve_modes(section, 1.55, 1)[0]
    layout = section.layout()
    fine = refine(layout, OMEGA, first_seed(layout), ladder=(4, 5, 6, 8, 10), order=1)
    exact = C_UM_PER_PS * fine.values["beta"][0] / OMEGA
    assert abs(mode.n_eff - exact) < max(mode.error["n_eff"], 1e-8)
    assert mode.error["n_eff"] < 2e-7
