"""Fits of measured tables: invented truths come back, bad tables are told apart."""

from dataclasses import replace

import numpy as np
import pytest

import materials
from materials import resonance_fit
from materials.common import series
from materials.common.errors import InputError, OutOfRange

C_UM_PER_PS = 299.792458
W = np.linspace(0.5, 2.0, 31)


def sellmeier(w, *pairs, far=0.0):
    return np.sqrt(1 + sum(a * w**2 / (w**2 - b**2) for a, b in pairs) - far * w**2)


def omega(wavelength_um):
    return 2 * np.pi * C_UM_PER_PS / wavelength_um


def one_sigma(medium, wavelength_um):
    """Standard deviation of n, n_group and beta2 from the variations of eps."""
    at = omega(wavelength_um)
    n = medium.index_series(at, 2)
    out = np.zeros(3)
    for variation in medium.variation_series(at, 2):
        beta = series.multiply(series.variable(at, 2), series.divide(variation, 2 * n))
        out += (beta / C_UM_PER_PS * np.array([C_UM_PER_PS / at, C_UM_PER_PS, 2e9])) ** 2
    return np.sqrt(out)


def values(medium, wavelength_um):
    return np.array(
        [
            medium.index(wavelength_um),
            medium.group_index(wavelength_um),
            medium.beta2_ps2_per_km(wavelength_um),
        ]
    )


@pytest.mark.parametrize(
    ("pairs", "far", "terms"),
    [
        ([(2.9, 0.14)], 0.0, 1),
        ([(2.9, 0.14)], 0.012, 2),
        ([(1.3, 0.10), (1.6, 0.22)], 0.0, 2),
        ([(1.9, 0.12), (0.9, 0.23)], 0.01, 3),
    ],
)
def test_exact_truth_comes_back(pairs, far, terms):
    n = sellmeier(W, *pairs, far=far)
    medium = materials.from_table(W, n)
    assert medium.fit.terms == terms
    assert medium.fit.residual_max < 1e-9
    between = np.linspace(0.52, 1.98, 17)
    assert np.max(np.abs(medium.index(between) - sellmeier(between, *pairs, far=far))) < 1e-9


def test_constants_come_back():
    medium = materials.from_table(W, sellmeier(W, (2.9, 0.14)), terms=1)
    far, _, strength, pole = medium.coefficients
    assert far == 0.0
    assert strength == pytest.approx(2.9, rel=1e-12)
    assert np.sqrt(pole) == pytest.approx(0.14, rel=1e-10)


def test_far_pole_comes_back():
    n = np.sqrt(1 + 2.9 * W**2 / (W**2 - 0.14**2) + 1.5 * W**2 / (W**2 - 81.0))
    far, inverse, *_ = materials.from_table(W, n, terms=2).coefficients
    # n sees the pole's place only through v l^2 = 0.05 at most
    assert inverse**-0.5 == pytest.approx(9.0, rel=1e-5)
    assert far / inverse == pytest.approx(1.5, rel=1e-5)


def test_order_of_the_rows_and_sigma_leave_the_fit_alone():
    rng = np.random.default_rng(5)
    n = sellmeier(W, (2.9, 0.14)) + rng.normal(0.0, 1e-4, W.size)
    up = materials.from_table(W, n, terms=1)
    down = materials.from_table(W[::-1], n[::-1], terms=1, sigma=1e-4)
    assert down.index(1.2) == pytest.approx(up.index(1.2), rel=1e-12)
    assert up.range_um == down.range_um == (0.5, 2.0)
    again = materials.from_table(W, n, terms=1)
    assert again.coefficients == up.coefficients  # deterministic


def test_weights_count():
    """Points of large sigma pull little: the fit follows the trusted ones."""
    n = sellmeier(W, (2.9, 0.14))
    sigma = np.full(W.size, 1e-5)
    n[::3] += 0.01
    sigma[::3] = 1.0
    medium = materials.from_table(W, n, sigma=sigma, terms=1)
    assert medium.index(1.2) == pytest.approx(float(sellmeier(1.2, (2.9, 0.14))), abs=1e-8)


