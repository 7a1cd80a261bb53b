"""Perfectly conducting boxes of two layers: exact vector modes with no corner.

LSE: k1 cot k1 d + k2 cot k2 (b - d) = 0; LSM: (k1/n1^2) tan k1 d + (k2/n2^2) tan k2 (b - d)
= 0, kx = m pi/a (R. E. Collin, Field Theory of Guided Waves, chapter 6); computed.
"""

from __future__ import annotations

import numpy as np
import pytest
from layouts import box, observed_orders

import materials
from materials.common.constants import C_UM_PER_PS, omega_from_um
from modesolve.maps import EVEN, Grading
from modesolve.refine import refine, solve_level
from modesolve.seeds import find_seeds

SOURCE = pytest.mark.source("Collin, Field Theory of Guided Waves, ch. 6", "computed", "16")
FIRST = (0.6, 0.5, 0.2, 2.0, 1.0, 1.0)
SECOND = (0.5, 0.4, 0.22, 3.48, 1.444, 1.55)
MODES = [
    # a, b, d, n1, n2, wavelength; kind; n_eff, n_group
    (FIRST, "LSM 1", 1.455687638679405, 2.58229202029),
    (FIRST, "LSE 0", 1.191599937803505, 2.443259220934),
    (FIRST, "LSE 1", 0.8517428997818957, 3.418152985423),
    (SECOND, "LSM 1", 2.649009489106684, 4.465619714071),
    (SECOND, "LSE 0", 2.372978387430036, 4.368394747796),
]


def seeded(shape, n_eff, grading):
    a, b, d, n1, n2, wavelength = shape
    layout = box(materials.constant(n1), materials.constant(n2), a, b, d, grading)
    omega = omega_from_um(wavelength)
    seeds = find_seeds(layout, omega, 6, 0.0)
    return layout, omega, min(seeds, key=lambda s: abs(s.n_eff - n_eff))


@SOURCE
@pytest.mark.parametrize("grading", [EVEN, Grading()], ids=["even", "graded"])
@pytest.mark.parametrize(("shape", "kind", "n_eff", "n_group"), MODES)
def test_second_order_on_four_grids(shape, kind, n_eff, n_group, grading):
    layout, omega, seed = seeded(shape, n_eff, grading)
    refinements = (2, 4, 6, 8)
    betas = [solve_level(layout, omega, seed, m).beta[0] for m in refinements]
    errors = C_UM_PER_PS * np.array(betas) / omega - n_eff
    orders = observed_orders(refinements, errors)
    assert np.all(np.abs(orders - 2.0) < 0.05)


@SOURCE
@pytest.mark.parametrize("grading", [EVEN, Grading()], ids=["even", "graded"])
@pytest.mark.parametrize(("shape", "kind", "n_eff", "n_group"), MODES)
def test_ladder_and_its_error_bar(shape, kind, n_eff, n_group, grading):
    layout, omega, seed = seeded(shape, n_eff, grading)
    resolved = refine(layout, omega, seed)

    def figures(values):
        beta = values["beta"]
        return np.array([C_UM_PER_PS * beta[0] / omega, C_UM_PER_PS * beta[1]])

    errors = np.abs(figures(resolved.values) - [n_eff, n_group])
    assert np.all(errors < [1e-8, 1e-8])
    assert np.all(errors < resolved.bar(figures))
