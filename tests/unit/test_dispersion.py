"""The dispersion curve against direct solves, and its manners."""

from __future__ import annotations

import pickle

import numpy as np
import pytest

from materials.common.constants import omega_from_um
from materials.common.errors import (
    NoGuidedMode,
    OutOfRange,
    OutsideMaterialRange,
    UnknownName,
)
from modesolve import CrossSection, dispersion, solve_modes
from modesolve.band import Band, BandFunction, leja_nodes
from modesolve.quantities import FIGURES

SILICA, NITRIDE = "SiO2-Malitson1965", "Si3N4-Luke2015"


def nitride(**more):
    base = dict(core=NITRIDE, cladding=SILICA, substrate=SILICA, width_um=1.6, height_um=0.8)
    return CrossSection(**{**base, **more})


@pytest.fixture(scope="module")
def curve():
    return dispersion(nitride(), 1.2, 2.0, mode="TE0")


def test_hermite_interpolation_converges_to_rounding():
    """sin over a band with five nodes: the fourth derivative costs six digits."""
    band = Band(1.0, 3.0)
    nodes = leja_nodes()[:5]
    x = np.array([band.frequency(t) for t in nodes])
    phases = [np.sin(x), np.cos(x), -np.sin(x) / 2, -np.cos(x) / 6, np.sin(x) / 24]
    made = BandFunction.from_series(band, nodes, np.array(phases).T)
    at = np.linspace(1.0, 3.0, 41)
    assert np.max(np.abs(made(at) - np.sin(at))) < 1e-13
    assert np.max(np.abs(made(at, 4) - np.sin(at))) < 5e-7


def test_curve_agrees_with_direct_solves_within_the_bars(curve):
    for wavelength in (1.231, 1.407, 1.613, 1.877):
        mode = solve_modes(nitride(), wavelength, 1)[0]
        for key in FIGURES:
            found, bar = getattr(curve, key)(wavelength), curve.error[key](wavelength)
            if key == "beta4_ps4_per_km" or not np.isfinite(getattr(mode, key)):
                continue
            gap = abs(found - getattr(mode, key))
            # two solves, each with its own bar; 1.5 of them for the box they do not share
            assert gap <= 1.5 * (bar + mode.error[key]), (key, wavelength)
        # measured: 6e-10 and 1.3e-3
        assert abs(curve.n_eff(wavelength) - mode.n_eff) < 5e-9
        assert abs(curve.beta2_ps2_per_km(wavelength) - mode.beta2_ps2_per_km) < 0.005


def test_curve_takes_few_solves(curve):
    """A handful of nodes: seven factorisations each at most, the label's search included."""
    assert len(curve.report.nodes_um) <= 6
    assert curve.report.factorisations <= 8 * len(curve.report.nodes_um)


def test_scalars_and_arrays(curve):
    assert isinstance(curve.n_eff(1.55), float)
    assert curve.n_eff(np.array([1.3, 1.5])).shape == (2,)
    assert curve.beta2_ps2_per_km([[1.3, 1.5], [1.6, 1.7]]).shape == (2, 2)
    assert isinstance(curve.error["n_eff"](1.55), float)


def test_derivatives_are_those_of_the_curve(curve):
    omega, h = omega_from_um(1.55), 1.0
    for k in range(4):
        up, down = (curve.beta_rad_per_um(omega + s * h, k) for s in (1, -1))
        slope = (up - down) / (2.0 * h)
        assert curve.beta_rad_per_um(omega, k + 1) == pytest.approx(slope, rel=1e-4)


def test_outside_the_band(curve):
    for wrong in (1.19, 2.1, [1.5, 2.3]):
        with pytest.raises(OutOfRange, match="solved band"):
            curve.n_eff(wrong)
    low, high = curve.band_rad_per_ps
    assert np.isnan(curve.beta_rad_per_um(0.9 * low))
    assert np.isnan(curve.beta_rad_per_um(np.array([low, 1.1 * high])))[1]
    assert curve.band_um == pytest.approx((1.2, 2.0))
    assert np.isfinite(curve.n_eff(1.2)) and np.isfinite(curve.n_eff(2.0))


def test_error_keys_are_the_methods(curve):
    for key in curve.error:
        assert callable(getattr(curve, key))


@pytest.mark.slow
def test_zero_dispersion_wavelength_has_its_bar():
    curve = dispersion(nitride(), 1.0, 2.2)
    zeros, bars = curve.zero_dispersion_um(), curve.error["zero_dispersion_um"]()
    assert zeros.shape == bars.shape == (2,)
    assert np.all(bars < 5e-5)
    # beta2 of separate solves changes sign there
    for zero in zeros:
        left, right = (
            solve_modes(nitride(), zero + s * 2e-4, 1)[0].beta2_ps2_per_km for s in (-1, 1)
        )
        assert left * right < 0.0


def test_a_curve_pickles_with_its_bars(curve):
    again = pickle.loads(pickle.dumps(curve))
    assert again.beta2_ps2_per_km(1.5) == curve.beta2_ps2_per_km(1.5)
    assert again.error["n_eff"](1.5) == curve.error["n_eff"](1.5)


def test_the_second_label_is_another_mode(curve):
    tm = dispersion(nitride(), 1.4, 1.7, mode="TM0")
    assert tm.te_fraction(1.55) < 0.1
    assert tm.n_eff(1.55) < curve.n_eff(1.55)


@pytest.mark.parametrize(
    ("ends", "mode", "error", "says"),
    [
        ((1.5, 1.5), "TE0", OutOfRange, "differ"),
        ((1.2, 8.0), "TE0", OutsideMaterialRange, "5.504"),
        ((1.5, 1.6), "HE11", UnknownName, "TE0"),
        ((1.5, 1.6), "TE9", NoGuidedMode, "TE0"),
        ((1500.0, 1.6), "TE0", OutOfRange, "check the unit"),
    ],
)
def test_requests_that_cannot_be_met(ends, mode, error, says):
    with pytest.raises(error) as caught:
        dispersion(nitride(), *ends, mode=mode)
    assert says in str(caught.value)


def test_cut_off_inside_the_band_names_the_wavelength():
    with pytest.raises(NoGuidedMode, match="um"):
        dispersion(nitride(width_um=0.5, height_um=0.35), 1.0, 3.5)
