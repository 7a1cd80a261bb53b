"""Every dispersion formula: its series against values from complex wavelengths."""

from fractions import Fraction

import numpy as np
import pytest

import materials
from materials import formulas
from materials.catalogue import entries

C_UM_PER_PS = 299.792458
ORDER = 8


def plain_value(name, c, w):
    """The printed formula at (complex) wavelength ``w``, written apart from the package."""
    c = [*c, *([0.0] * 12)]
    if name.startswith("sellmeier"):
        p = 2 if "squared" in name else 1
        return 1 + c[0] + sum(c[k] * w**2 / (w**2 - c[k + 1] ** p) for k in (1, 3, 5, 7, 9))
    if name in ("polynomial", "cauchy"):
        return c[0] + sum(c[k] * w ** c[k + 1] for k in (1, 3, 5, 7, 9))
    if name == "mixed_poles_and_powers":
        poles = sum(
            c[k] * w ** c[k + 1] / (w**2 - c[k + 2] ** c[k + 3]) for k in (1, 5) if c[k] != 0
        )
        return c[0] + poles + sum(c[k] * w ** c[k + 1] for k in (9, 11))
    if name == "gas":
        return 1 + c[0] + sum(c[k] / (c[k + 1] - w**-2) for k in (1, 3))
    if name == "photon_energy_poles":
        return c[0] + sum(c[k] / (c[k + 1] - w**-2) for k in (1, 3, 5, 7) if c[k] != 0)
    if name == "herzberger":
        pole = 1 / (w**2 - 0.028)
        return c[0] + c[1] * pole + c[2] * pole**2 + c[3] * w**2 + c[4] * w**4 + c[5] * w**6
    if name == "mole_fraction_sellmeier":
        x, total = c[0], 1.0
        for k in (1, 5, 9):
            strength = c[k] + x * (c[k + 2] - c[k])
            total = total + strength * w**2 / (w**2 - (c[k + 1] + x * (c[k + 3] - c[k + 1])) ** 2)
        return total
    if name == "fitted_resonances":
        near = sum(c[k] * w**2 / (w**2 - c[k + 1]) for k in (2, 4, 6))
        return 1 - c[0] * w**2 / (1 - c[1] * w**2) + near
    raise AssertionError(f"no plain form of {name}")


def contour_series(function, omega, order):
    """Taylor coefficients from values on a circle (Cauchy's formula, 64 points).

    The trapezoidal rule converges geometrically; what is left is rounding, 1e-15 of the
    value over radius**k, and aliasing, (radius/distance to the pole)**64.
    """
    radius = 0.12 * omega
    turn = np.exp(2j * np.pi * np.arange(64) / 64)
    values = function(2 * np.pi * C_UM_PER_PS / (omega + radius * turn))
    return np.array([np.mean(values * turn**-k).real / radius**k for k in range(order + 1)])


# one medium a formula, at a wavelength well away from its poles
CASES = [
    ("SiO2-Malitson1965", 1.55),
    ("Si-Salzberg1957", 2.0),
    ("LiNbO3-Zelmon1997-e", 1.55),
    ("SiC-4H-Wang2013-o", 1.55),
    ("MgLiTaO3-Moutzouris2011-o", 1.0),
    ("Si-ChandlerHorowitz2005", 4.0),
    ("MgO5-LiNbO3-Gayer2008-o", 1.2),
    ("TiO2-rutile-Devore1951-e", 1.2),
    ("SU8-3000-datasheet2011", 1.3),
    ("air-Ciddor1996", 1.0),
    ("Si-Edwards1980", 5.0),
    ("GeO2-SiO2-Fleming1984-x0.1", 1.55),
    ("AlGaAs-Gehrsitz2000-x0.2", 1.55),
    ("LiTaO3-Bond1965-o", 1.55),
]


