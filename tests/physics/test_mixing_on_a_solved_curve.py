"""Channel and ring on a curve from the mode solver: smooth, consistent, with error bars."""

from __future__ import annotations

import numpy as np
import pytest

import materials
from materials.common.constants import C_UM_PER_PS, TWO_PI
from modesolve.cross_section import CrossSection
from modesolve.dispersion import dispersion
from phasematch import Channel, Ring
from phasematch.resonances import find_lines


@pytest.fixture(scope="module")
def nitride_curve():
    oxide = materials.load("SiO2-Malitson1965")
    section = CrossSection(
        core=materials.load("Si3N4-Luke2015"),
        cladding=oxide,
        substrate=oxide,
        width_um=1.6,
        height_um=0.8,
    )
    return dispersion(section, 1.4, 1.7, mode="TE0")


def test_second_differences_of_resonances_are_smooth_to_a_kilohertz(nitride_curve):
    ring = Ring(nitride_curve, radius_um=100, q_intrinsic=2e6, q_coupling=2e6)
    order = ring.resonances().order
    lines = find_lines(nitride_curve, 100.0, order)
    second_hz = 1e12 / TWO_PI * lines.misaligned(np.arange(1, len(order) - 1), 1)
    # a smooth function has no fourth difference to speak of; rounding has sqrt(70) of its own
    rough = np.abs(np.diff(second_hz, 4)).max() / np.sqrt(70)
    assert rough < 100.0


def test_misalignment_agrees_with_the_curve_s_own_beta2(nitride_curve):
    ring = Ring(nitride_curve, radius_um=100, q_intrinsic=2e6, q_coupling=2e6)
    table = ring.pairs(1.55, 10)
    d = ring.dispersion_coefficients(1.55)
    n_group = nitride_curve.n_group(table.pump_um)
    beta2 = 1e-9 * nitride_curve.beta2_ps2_per_km(table.pump_um)
    d1 = TWO_PI * 1e-3 * ring.fsr_ghz(table.pump_um)
    d2 = -C_UM_PER_PS / n_group * d1**2 * beta2
    assert d.d2_mhz == pytest.approx(1e6 * d2 / TWO_PI, rel=1e-9)
    series = d.d2_mhz * table.mu**2 + 1e-3 * d.d4_khz * table.mu**4 / 12
    # the sixth order is below 1e-6 at ten spacings of this ring
    np.testing.assert_allclose(table.misalignment_mhz, series, rtol=1e-6)


def test_bars_are_there_and_small(nitride_curve):
    ring = Ring(nitride_curve, radius_um=100, q_intrinsic=2e6, q_coupling=2e6)
    table = ring.pairs(1.55, 30)
    bar = table.error["misalignment_mhz"]
    assert np.all(bar > 0.0) and np.all(bar < 1e-3 * np.abs(table.misalignment_mhz))
    d = ring.dispersion_coefficients(1.55)
    relative = nitride_curve.error["beta2_ps2_per_km"](table.pump_um) / abs(
        nitride_curve.beta2_ps2_per_km(table.pump_um)
    )
    # D2 inherits the bar of beta2; n_g adds next to nothing
    assert d.error["d2_mhz"] / d.d2_mhz == pytest.approx(relative, rel=0.2)
    grid = Channel(nitride_curve, length_mm=10).map([1.53, 1.55], [1.5, 1.6], 0.1)
    assert np.all(grid.error["mismatch_per_m"] > 0.0)


def test_results_are_written_and_read_back(nitride_curve, tmp_path):
    pandas = pytest.importorskip("pandas")
    xarray = pytest.importorskip("xarray")
    ring = Ring(nitride_curve, radius_um=100, q_intrinsic=2e6, q_coupling=2e6)
    channel = Channel(nitride_curve, length_mm=10, loss_db_per_cm=0.2)
    table = ring.pairs(1.55, 200)
    table.to_csv(tmp_path / "pairs.csv")
    read = pandas.read_csv(tmp_path / "pairs.csv", comment="#")
    np.testing.assert_array_equal(read["misalignment_mhz"], table.misalignment_mhz)
    assert read["reason"].iloc[-1] == "outside the solved band"
    results = {
        "map": channel.map(np.linspace(1.5, 1.6, 3), np.linspace(1.45, 1.65, 4), 0.1),
        "band": channel.conversion_band(1.55, 0.1),
        "flux": channel.pair_flux(1.55, 0.1),
        "lines": ring.resonances(),
        "detuning": ring.detuning_map(count=5),
        "integrated": ring.integrated_dispersion(1.55, 5),
        "rates": ring.spontaneous(1.55, 1e-3, 5),
        "idler": ring.stimulated(1.55, 1e-3, 1e-6, 5),
        "d": ring.dispersion_coefficients(1.55),
    }
    for name, result in results.items():
        result.to_hdf5(tmp_path / f"{name}.h5")
        result.to_csv(tmp_path / f"{name}.csv")
        assert type(result).__name__ in repr(result)
        with xarray.open_dataset(tmp_path / f"{name}.h5", engine="h5netcdf") as data:
            for key, variable in data.variables.items():
                # text and yes or no have no unit
                unitless = variable.dtype.kind in "OUb" or "flag_values" in variable.attrs
                assert unitless or variable.attrs["units"], (name, key)
    with xarray.open_dataset(tmp_path / "detuning.h5", engine="h5netcdf") as data:
        assert data["misalignment_mhz"].dims == ("pump_order", "mu")
        assert data["misalignment_mhz"].attrs["units"] == "MHz"
