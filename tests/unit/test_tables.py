"""Tables to hand on: modes side by side, a curve, beta_k about a pump, a taper."""

import numpy as np
import pytest

import modesolve
from materials.common.errors import NoGuidedMode, OutOfRange
from modesolve.mode import find_mode
from modesolve.tables import beta_table, dispersion_table, mode_table, taper_table

SECTION = modesolve.CrossSection(
    core="Si3N4-Luke2015",
    cladding="SiO2-Malitson1965",
    substrate="SiO2-Malitson1965",
    width_um=1.6,
    height_um=0.8,
)


@pytest.fixture(scope="module")
def curve():
    return modesolve.dispersion(SECTION, 1.5, 1.6)


@pytest.fixture(scope="module")
def modes():
    return modesolve.solve_modes(SECTION, 1.55, 2)


def test_mode_table_is_the_modes_side_by_side(modes):
    table = mode_table(modes)
    assert table.mode.tolist() == ["TE0", "TM0"]
    for i, mode in enumerate(modes):
        for name in ("n_eff", "dispersion_ps_per_nm_km", "gamma_per_w_m", "loss_db_per_cm"):
            assert getattr(table, name)[i] == getattr(mode, name)
            assert table.error[name][i] == mode.error[name]
    assert table.wavelength_um == pytest.approx(1.55)
    assert table.notes and table.provenance is modes[0].provenance


def test_dispersion_table_is_the_curve(curve):
    w = np.array([1.5, 1.53, 1.6])
    table = dispersion_table(curve, w, {"what": "test"})
    for name in ("n_eff", "n_group", "dispersion_ps_per_nm_km", "gamma_per_w_m"):
        np.testing.assert_array_equal(getattr(table, name), getattr(curve, name)(w))
        np.testing.assert_array_equal(table.error[name], curve.error[name](w))
        assert not getattr(table, name).flags.writeable
    assert table.zero_dispersion_um.shape == (0,)
    with pytest.raises(OutOfRange):
        dispersion_table(curve, [1.4])


def test_betas_agree_with_the_curve_and_with_the_mode(curve, modes):
    table = beta_table(curve, 1.55, orders=4)
    assert table.order.tolist() == [0, 1, 2, 3, 4]
    # beta_0 = 2 pi n_eff/lambda in 1/km, beta_1 = n_g/c in ps/km
    assert table.beta[0] == pytest.approx(2e9 * np.pi * curve.n_eff(1.55) / 1.55, rel=1e-12)
    assert table.beta[1] == pytest.approx(1e9 * curve.n_group(1.55) / 299.792458, rel=1e-12)
    mode = modes[0]
    for k, name in ((2, "beta2_ps2_per_km"), (3, "beta3_ps3_per_km")):
        assert table.beta[k] == pytest.approx(getattr(curve, name)(1.55), rel=1e-12)
        # two ways to the same number: apart by no more than their bars together
        allowed = table.error["beta"][k] + mode.error[name]
        assert abs(table.beta[k] - getattr(mode, name)) <= allowed
    assert (table.error["beta"] > 0).all()
    with pytest.raises(OutOfRange):
        beta_table(curve, 1.7)


def test_taper_rises_with_width_and_keeps_its_reasons():
    said = []
    table = taper_table(SECTION, [0.5, 1.0, 1.6], 1.55, "TE1", progress=said.append)
    assert np.isnan(table.n_eff[0]) and "no guided mode TE1" in table.reason[0]
    assert table.failed >= 1 and len(said) == 3
    assert np.isfinite(table.n_eff[2]) and table.reason[2] == ""
    assert np.isnan(table.error["n_eff"][0]) and table.error["n_eff"][2] > 0
    assert "width_um" not in table.inputs and table.inputs["core"] == "Si3N4-Luke2015"
    with pytest.raises(OutOfRange):
        taper_table(SECTION, [-1.0], 1.55)


def test_find_mode_names_what_there_is():
    assert find_mode(SECTION, 1.55, "TM0").label == "TM0"
    with pytest.raises(NoGuidedMode, match=r"no guided mode TE1 at 3.5 um: guided"):
        find_mode(SECTION, 3.5, "TE1")