def pulls(pairs, terms, count, sigma):
    """Fit minus truth over the stated error of n, n_group, beta2; noise 1e-4."""
    # the truth in closed form: the formula's coefficients are those it was made with
    truth = replace(
        materials.from_table(W, sellmeier(W, *pairs), terms=len(pairs)),
        coefficients=(0.0, 0.0, *(x for a, b in pairs for x in (a, b**2))),
    )
    rng = np.random.default_rng(20240607)
    out = []
    for _ in range(count):
        n = sellmeier(W, *pairs) + rng.normal(0.0, 1e-4, W.size)
        medium = materials.from_table(W, n, sigma=sigma, terms=terms)
        out.append((values(medium, 1.2) - values(truth, 1.2)) / one_sigma(medium, 1.2))
    return np.array(out)


@pytest.mark.parametrize("sigma", [1e-4, None])
def test_pulls_of_one_resonance(sigma):
    found = pulls([(2.9, 0.14)], 1, 200, sigma)
    # 4 standard errors each way: 0.28 on the mean, 0.2 on the standard deviation
    assert np.all(np.abs(found.mean(axis=0)) < 0.28)
    assert np.all(np.abs(found.std(axis=0) - 1.0) < 0.2)


def test_pulls_where_the_arrangement_is_open():
    """Noise hides which of two resonances is which; the error covers that choice too."""
    found = pulls([(1.3, 0.10), (1.6, 0.22)], 2, 60, 1e-4)
    rms = np.sqrt(np.mean(found**2, axis=0))
    # 4 standard errors of 60 samples are 0.37 either way of 1
    assert np.all((rms > 0.63) & (rms < 1.37))


def test_arrangements_left_open_are_kept():
    rng = np.random.default_rng(11)
    n = sellmeier(W, (1.3, 0.10), (1.6, 0.22)) + rng.normal(0.0, 1e-4, W.size)
    medium = materials.from_table(W, n, sigma=1e-4, terms=2)
    assert medium.fit.alternatives
    assert all(0.0 < weight < 1.0 for weight, _ in medium.fit.alternatives)
    at = omega(1.2)
    rows = medium.variation_series(at, 2)
    assert len(rows) == medium.fit.covariance.shape[0] + len(medium.fit.alternatives)
    weight, coefficients = medium.fit.alternatives[0]
    other = replace(medium, coefficients=coefficients).permittivity_series(at, 2)
    expected = np.sqrt(weight) * (other - medium.permittivity_series(at, 2))
    assert np.allclose(rows[medium.fit.covariance.shape[0]], expected, rtol=1e-12, atol=0.0)


def test_covariance_of_one_resonance_against_repeated_fits():
    rng = np.random.default_rng(7)
    truth = sellmeier(W, (2.9, 0.14))
    fits = [
        materials.from_table(W, truth + rng.normal(0.0, 1e-4, W.size), sigma=1e-4, terms=1)
        for _ in range(200)
    ]
    constants = np.array([f.coefficients[2:] for f in fits])
    seen = np.cov(constants.T)
    said = np.mean([f.fit.covariance for f in fits], axis=0)
    # 200 samples fix a variance to 10 %: 4 standard errors
    assert np.all(np.abs(seen / said - 1.0) < 0.4)
    root = fits[0].fit.covariance_root[2:]
    assert np.allclose(root @ root.T, fits[0].fit.covariance, rtol=1e-10)


def test_sigma_that_is_too_small_is_said_and_scaled():
    rng = np.random.default_rng(3)
    n = sellmeier(W, (2.9, 0.14)) + rng.normal(0.0, 1e-3, W.size)
    bold = materials.from_table(W, n, sigma=1e-5, terms=1)
    plain = materials.from_table(W, n, terms=1)
    assert any("scatter exceeds the stated sigma" in c for c in bold.caveats)
    assert np.allclose(one_sigma(bold, 1.2), one_sigma(plain, 1.2), rtol=1e-6)


def test_correlated_residuals_widen_the_error():
    n = sellmeier(W, (2.9, 0.14)) + 1e-4 * np.sin(4.0 * W)
    smooth = materials.from_table(W, n, terms=1)
    mixed = np.random.default_rng(1).permutation(1e-4 * np.sin(4.0 * W))
    shuffled = materials.from_table(W, sellmeier(W, (2.9, 0.14)) + mixed, terms=1)
    assert any("correlated" in c for c in smooth.caveats)
    assert one_sigma(smooth, 1.2)[0] > 1.5 * one_sigma(shuffled, 1.2)[0]


