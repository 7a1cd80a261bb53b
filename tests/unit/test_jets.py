"""Frequency series against separate solves on the same grid."""

from __future__ import annotations

import numpy as np
import pytest

import materials
from materials.common.constants import C_UM_PER_PS, omega_from_um
from modesolve import CrossSection
from modesolve.eigen import Pencil, nearest_modes, polish
from modesolve.integrals import mode_series
from modesolve.jets import mode_jet
from modesolve.maps import Box

#: Central-difference weights of the 9-point stencil (Fornberg, Math. Comp. 51, 699 (1988)).
FIRST = np.array([1 / 280, -4 / 105, 1 / 5, -4 / 5, 0, 4 / 5, -1 / 5, 4 / 105, -1 / 280])
SECOND = np.array([-1 / 560, 8 / 315, -1 / 5, 8 / 5, -205 / 72, 8 / 5, -1 / 5, 8 / 315, -1 / 560])
STEPS = np.arange(-4, 5)
OMEGA = omega_from_um(1.55)
H = 12.0  # rad/ps: 1 % of the frequency


def jet_at(layout, operators, omega, order, seed=None):
    permittivity = layout.permittivity(omega, order)
    pencil = Pencil(operators, omega / C_UM_PER_PS, permittivity[:, 0])
    shift = (1.85 * pencil.k0) ** 2
    factorisation = pencil.factorise(shift)
    found = nearest_modes(pencil, factorisation, shift, 3)
    mode = polish(pencil, factorisation, found[0])
    jet = mode_jet(pencil, factorisation, mode, omega, permittivity, found[1:])
    return jet, mode_series(layout, operators, jet)


@pytest.fixture(scope="module")
def guide():
    nitride = materials.load("Si3N4-Luke2015")
    section = CrossSection(
        core=nitride,
        cladding="SiO2-Malitson1965",
        substrate="SiO2-Malitson1965",
        width_um=1.6,
        height_um=0.8,
    )
    layout = section.layout()
    grid = layout.grid(Box(right=2.4, bottom=2.4, top=2.4), 3)
    return layout, layout.operators(grid, layout.parities()[0])


@pytest.fixture(scope="module")
def solved(guide):
    return [jet_at(*guide, OMEGA + k * H, 4) for k in STEPS]


def test_beta_series_equals_differences_of_separate_solves(solved):
    beta = np.array([jet.beta[0] for jet, _ in solved])
    jet = solved[4][0]
    # rounding of nine solves over H and H^2: about 1e-12 and 1e-11 relative
    assert jet.beta[1] == pytest.approx(FIRST @ beta / H, rel=1e-10)
    assert 2.0 * jet.beta[2] == pytest.approx(SECOND @ beta / H**2, rel=1e-7)


def test_higher_orders_equal_differences_of_lower_ones(solved):
    for order in (1, 2, 3):
        lower = np.array([jet.beta[order] for jet, _ in solved])
        expected = FIRST @ lower / H / (order + 1)
        assert solved[4][0].beta[order + 1] == pytest.approx(expected, rel=1e-8)


@pytest.mark.parametrize(
    "key",
    ["te_fraction", "core_power_fraction", "effective_area_um2", "intensity_area_um2",
     "power_area_um2", "gamma_per_w_m", "weight_0", "weight_1"],
)  # fmt: skip
def test_integrals_have_exact_frequency_derivatives(solved, key):
    values = np.array([s[key][0] for _, s in solved])
    series = solved[4][1][key]
    assert series[1] == pytest.approx(FIRST @ values / H, rel=1e-7, abs=1e-12)
    first = np.array([s[key][1] for _, s in solved])
    assert series[2] == pytest.approx(FIRST @ first / H / 2.0, rel=1e-7, abs=1e-13)


def test_group_index_equals_the_energy_integral(guide, solved):
    """n_g = sum of n_g of each medium times dn_eff/dn, exact on every grid."""
    layout, _ = guide
    jet, integrals = solved[4]
    energy = sum(
        m.group_index(1.55) * integrals[f"weight_{i}"][0] for i, m in enumerate(layout.media)
    )
    assert energy == pytest.approx(C_UM_PER_PS * jet.beta[1], rel=1e-10)


def test_weights_equal_a_change_of_the_medium(guide):
    """dn_eff/dn of the core against solves with the core's index moved."""
    layout, operators = guide
    n = layout.indices(OMEGA)
    _, integrals = jet_at(layout, operators, OMEGA, 1)
    found = []
    for sign in (1, -1):
        moved = n.copy()
        moved[0] += sign * 1e-4
        pencil = Pencil(operators, OMEGA / C_UM_PER_PS, moved**2)
        shift = (1.85 * pencil.k0) ** 2
        mode = nearest_modes(pencil, pencil.factorise(shift), shift, 1)[0]
        found.append(np.sqrt(mode.eigenvalue) / pencil.k0)
    slope = (found[0] - found[1]) / 2e-4
    assert integrals["weight_0"][0] == pytest.approx(slope, rel=1e-7)
