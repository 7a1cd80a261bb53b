"""solve_modes: what it returns and what it refuses."""

from __future__ import annotations

import dataclasses
import math
import pickle
from itertools import pairwise

import numpy as np
import pytest

import materials
from materials.common.errors import NoGuidedMode, OutOfRange, OutsideMaterialRange
from modesolve import CrossSection, solve_modes
from modesolve.scan import label_modes

SILICA, NITRIDE = "SiO2-Malitson1965", "Si3N4-Luke2015"


def nitride(**more):
    base = dict(core=NITRIDE, cladding=SILICA, substrate=SILICA, width_um=1.6, height_um=0.8)
    return CrossSection(**{**base, **more})


@pytest.fixture(scope="module")
def modes():
    return solve_modes(nitride(), 1.55, 4)


def test_modes_come_in_falling_index_with_labels(modes):
    assert [m.label for m in modes] == ["TE0", "TM0", "TE1", "TM1"]
    assert all(a.n_eff > b.n_eff for a, b in pairwise(modes))
    assert all((m.te_fraction >= 0.5) == m.label.startswith("TE") for m in modes)


def test_every_numeric_attribute_has_an_error_bar(modes):
    for mode in modes:
        for f in dataclasses.fields(mode):
            if f.metadata.get("unit") and f.name != "medium":
                assert np.all(np.isfinite(mode.error[f.name])), f.name
                assert isinstance(mode.error[f.name], float | np.ndarray)
    with pytest.raises((TypeError, AttributeError)):
        modes[0].error["n_eff"] = 0.0


def test_bars_are_small_and_positive(modes):
    for mode in modes:
        assert 0.0 < mode.error["n_eff"] < 2e-7
        assert 0.0 < mode.error["beta2_ps2_per_km"] < 0.05


def test_group_index_from_energy_agrees(modes):
    for mode in modes:
        allowed = mode.error["n_group"] + mode.error["n_group_from_energy"]
        assert abs(mode.n_group - mode.n_group_from_energy) < max(allowed, 1e-9)


def test_signs_and_units_hang_together(modes):
    for mode in modes:
        expected = -2.0 * math.pi * 299.792458 * mode.beta2_ps2_per_km / 1.55**2 * 1e-3
        assert mode.dispersion_ps_per_nm_km == pytest.approx(expected, rel=1e-12)
        expected = 2.0 * math.pi / 1.55 * mode_n2(mode) / mode.effective_area_um2 * 1e18
        assert mode.gamma_per_w_m == pytest.approx(expected, rel=1e-6)
        assert mode.loss_db_per_cm == 0.0


def mode_n2(mode):
    return mode.section.core.n2_m2_per_w


def test_results_repeat_bit_for_bit_and_pickle(modes):
    again = solve_modes(nitride(), 1.55, 4)
    for a, b in zip(modes, again, strict=True):
        assert a.n_eff == b.n_eff and a.beta4_ps4_per_km == b.beta4_ps4_per_km
        assert dict(a.error)["n_eff"] == dict(b.error)["n_eff"]
    thawed = pickle.loads(pickle.dumps(modes[0]))
    assert thawed.n_eff == modes[0].n_eff
    assert thawed.error["n_eff"] == modes[0].error["n_eff"]
    assert not thawed.index_weight.flags.writeable


def test_fewer_modes_come_with_the_reason():
    modes = solve_modes(nitride(width_um=0.6, height_um=0.4), 1.55, 6)
    assert 1 <= len(modes) < 6
    assert any("cut-off" in note for note in modes[0].notes)


def test_no_mode_below_the_cut_off_is_listed():
    """The modes of the numerical box are not guided modes."""
    modes = solve_modes(nitride(width_um=0.8, height_um=0.4), 1.55, 20)
    n_silica = materials.load(SILICA).index(1.55)
    assert all(m.n_eff > n_silica for m in modes)
    assert len(modes) < 6


def test_a_rib_mode_must_beat_the_slab_beside_it():
    section = CrossSection(
        core="Si-Salzberg1957", cladding=SILICA, substrate=SILICA,
        width_um=0.45, height_um=0.22, slab_um=0.09,
    )  # fmt: skip
    modes = solve_modes(section, 1.55, 6)
    # the 0.09 um silicon film in silica guides TE0 at 2.06
    assert all(m.n_eff > 2.0 for m in modes)
    assert modes[0].label == "TE0"


def test_missing_nonlinearity_is_a_note_not_an_error():
    section = CrossSection(
        core=materials.constant(2.0), cladding=materials.constant(1.444),
        substrate=materials.constant(1.444), width_um=1.2, height_um=0.6,
    )  # fmt: skip
    mode = solve_modes(section, 1.55, 1)[0]
    assert math.isnan(mode.gamma_per_w_m)
    assert any("gamma is NaN" in note for note in mode.notes)
    assert mode.effective_area_um2 > 0.0


@pytest.mark.parametrize(
    ("section", "wavelength", "error", "says"),
    [
        (nitride(), 1550.0, OutOfRange, "check the unit"),
        (nitride(), float("nan"), OutOfRange, "wavelength_um"),
        (nitride(), 6.5, OutsideMaterialRange, "Si3N4-Luke2015"),
        (nitride(width_um=0.2, height_um=0.1), 1.55, NoGuidedMode, "no guided mode"),
        (nitride(core=SILICA, cladding=NITRIDE), 1.55, NoGuidedMode, "not above"),
    ],
)
def test_requests_that_cannot_be_met(section, wavelength, error, says):
    with pytest.raises(error) as caught:
        solve_modes(section, wavelength)
    assert says in str(caught.value)


def test_count_is_checked():
    with pytest.raises(OutOfRange, match="count"):
        solve_modes(nitride(), 1.55, 0)


def test_labels_number_each_polarisation_by_itself():
    assert label_modes([0.9, 0.1, 0.8, 0.5, 0.49]) == ["TE0", "TM0", "TE1", "TE2", "TM1"]


def test_fields_unfold_with_the_right_parity(modes):
    te, tm = modes[0].fields(), modes[1].fields()
    assert np.allclose(te.x_um, -te.x_um[::-1])
    # TE0: Ex even, Ey odd; TM0: Ey even, Ex odd
    assert np.allclose(te.e_x, te.e_x[::-1]) and np.allclose(te.e_y, -te.e_y[::-1])
    assert np.allclose(tm.e_y, tm.e_y[::-1]) and np.allclose(tm.e_x, -tm.e_x[::-1])
    # transverse field real, longitudinal imaginary in a lossless guide
    assert np.allclose(te.e_x.imag, 0.0) and np.allclose(te.e_z.real, 0.0)