def test_few_points_give_few_terms():
    w = np.linspace(1.0, 1.6, 4)
    medium = materials.from_table(w, sellmeier(w, (2.9, 0.14)))
    assert medium.fit.terms == 1 and medium.fit.points == 4


def test_what_the_user_states_is_carried():
    medium = materials.from_table(
        W, sellmeier(W, (2.9, 0.14)), name="film A", n2_m2_per_w=3e-19, dn_dt_per_k=2e-5
    )
    assert medium.key == medium.name == "film A"
    assert medium.n2_m2_per_w == 3e-19 and medium.dn_dt_per_k == 2e-5
    assert medium.missing == ("two-photon absorption",)
    assert medium.range_um == (0.5, 2.0)
    with pytest.raises(OutOfRange, match="film A"):
        medium.index(2.1)


def test_structures_have_the_terms_and_constants_they_say():
    for terms in (1, 2, 3):
        for structure in resonance_fit.structures(terms):
            assert structure.terms == terms
            assert structure.free().sum() == structure.parameters
            assert structure.near >= 1


GOOD = sellmeier(W, (2.9, 0.14))


def changed(array, row, value):
    out = np.array(array, dtype=float)
    out[row] = value
    return out


@pytest.mark.parametrize(
    ("w", "n", "words"),
    [
        (W[:3], GOOD[:3], "3 points; a fit needs at least 4"),
        ([], [], "0 points"),
        (W, GOOD[:-1], "31 wavelengths and 30 indices"),
        (changed(W, 4, np.nan), GOOD, "wavelength_um of row 5 is nan"),
        (W, changed(GOOD, 6, np.inf), "index of row 7 is inf"),
        (changed(W, 5, W[4]), GOOD, "rows 5 and 6 have the same wavelength"),
        (changed(W, 5, 0.6), GOOD, "turn round at row 6"),
        (W.reshape(1, -1), GOOD.reshape(1, -1), "2 dimensions"),
        (["red"] * 5, GOOD[:5], "list of numbers"),
        (W, "n", "numbers"),
    ],
)
def test_bad_tables(w, n, words):
    with pytest.raises(InputError, match=words) as caught:
        materials.from_table(w, n, name="film")
    assert str(caught.value).startswith("film:") and "\n" not in str(caught.value)


@pytest.mark.parametrize(
    ("w", "n", "words"),
    [
        (1000 * W, GOOD, "look like nanometres"),
        (1e-6 * W, GOOD, "look like metres"),
        (C_UM_PER_PS / W[::-1], GOOD, "THz"),
        (-W, GOOD, "allowed are 0.05 to 100 um"),
        (changed(W, 0, 0.0), GOOD, "wavelength 0 um"),
        (W, GOOD - 1.5, "from 1 to 6"),
        (W, changed(GOOD, 2, 6.5), "index 6.5 of row 3"),
        (W, GOOD**4, "not n"),
    ],
)
def test_wrong_units_and_quantities(w, n, words):
    with pytest.raises(OutOfRange, match=words):
        materials.from_table(w, n)


@pytest.mark.parametrize("sigma", [0.0, -1e-4, np.nan, np.inf, [1e-4] * 5, "small"])
def test_bad_sigma(sigma):
    with pytest.raises(InputError, match="sigma"):
        materials.from_table(W, GOOD, sigma=sigma)


@pytest.mark.parametrize("terms", [0, 4, -1, 1.5, True, "2"])
def test_bad_terms(terms):
    with pytest.raises(InputError, match="give 1, 2 or 3"):
        materials.from_table(W, GOOD, terms=terms)


def test_too_many_terms_for_the_points():
    with pytest.raises(InputError, match="4 points for 2 resonances; give at least 5"):
        materials.from_table(W[:4], GOOD[:4], terms=2)
    assert materials.from_table(W[:5], GOOD[:5], terms=2).fit.terms == 2
    assert materials.from_table(W[:6], GOOD[:6], terms=3).fit.terms == 3


@pytest.mark.parametrize("extra", [{"n2_m2_per_w": np.nan}, {"dn_dt_per_k": "warm"}])
def test_bad_stated_values(extra):
    with pytest.raises(InputError):
        materials.from_table(W, GOOD, **extra)
