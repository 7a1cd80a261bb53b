"""Bent slabs against complex-order Bessel functions.

Computed from the dispersion equation of K. R. Hiremath et al., Opt. Quantum Electron. 37, 37
(2005); R is the outer rim, nu = beta R, fields there exp(+i omega t - i nu theta), so the
imaginary parts are minus ours.
"""

from __future__ import annotations

import pytest
from layouts import bent_slab

import materials
from materials.common.constants import C_UM_PER_PS, omega_from_um
from modesolve.refine import refine
from modesolve.seeds import cutoff_index, find_seeds

SOURCE = pytest.mark.source(
    "Hiremath et al., Opt. Quantum Electron. 37, 37 (2005)", "equation, computed", "12"
)
LADDER = (4, 5, 6, 8, 10)
AZIMUTHAL = [
    # n inside, film, outside; thickness, wavelength, rim; kind; order nu
    ((1.6, 1.7, 1.6), 1.0, 1.3, 50.5, "TE", 401.89061104143, 0.07997349334),
    ((1.6, 1.7, 1.6), 1.0, 1.3, 50.5, "TM", 401.27628675014, 0.1095976727),
    ((1.6, 1.7, 1.6), 1.0, 1.3, 100.5, "TE", 802.77897652122, 9.602968297e-4),
    ((1.6, 1.7, 1.6), 1.0, 1.3, 100.5, "TM", 801.44426781537, 1.9282981e-3),
    ((1.6, 1.7, 1.6), 1.0, 1.3, 150.5, "TE", 1203.9145237085, 7.39101793e-6),
    ((1.6, 1.7, 1.6), 1.0, 1.3, 150.5, "TM", 1201.8823330179, 2.162400869e-5),
    ((1.45, 2.0, 1.45), 1.0, 1.55, 5.0, "TE", 35.757492799053, 3.803634379e-3),
    ((1.45, 2.0, 1.45), 1.0, 1.55, 5.0, "TM", 35.134352720775, 7.335068037e-3),
    ((1.444, 3.48, 1.444), 0.5, 1.55, 2.0, "TE", 23.678581645704, 2.842875065e-10),
]
#: (1.6, 1.7, 1.55), 2 um, 1.55 um: beta/k and alpha/k at the rim.
NORMALISED = [
    (50.0, "TE", 1.647246982150, 9.670388161e-7),
    (20.0, "TE", 1.618528539831, 1.829859275e-3),
    (50.0, "TE", 1.581818364101, 1.511274296e-3),  # the second mode
    (20.0, "TM", 1.615574491184, 2.139063968e-3),
]


def solve(indices, thickness, wavelength, rim, kind, order):
    """Azimuthal order of the mode nearest to ``order``, and its error bars."""
    inside, film, outside = (materials.constant(n) for n in indices)
    if indices[0] == indices[2]:
        outside = inside
    layout = bent_slab(inside, film, outside, thickness, rim, kind)
    omega, radius = omega_from_um(wavelength), rim - 0.5 * thickness
    wanted = order / radius * C_UM_PER_PS / omega
    seeds = find_seeds(layout, omega, 3, cutoff_index(layout, omega))
    seed = min(seeds, key=lambda s: abs(s.n_eff - wanted))
    resolved = refine(layout, omega, seed, ladder=LADDER, order=1)
    bars = [resolved.bar(lambda v, f=f: f(v["beta"][0]) * radius) for f in (real, imaginary)]
    return resolved.values["beta"][0] * radius, bars


def real(value):
    return value.real


def imaginary(value):
    return value.imag


@SOURCE
@pytest.mark.parametrize(
    ("indices", "thickness", "wavelength", "rim", "kind", "order", "loss"), AZIMUTHAL
)
def test_azimuthal_order(indices, thickness, wavelength, rim, kind, order, loss):
    """Real part to 1e-8, loss to 1e-3 where it is above 1e-7 in alpha/k, else within its bar.

    A model that is first-order in the curvature, n (1 + x/R), misses the last rows by 1e-2.
    """
    nu, (real_bar, loss_bar) = solve(indices, thickness, wavelength, rim, kind, order)
    assert abs(nu.real - order) < 1e-8 * order
    assert abs(nu.real - order) < max(real_bar, 1e-10 * order)
    faint = loss / order < 1e-7
    assert abs(nu.imag - loss) < (loss_bar if faint else 1e-3 * loss)
    assert faint or abs(nu.imag - loss) < loss_bar


@SOURCE
@pytest.mark.parametrize(("rim", "kind", "index", "loss"), NORMALISED)
def test_normalised_propagation_at_the_rim(rim, kind, index, loss):
    order = index * 2.0 * 3.141592653589793 / 1.55 * rim
    nu, (_, loss_bar) = solve((1.6, 1.7, 1.55), 2.0, 1.55, rim, kind, order)
    scale = 1.55 / (2.0 * 3.141592653589793 * rim)
    assert abs(nu.real * scale - index) < 1e-8 * index
    assert abs(nu.imag * scale - loss) < 1e-3 * loss
    assert abs(nu.imag - loss / scale) < loss_bar
