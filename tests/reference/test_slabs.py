"""Slabs against the closed dispersion equation and its exact derivatives.

Values computed with 25 digits from kappa d = m pi + atan(rho_s g_s/kappa) +
atan(rho_c g_c/kappa), rho = 1 (TE) or n_f^2/n_i^2 (TM) (Okamoto, Fundamentals of Optical
Waveguides; Snyder and Love, Optical Waveguide Theory), dispersion by an 8th-order stencil.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
import pytest
from layouts import slab

import materials
from materials.common.constants import C_UM_PER_PS, dispersion_from_beta2, omega_from_um
from modesolve.layout import SLAB_WIDTH_UM
from modesolve.mode import resolve_modes

SOURCE = pytest.mark.source(
    "slab dispersion equation (Okamoto; Snyder and Love)", "computed from the equation", "16"
)

FIXED = [
    # d, film, below, above, mode, n_eff, n_group, D
    (0.22, 3.48, 1.444, 1.444, "TE0", 2.851738986732275, 3.58131902743072, -532.5747055),
    (0.22, 3.48, 1.444, 1.444, "TM0", 2.056288330099077, 3.87080292114598, -8663.614444),
    (0.22, 3.48, 1.444, 1.0, "TE0", 2.834900635020169, 3.59830539787417, -484.3498892),
    (0.22, 3.48, 1.444, 1.0, "TM0", 1.893974328107718, 3.99506837007332, -13401.30105),
    (0.40, 2.0, 1.444, 1.444, "TE0", 1.746707437647429, 1.98763842730575, -401.4289185),
    (0.40, 2.0, 1.444, 1.444, "TM0", 1.643876248975614, 1.94563697254912, -1056.138103),
    (0.80, 2.0, 1.444, 1.444, "TE0", 1.887468631852047, 2.04122563874704, 1.831822325),
    (0.80, 2.0, 1.444, 1.444, "TE1", 1.564324369368091, 2.05452520709818, -1347.723346),
    (0.80, 2.0, 1.444, 1.444, "TM0", 1.848396534433737, 2.08081583093100, 69.50471184),
    (0.40, 2.0, 1.444, 1.0, "TE0", 1.715242423610803, 2.00772957704928, -406.6342973),
]
SILICA, SILICON, NITRIDE = "SiO2-Malitson1965", "Si-Salzberg1957", "Si3N4-Luke2015"
DISPERSIVE = [
    # d, film, mode, n_eff, n_group, D, beta3, beta4
    (
        0.22,
        SILICON,
        "TE0",
        2.849489467429103,
        3.70669351037895,
        -1469.487789,
        -1.301878,
        0.01161247,
    ),
    (
        0.22,
        SILICON,
        "TM0",
        2.054618547356907,
        3.97575382401877,
        -10256.39719,
        -55.24982,
        -0.0919855,
    ),
    (
        0.40,
        NITRIDE,
        "TE0",
        1.743631719154698,
        2.02326548850698,
        -441.8563425,
        -1.109002,
        0.00269110,
    ),
    (
        0.80,
        NITRIDE,
        "TE0",
        1.883832236046577,
        2.08066118762045,
        -11.86403243,
        -0.0321068,
        0.00091614,
    ),
    (
        0.80,
        NITRIDE,
        "TM0",
        1.844915465669867,
        2.11961026620283,
        45.21368156,
        -0.4004446,
        0.00410381,
    ),
]


@lru_cache
def medium(which):
    return materials.load(which) if isinstance(which, str) else materials.constant(which)


@lru_cache
def solved(thickness, film, below, above, mode):
    layout = slab(medium(film), medium(below), medium(above), thickness, mode[:2])
    return resolve_modes(layout, omega_from_um(1.55), int(mode[2:]) + 1).modes[-1]


def figures(resolved):
    """n_eff, n_group, D, beta3, beta4 and their bars."""

    def of(values):
        beta = values["beta"]
        return np.array(
            [
                C_UM_PER_PS * beta[0] / resolved.omega,
                C_UM_PER_PS * beta[1],
                dispersion_from_beta2(2e9 * beta[2], 1.55),
                6e9 * beta[3],
                24e9 * beta[4],
            ]
        )

    return of(resolved.values), resolved.bar(of)


@SOURCE
@pytest.mark.parametrize(("d", "nf", "ns", "nc", "mode", "n_eff", "n_group", "disp"), FIXED)
def test_slab_of_fixed_indices(d, nf, ns, nc, mode, n_eff, n_group, disp):
    value, _ = figures(solved(d, nf, ns, nc, mode))
    assert abs(value[0] - n_eff) < 1e-8  # the budget: measured 4e-9 at most
    assert abs(value[1] - n_group) < 1e-7  # measured 4e-8 at most
    # beta2 to 1e-5 relative, D within 0.002 where it is near zero; measured 4e-7
    assert abs(value[2] - disp) < (0.002 if abs(disp) < 20.0 else 1e-5 * abs(disp))


@SOURCE
@pytest.mark.parametrize(("d", "film", "mode", "n_eff", "n_group", "disp", "b3", "b4"), DISPERSIVE)
def test_slab_of_dispersive_media(d, film, mode, n_eff, n_group, disp, b3, b4):
    value, _ = figures(solved(d, film, SILICA, SILICA, mode))
    assert abs(value[0] - n_eff) < 1e-8
    assert abs(value[1] - n_group) < 1e-7
    assert abs(value[2] - disp) < (0.002 if abs(disp) < 20.0 else 1e-5 * abs(disp))
    # beta3 of the thick film all but cancels: 3e-6 ps3/km beside terms of 0.3
    assert abs(value[3] - b3) < 2e-5 * abs(b3) + 3e-6
    assert abs(value[4] - b4) < 2e-4 * abs(b4) + 2e-7


# ------------------------------------------------------------------ areas and weights
# slab .22 3.48/1.444 TE0, TM0 and slab .80 2/1.444 TM0: widths A_int, A_S, A_gamma, A_gamma
# with a cladding n2 of a tenth of the core's, dn_eff/dn core and cladding
AREAS = [
    (0.22, 3.48, "TE0", 0.29930424988, 0.29930424988, 0.21233641341, 0.21213022127,
     0.98934870942, 0.095834846702),
    (0.22, 3.48, "TM0", 0.51341007872, 0.4125942704, 0.48085688373, 0.44560703836,
     0.74363905841, 0.88846190989),
    (0.80, 2.0, "TM0", 0.97253765254, 0.76759304855, 0.86615046651, 0.86353931894,
     0.93723132499, 0.14290386492),
]  # fmt: skip


@pytest.mark.source("slab fields integrated in closed form", "computed, n2 in the core only", "11")
@pytest.mark.parametrize(
    ("d", "nf", "mode", "a_int", "a_s", "a_gamma", "a_clad", "core", "clad"), AREAS
)
def test_areas_and_weights_of_slabs(d, nf, mode, a_int, a_s, a_gamma, a_clad, core, clad):
    bare = materials.constant(1.444)
    tenth = materials.constant(1.444, n2_m2_per_w=1e-20)
    film = materials.constant(nf, n2_m2_per_w=1e-19)
    omega = omega_from_um(1.55)

    def solve(around):
        layout = slab(film, around, around, d, mode[:2])
        return resolve_modes(layout, omega, 1).modes[0].values

    values, nonlinear = solve(bare), solve(tenth)
    width = SLAB_WIDTH_UM
    found = [
        values["intensity_area_um2"][0] / width,
        values["power_area_um2"][0] / width,
        values["effective_area_um2"][0] / width,
        nonlinear["effective_area_um2"][0] / width,
        values["weight_0"][0],
        values["weight_1"][0],
    ]
    # the ladder gives about 3e-7; ten printed digits of the reference do not limit
    np.testing.assert_allclose(found, [a_int, a_s, a_gamma, a_clad, core, clad], rtol=1e-6)
    k0 = omega / C_UM_PER_PS
    gamma = k0 * 1e-19 * 1e12 / (a_gamma * width) * 1e6
    np.testing.assert_allclose(values["gamma_per_w_m"][0], gamma, rtol=1e-6)
