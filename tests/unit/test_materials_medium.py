"""A medium: ranges, errors, temperature, extrapolation, pickling."""

import pickle

import numpy as np
import pytest

import materials
from materials.common import series
from materials.common.errors import InputError, MissingData, OutOfRange, OutsideMaterialRange

C_UM_PER_PS = 299.792458


def omega(wavelength_um):
    return 2 * np.pi * C_UM_PER_PS / wavelength_um


def test_scalars_in_floats_out_and_arrays_broadcast():
    silica = materials.load("SiO2-Malitson1965")
    for method in (silica.index, silica.group_index, silica.beta2_ps2_per_km):
        assert type(method(1.55)) is float
        assert type(method(np.float64(1.55))) is float
        assert method([1.3, 1.55]).shape == (2,)
        assert method(np.full((2, 3), 1.55)).shape == (2, 3)
        assert method(np.empty(0)).shape == (0,)


def test_outside_the_range_names_medium_wavelength_range_and_paper():
    nitride = materials.load("Si3N4-Luke2015")
    with pytest.raises(OutsideMaterialRange) as caught:
        nitride.index([1.55, 9.0])
    message = str(caught.value)
    for part in ("Si3N4-Luke2015", "9 um", "0.31-5.504 um", "Opt. Lett. 40", "allow_extrapol"):
        assert part in message
    assert "\n" not in message
    for call in (nitride.group_index, nitride.beta2_ps2_per_km):
        with pytest.raises(OutsideMaterialRange):
            call(0.3)
    for call in (nitride.permittivity_series, nitride.index_series, nitride.variation_series):
        with pytest.raises(OutsideMaterialRange):
            call(omega(0.3), 2)


def test_the_ends_of_the_range_belong_to_it_after_a_detour_over_frequency():
    nitride = materials.load("Si3N4-Luke2015")
    for end in nitride.range_um:
        assert nitride.index(end) > 1.0
        assert nitride.index_series(omega(end), 1)[0] > 1.0
        assert nitride.index(C_UM_PER_PS / (C_UM_PER_PS / end)) > 1.0


@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf, 0.0, -1.55, [1.5, np.nan], "x", None])
def test_wavelengths_that_are_none(bad):
    for medium in (materials.load("SiO2-Malitson1965"), materials.constant(1.5)):
        with pytest.raises(InputError, match=r"wavelength .*um"):
            medium.index(bad)
    with pytest.raises(InputError, match="frequency"):
        materials.constant(1.5).permittivity_series(bad, 2)


def test_extrapolation_is_asked_for_and_marked():
    nitride = materials.load("Si3N4-Luke2015")
    wide = nitride.allow_extrapolation()
    assert wide.extrapolate and not nitride.extrapolate
    assert "may be extrapolated outside 0.31-5.504 um" in wide.caveats
    assert set(nitride.caveats) < set(wide.caveats)
    assert 1.7 < wide.index(5.8) < wide.index(5.5)
    assert wide.index(1.55) == nitride.index(1.55)
    assert wide.allow_extrapolation() is wide
    constant = materials.constant(2.0)
    assert constant.allow_extrapolation() is constant


def test_extrapolation_across_a_resonance_is_refused():
    wide = materials.load("SiO2-Malitson1965").allow_extrapolation()
    with pytest.raises(OutsideMaterialRange, match=r"no real index at 9\.8 um"):
        wide.index(9.8)  # below the resonance at 9.896 um: n^2 < 0
    with pytest.raises(OutsideMaterialRange, match="no real index"):
        wide.permittivity_series(omega(9.8), 2)


def test_constant_has_no_dispersion():
    medium = materials.constant(1.9963, name="core", n2_m2_per_w=2.4e-19)
    assert medium.index(1e-3) == medium.index(1e3) == 1.9963
    assert medium.group_index(1.55) == pytest.approx(1.9963, rel=1e-15)
    assert abs(medium.beta2_ps2_per_km(1.55)) < 1e-9
    assert medium.zero_dispersion_um().size == 0
    assert medium.range_um is None
    eps = medium.permittivity_series(1200.0, 4)
    assert eps[0] == 1.9963**2 and not eps[1:].any()
    assert medium.n2_m2_per_w == 2.4e-19 and medium.n2_citation == "given by the user"
    assert medium.missing == ("dn/dT", "two-photon absorption")


@pytest.mark.parametrize("bad", [0.999, 10.001, -2.0, 0.0])
def test_constant_outside_its_range(bad):
    with pytest.raises(OutOfRange, match="from 1 to 10"):
        materials.constant(bad)


@pytest.mark.parametrize("bad", [np.nan, np.inf, "two", None, [1.5, 1.6]])
def test_constant_that_is_no_number(bad):
    with pytest.raises(InputError):
        materials.constant(bad)
    with pytest.raises(InputError):
        materials.constant(1.5, n2_m2_per_w=np.inf)
    with pytest.raises(InputError):
        materials.constant(1.5, dn_dt_per_k="warm")


