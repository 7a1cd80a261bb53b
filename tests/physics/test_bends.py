"""Bent channels: limits, symmetry, loss and the energy integral."""

from __future__ import annotations

import math

import numpy as np
import pytest

from materials.common.errors import OutOfRange
from modesolve import CrossSection, dispersion, solve_modes

SILICA = "SiO2-Malitson1965"


def nitride(radius=None, **more):
    base = dict(core="Si3N4-Luke2015", cladding=SILICA, substrate=SILICA, width_um=1.6,
                height_um=0.8, bend_radius_um=radius)  # fmt: skip
    return CrossSection(**{**base, **more})


def first(section, wavelength=1.55):
    return solve_modes(section, wavelength, 1)[0]


@pytest.fixture(scope="module")
def straight():
    return first(nitride())


def test_a_bend_of_ten_millimetres_is_the_straight_guide(straight):
    bent = first(nitride(1e4))
    assert abs(bent.n_eff - straight.n_eff) < 5e-8
    assert abs(bent.beta2_ps2_per_km - straight.beta2_ps2_per_km) < 5e-3
    assert bent.effective_area_um2 == pytest.approx(straight.effective_area_um2, rel=1e-5)
    assert bent.loss_db_per_cm == 0.0


def test_the_shift_goes_as_the_square_of_the_curvature(straight):
    """By symmetry the first order vanishes: halving R quadruples the shift."""
    near, far = (first(nitride(r)).n_eff - straight.n_eff for r in (200.0, 400.0))
    assert near / far == pytest.approx(4.0, rel=0.02)
    assert near > 0.0  # at the core's middle; the field moves out to a longer path


@pytest.mark.slow
def test_left_and_right_are_mirror_images():
    right, left = first(nitride(8.0)), first(nitride(-8.0))
    assert left.n_eff == pytest.approx(right.n_eff, abs=1e-11)
    assert left.loss_db_per_cm == pytest.approx(right.loss_db_per_cm, rel=1e-6)
    a, b = right.fields(), left.fields()
    assert np.allclose(np.abs(a.e_x), np.abs(b.e_x[::-1]), atol=1e-6)


@pytest.mark.slow
def test_the_field_is_pushed_outwards():
    field = first(nitride(8.0)).fields()
    x = np.real(field.x_um)
    inside = np.abs(x) < 0.8
    weight = np.abs(field.e_x[inside]) ** 2
    steps = np.gradient(x[inside])[:, None]
    centre = (weight * x[inside][:, None] * steps).sum() / (weight * steps).sum()
    assert 0.05 < centre < 0.5


@pytest.mark.slow
def test_loss_grows_as_the_bend_tightens_and_has_its_bar():
    losses = []
    for radius in (8.0, 6.0, 5.0):
        mode = first(nitride(radius))
        assert mode.loss_db_per_cm > 3.0 * mode.error["loss_db_per_cm"]
        losses.append(mode.loss_db_per_cm)
    assert losses[0] < 0.2 * losses[1] < 0.2 * losses[2]


@pytest.mark.slow
def test_a_taller_ladder_stays_inside_the_bars():
    mode = first(nitride(6.0))
    fine = solve_modes(nitride(6.0), 1.55, 1, ladder=(3, 4, 5, 6, 8))[0]
    for key in ("n_eff", "n_group", "beta2_ps2_per_km", "loss_db_per_cm"):
        gap = abs(getattr(mode, key) - getattr(fine, key))
        assert gap < mode.error[key] + fine.error[key], key


@pytest.mark.parametrize("radius", [115.0, pytest.param(6.0, marks=pytest.mark.slow)])
def test_group_index_equals_the_energy_integral(radius):
    """Exact on every grid, bent and leaking too: dA carries h, the power does not."""
    mode = first(nitride(radius))
    assert mode.n_group_from_energy == pytest.approx(mode.n_group, abs=1e-9)


def test_silicon_wire_bent_to_one_and_a_half_micrometres():
    section = CrossSection(core="Si-Salzberg1957", cladding=SILICA, substrate=SILICA,
                           width_um=0.5, height_um=0.22, bend_radius_um=1.5)  # fmt: skip
    mode = first(section)
    assert mode.loss_db_per_cm > 5.0 * mode.error["loss_db_per_cm"]
    quarter = mode.loss_db_per_90deg
    assert quarter == pytest.approx(mode.loss_db_per_cm * 1.5e-4 * math.pi / 2.0)


@pytest.mark.slow
def test_curve_of_a_bent_guide():
    curve = dispersion(nitride(6.0), 1.5, 1.6)
    mode = first(nitride(6.0), 1.53)
    for key in ("n_eff", "beta2_ps2_per_km", "loss_db_per_cm"):
        gap = abs(getattr(curve, key)(1.53) - getattr(mode, key))
        assert gap < curve.error[key](1.53) + mode.error[key], key
    assert curve.bend_radius_um == 6.0


@pytest.mark.parametrize("radius", [0.0, 0.8, -0.85, float("nan"), 2e6])
def test_radii_that_make_no_sense(radius):
    with pytest.raises(OutOfRange, match="bend_radius_um"):
        nitride(radius)
