"""The model error of fitted media: smooth misfit, and bars that reach the other evidence."""

import math
import tomllib
from dataclasses import replace
from importlib import resources

import numpy as np
import pytest

import materials
import modesolve
from materials import formulas, model_error
from materials.common import series

C_UM_PER_PS = 299.792458
TWO_PI_C = 2 * np.pi * C_UM_PER_PS
W = np.linspace(0.5, 2.0, 120)


def beta2_bar(medium, wavelength_um):
    """Standard deviation of beta2, ps2/km, from the variations of eps."""
    at = TWO_PI_C / wavelength_um
    n = medium.index_series(at, 2)
    rows = medium.variation_series(at, 2)
    beta = [series.multiply(series.variable(at, 2), series.divide(row, 2 * n)) for row in rows]
    return 2e9 / C_UM_PER_PS * math.sqrt(sum(b[2] ** 2 for b in beta))


# -- catalogue -------------------------------------------------------------------------

#: beta2 at 1.55 um, ps2/km, of the same printed points by other ways (computed): "local"
#: is polynomials in frequency of degree 2 to 5 over 0.1 to 0.4 um either side.
EVIDENCE = [
    ("As2Se3-Joseph2020", (717.3, 748.0)),  # 3 resonances; local
    ("AlGaAs-x0.219-Papatryfonos2021", (1200.0, 1217.0)),  # formula of Gehrsitz 2000; local
    ("Si3N4-PECVD-Beliaev2022", (91.3, 94.0)),  # local
    ("AlN-sputtered-Beliaev2021", (87.7, 92.1)),  # local; other windows
    ("Ta2O5-Gao2012", (157.20, 157.24)),  # local
    ("Nb2O5-Lemarchand2013", (261.76, 261.79)),  # local
]


@pytest.mark.parametrize(("key", "evidence"), EVIDENCE)
def test_other_evidence_lies_within_the_bar(key, evidence):
    medium = materials.load(key)
    pull = (np.array(evidence) - medium.beta2_ps2_per_km(1.55)) / beta2_bar(medium, 1.55)
    # two one-sigma bars, and a tenth for the digits typed above (0.005 of a bar of 0.02)
    assert np.max(np.abs(pull)) < 2.1
    # and not a bar that would cover anything: the farther evidence is not lost in it
    assert np.max(np.abs(pull)) > 1.0 / 3.0


#: beta2 at 1.55 um and its bar, ps2/km (computed; the bar to one half either way).
BARS = [
    ("As2Se3-Joseph2020", 951.890, 208.0),  # its caveat says 25 %, this is 22 %
    ("AlGaAs-x0.219-Papatryfonos2021", 940.693, 243.0),
    ("Si3N4-PECVD-Beliaev2022", 90.901, 1.75),
    ("AlN-sputtered-Beliaev2021", 91.984, 2.60),
    ("Ta2O5-Gao2012", 157.176, 0.168),
    ("Nb2O5-Lemarchand2013", 261.805, 0.0218),
]


@pytest.mark.parametrize(("key", "beta2", "bar"), BARS)
def test_bars_of_fitted_tables(key, beta2, bar):
    medium = materials.load(key)
    assert abs(medium.beta2_ps2_per_km(1.55) - beta2) < 2e-3
    assert 0.5 * bar < beta2_bar(medium, 1.55) < 1.5 * bar


def test_caveats_of_the_fit_are_kept_in_the_catalogue():
    words = " / ".join(materials.load("As2Se3-Joseph2020").caveats)
    assert "residuals of neighbouring points are correlated (0.97)" in words
    assert "1 resonance leaves a smooth misfit of 2.3e-04 rms beside 5.4e-06" in words
    assert not any("misfit" in c for c in materials.load("Si3N4-PECVD-Beliaev2022").caveats)


def test_a_guide_shows_the_model_error_of_its_film():
    film = materials.load("Ta2O5-Gao2012")
    section = modesolve.CrossSection(
        core=film,
        cladding="SiO2-Malitson1965",
        substrate="SiO2-Malitson1965",
        width_um=1.6,
        height_um=0.7,
    )
    mode = modesolve.solve_modes(section, wavelength_um=1.55)[0]
    # d beta = weight k0 dn with a weight near 1: the film's bar, nearly
    ratio = mode.error["beta2_ps2_per_km"] / beta2_bar(film, 1.55)
    assert 0.8 < ratio < 1.2


# -- too few resonances ----------------------------------------------------------------


def nitride_points():
    table = resources.files("materials") / "tables" / "Si3N4-PECVD-Beliaev2022.toml"
    points = tomllib.loads(table.read_text(encoding="utf-8"))["points"]
    w, n = np.array(points["wavelength_um"]), np.array(points["index"])
    return w[w >= 0.4], n[w >= 0.4]