def test_temperature_shifts_the_index_by_its_slope():
    silica = materials.load("SiO2-Malitson1965")
    warm = silica.at_temperature(70.0)
    w = np.array([0.8, 1.31, 1.55])
    assert np.allclose(warm.index(w) - silica.index(w), 50.0 * silica.dn_dt_per_k, rtol=1e-9)
    assert np.allclose(
        warm.group_index(w) - silica.group_index(w), 50.0 * silica.dn_dt_per_k, rtol=1e-9
    )
    assert warm.beta2_ps2_per_km(1.55) == pytest.approx(silica.beta2_ps2_per_km(1.55), rel=1e-9)
    assert warm.temperature_degc == 70.0
    back = warm.at_temperature(20.0)
    assert back.index(1.55) == pytest.approx(silica.index(1.55), abs=1e-15)
    eps = silica.permittivity_series(omega(w), 3, temperature_degc=70.0)
    n = warm.index_series(omega(w), 3)
    assert np.allclose(eps, series.multiply(n, n), rtol=1e-15, atol=0.0)
    assert np.array_equal(silica.index_series(omega(w), 3, temperature_degc=70.0), n)


def test_temperature_counts_from_the_temperature_of_the_table():
    silicon = materials.load("Si-Salzberg1957")
    assert silicon.temperature_degc == 26.0
    shift = silicon.at_temperature(36.0).index(1.55) - silicon.index(1.55)
    assert shift == pytest.approx(10.0 * silicon.dn_dt_per_k, rel=1e-9)


def test_unstated_temperature_is_said():
    nitride = materials.load("Si3N4-Luke2015")
    assert nitride.temperature_degc is None
    caveats = nitride.at_temperature(30.0).caveats
    assert "states no temperature: 20 degC taken" in caveats
    assert any("linearly over 280 K" in c for c in nitride.at_temperature(300.0).caveats)


def test_missing_slope_names_the_medium():
    with pytest.raises(MissingData, match=r"GeO2-Fleming1984 has no dn/dT.*30 degC"):
        materials.load("GeO2-Fleming1984").at_temperature(30.0)
    with pytest.raises(MissingData, match="core has no dn/dT"):
        materials.constant(2.0, name="core").permittivity_series(1200.0, 1, temperature_degc=20.0)


@pytest.mark.parametrize("bad", [np.nan, np.inf, -273.15, -400.0])
def test_temperatures_that_are_none(bad):
    with pytest.raises(InputError, match="temperature"):
        materials.load("SiO2-Malitson1965").at_temperature(bad)


def test_series_is_the_function_of_frequency():
    """The series about one frequency gives the index at another (order 12, step 2 %)."""
    silicon = materials.load("Si-Salzberg1957")
    centre, step = omega(1.7), 0.02 * omega(1.7)
    there = 2 * np.pi * C_UM_PER_PS / (centre + step)
    n = series.evaluate(silicon.index_series(centre, 12), step)
    # distance to the pole at 1.1348 um is 0.5 of omega: the series ends at 0.04**13
    assert n == pytest.approx(silicon.index(there), rel=1e-14)
    eps = series.evaluate(silicon.permittivity_series(centre, 12), step)
    assert eps == pytest.approx(silicon.index(there) ** 2, rel=1e-14)


@pytest.mark.parametrize("key", ["SiO2-Malitson1965", "SiN-Vogt2015-n1.91", "air", "vacuum"])
def test_media_survive_pickling(key):
    medium = materials.load(key).allow_extrapolation()
    copy = pickle.loads(pickle.dumps(medium))
    w = np.linspace(0.7, 1.6, 7)
    assert np.array_equal(copy.index(w), medium.index(w))
    assert np.array_equal(copy.variation_series(omega(w), 2), medium.variation_series(omega(w), 2))
    assert copy.caveats == medium.caveats and repr(copy) == repr(medium)


def test_media_are_frozen():
    medium = materials.load("SiO2-Malitson1965")
    with pytest.raises(AttributeError):
        medium.n2_m2_per_w = 1.0
    fitted = materials.load("SiN-Vogt2015-n1.91")
    with pytest.raises(ValueError, match="read-only"):
        fitted.fit.covariance[0, 0] = 0.0


def test_variation_is_empty_for_a_published_formula():
    w = np.array([1.3, 1.55])
    assert materials.load("SiO2-Malitson1965").variation_series(omega(w), 3).shape == (0, 4, 2)
    assert materials.constant(2.0).variation_series(1200.0, 1).shape == (0, 2)


def test_variation_of_a_warm_medium_follows_the_shifted_index():
    """d eps = 2 (n + shift) dn, checked against a shifted refit of the coefficients."""
    w = np.linspace(0.6, 1.7, 23)
    n = np.round(np.sqrt(1 + 2.4 * w**2 / (w**2 - 0.15**2)), 4)
    cold = materials.from_table(w, n, terms=1, dn_dt_per_k=1e-3)
    warm = cold.at_temperature(70.0)
    at = omega(1.2)
    n_cold, n_warm = cold.index_series(at, 2), warm.index_series(at, 2)
    assert len(cold.variation_series(at, 2)) == 2
    for before, after in zip(
        cold.variation_series(at, 2), warm.variation_series(at, 2), strict=True
    ):
        dn = series.divide(before, 2 * n_cold)
        assert np.allclose(after, series.multiply(2 * n_warm, dn), rtol=1e-11, atol=0.0)