@pytest.mark.parametrize(("key", "wavelength_um"), CASES)
def test_series_against_complex_wavelengths(key, wavelength_um):
    medium = materials.load(key)
    omega = 2 * np.pi * C_UM_PER_PS / wavelength_um
    q = formulas.inverse_wavelength(omega, ORDER)
    ours = formulas.FORMULAS[medium.formula].evaluate(q, medium.coefficients)
    outside = contour_series(
        lambda w: plain_value(medium.formula, medium.coefficients, w), omega, ORDER
    )
    scale = (0.12 * omega) ** np.arange(ORDER + 1)
    # rounding of the contour: 64 values of size n^2, each to about 1e-15
    assert np.all(np.abs(ours - outside) * scale < 1e-13 * outside[0])


def test_every_formula_has_a_case():
    used = {materials.load(key).formula for key, _ in CASES}
    assert used == set(formulas.FORMULAS) - {"constant"}
    assert {materials.load(e.key).formula for e in entries()} <= set(formulas.FORMULAS)


def test_one_resonance_against_exact_fractions():
    """A l^2/(l^2 - B^2) = A/(1 - b x^2) about x = 3/4, b = 1/9: rational coefficients."""
    a, b, x, order = Fraction(5, 2), Fraction(1, 9), Fraction(3, 4), 10
    denominator = [1 - b * x * x, -2 * b * x, -b]
    exact = []
    for k in range(order + 1):
        known = sum(denominator[j] * exact[k - j] for j in range(1, min(k, 2) + 1))
        exact.append(((a if k == 0 else 0) - known) / denominator[0])
    q = np.zeros(order + 1)
    q[:2] = 0.75, 1.0
    ours = formulas.sellmeier_plain_resonances(q, (-1.0, 2.5, 1.0 / 9.0))
    for k in range(order + 1):
        # each order adds a few roundings; the series alternates mildly
        assert abs(ours[k] - float(exact[k])) < 1e-14 * max(1.0, abs(float(exact[k])))


def test_both_sellmeier_forms_differ_only_in_the_square():
    q = formulas.inverse_wavelength(1200.0, 4)
    squared = formulas.sellmeier_squared_resonances(q, (0.1, 2.0, 0.2, 0.5, 9.0))
    plain = formulas.sellmeier_plain_resonances(q, (0.1, 2.0, 0.04, 0.5, 81.0))
    assert np.allclose(squared, plain, rtol=1e-13, atol=0.0)


def test_unused_pole_is_skipped():
    q = formulas.inverse_wavelength(1200.0, 3)
    with np.errstate(all="raise"):
        with_pole = formulas.mixed_poles_and_powers(q, (5.0, 0.2, 0, 0.08, 1, 0, 0, 0, 1))
    without = formulas.sellmeier_plain_resonances(q, (4.0,))
    assert np.all(np.isfinite(with_pole))
    assert with_pole[0] > without[0]


def test_fitted_gradient_against_complex_steps():
    c = np.array([0.02, 0.003, 2.1, 0.03, 0.9, 0.06])
    omega = 1215.0
    q = formulas.inverse_wavelength(omega, 0)
    gradient = formulas.fitted_resonances_gradient(q, c)[:, 0]
    w = 2 * np.pi * C_UM_PER_PS / omega
    for k in range(c.size):
        step = np.array(c, dtype=complex)
        step[k] += 1e-30j
        outside = plain_value("fitted_resonances", list(step), w).imag / 1e-30
        assert abs(gradient[k] - outside) < 1e-12 * abs(outside)


def test_arrays_of_frequency_keep_their_shape():
    omega = np.linspace(900.0, 1400.0, 6).reshape(2, 3)
    medium = materials.load("SiO2-Malitson1965")
    whole = medium.permittivity_series(omega, 3)
    assert whole.shape == (4, 2, 3)
    for at in np.ndindex(omega.shape):
        single = medium.permittivity_series(float(omega[at]), 3)
        assert np.array_equal(whole[(slice(None), *at)], single)