def test_one_resonance_forced_on_nitride_says_so_and_is_no_surer_than_it_is():
    w, n = nitride_points()
    one, two = (materials.from_table(w, n, terms=terms) for terms in (1, 2))
    assert any("1 resonance leaves a smooth misfit" in c for c in one.caveats)
    assert not any("misfit" in c for c in two.caveats)
    at = (0.6, 1.0, 1.55)
    off = np.array([one.beta2_ps2_per_km(x) - two.beta2_ps2_per_km(x) for x in at])
    assert np.all(np.abs(off) < 2.0 * np.array([beta2_bar(one, x) for x in at]))
    assert abs(off[-1]) == pytest.approx(2.61, abs=0.01)  # without the misfit 8 bars


def test_pulls_of_one_resonance_forced_on_two():
    """Noise 1e-5, misfit 50 times that: the bar is the misfit, and holds the truth."""
    pairs = [(1.3, 0.10), (1.6, 0.30)]
    exact = np.sqrt(1 + sum(a * W**2 / (W**2 - b**2) for a, b in pairs))
    rng = np.random.default_rng(3)
    pulls = []
    for _ in range(20):
        noisy = exact + rng.normal(0.0, 1e-5, W.size)
        medium = materials.from_table(W, noisy, terms=1, sigma=1e-5)
        assert any("smooth misfit" in c for c in medium.caveats)
        truth = replace(medium, coefficients=(0.0, 0.0, *(x for a, b in pairs for x in (a, b**2))))
        pulls += [
            (medium.beta2_ps2_per_km(x) - truth.beta2_ps2_per_km(x)) / beta2_bar(medium, x)
            for x in (0.8, 1.2, 1.55)
        ]
    assert 0.7 < np.sqrt(np.mean(np.square(pulls))) < 1.3


# -- the projection --------------------------------------------------------------------


def index_at(variations, wavelength_um, order=0):
    q = formulas.inverse_wavelength(TWO_PI_C / np.asarray(wavelength_um), order)
    return model_error.index_variations(q, (W[0], W[-1]), variations)


@pytest.mark.parametrize("printed_curve", [False, True])
@pytest.mark.parametrize("sigma", [None, np.linspace(1e-5, 3e-5, W.size)])
def test_a_smooth_misfit_comes_back_as_one_variation(printed_curve, sigma):
    x = np.log(W)
    smooth = 1e-3 * (0.3 - x + 2 * x**2 - x**3)
    noise = np.random.default_rng(2).normal(0.0, 1e-5, W.size)
    found = model_error.misfit(W, smooth + noise, 2, sigma, printed_curve)
    assert len(found.variations) == (9 if printed_curve else 1)  # 1 + degree 7 and lower
    # the misfit to 3 noises of a coefficient, 3 * 1e-5 * sqrt(8 coefficients/120 points)
    assert np.sqrt(np.mean((index_at(found.variations, W)[0, 0] - smooth) ** 2)) < 1e-5
    assert found.smooth_rms == pytest.approx(np.sqrt(np.mean(smooth**2)), rel=0.02)
    assert found.noise_rms == pytest.approx(1e-5, rel=0.25)  # 120 points: 4 standard errors


def test_noise_is_a_misfit_only_of_a_printed_curve():
    noise = np.random.default_rng(4).normal(0.0, 1e-4, W.size)
    assert model_error.misfit(W, noise, 2, None, False).variations.size == 0
    rows = model_error.misfit(W, noise, 2, None, True).variations
    # 8 orthonormal curves, each of at least the noise of one point, summed over all points
    total = np.sum(index_at(rows, W)[:, 0] ** 2)
    assert 0.7 * 8 * 1e-8 < total < 3.0 * 8 * 1e-8


def test_known_sigma_is_not_undercut():
    """Residuals far below their sigma are no sign of misfit, however smooth."""
    smooth = 1e-5 * np.log(W)
    assert model_error.misfit(W, smooth, 2, np.full(W.size, 1e-3), False).variations.size == 0
    assert model_error.misfit(W, smooth, 2, None, False).variations.size > 0


@pytest.mark.parametrize("points", [4, 5, 6, 7])
def test_few_points_have_no_misfit(points):
    w = W[:points]
    found = model_error.misfit(w, np.linspace(0, 1e-3, points), 2, None, True)
    assert found.variations.shape[0] == 0 and found.smooth_rms == 0.0


def test_variation_series_is_the_derivative_of_the_variation():
    rows = np.eye(5)
    at, step = TWO_PI_C / 1.3, 1.0
    terms = model_error.index_variations(formulas.inverse_wavelength(at, 8), (W[0], W[-1]), rows)
    moved = [series.evaluate(row, step) for row in terms]
    direct = index_at(rows, TWO_PI_C / (at + step))[:, 0]
    assert np.allclose(moved, direct, rtol=1e-13, atol=1e-14)
    x = 2 * np.log(1.3 / W[0]) / np.log(W[-1] / W[0]) - 1
    assert np.allclose(terms[:, 0], np.polynomial.legendre.legvander(x, 4), atol=1e-14)
