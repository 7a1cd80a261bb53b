"""Whole-file writing, and CSV and HDF5 as outside readers see them."""

import json
import os
import pickle
import subprocess
import sys
from dataclasses import dataclass, field

import numpy as np
import pandas
import pytest
import xarray

from materials.common.csv_file import write_csv
from materials.common.errors import InputError, StorageError
from materials.common.files import Variable, whole_file, write_text
from materials.common.hdf5_file import write_hdf5
from materials.common.results import ErrorBars, Provenance, Result, make_provenance, quantity


@dataclass(frozen=True, slots=True, eq=False)
class Map(Result):
    pump_um: np.ndarray = quantity("pump wavelength", "um", ("pump_um",))
    signal_um: np.ndarray = quantity("signal wavelength", "um", ("signal_um",))
    idler_um: np.ndarray = quantity("idler wavelength", "um", ("pump_um", "signal_um"))
    amplitude: np.ndarray = quantity("amplitude", "1", ("pump_um", "signal_um"))
    aligned: np.ndarray = quantity("aligned", "1", ("pump_um",))
    reason: np.ndarray = quantity("reason", "", ("pump_um", "signal_um"))
    length_mm: float = quantity("length", "mm")
    label: str = quantity("mode", "")
    error: ErrorBars = field(default_factory=ErrorBars)
    inputs: dict = field(default_factory=dict)
    notes: tuple = ()
    provenance: Provenance | None = None


@pytest.fixture
def result():
    pump, signal = np.array([1.5, 1.55]), np.array([1.4, 1.6, 1.7])
    idler = 1 / (2 / pump[:, None] - 1 / signal)
    idler[1, 2] = np.nan
    reason = np.full((2, 3), "", dtype=object)
    reason[1, 2] = "idler outside the band, 1.2 to 1.65 um; #2"
    return Map(
        pump,
        signal,
        idler,
        np.exp(1j * idler),
        np.array([True, False]),
        reason,
        10.0,
        "TE0",
        error=ErrorBars(idler_um=np.full((2, 3), 1e-9), length_mm=0.1),
        inputs={"cross_section": {"width_um": 1.6, "core": "Si3N4-Luke2015"}, "bend": None},
        notes=("first", "second"),
        provenance=make_provenance(["Si3N4-Luke2015"], "ladder 3:4:5"),
    )


def test_csv_opens_with_pandas(result, tmp_path):
    path = tmp_path / "map.csv"
    result.to_csv(path)
    table = pandas.read_csv(path, comment="#")
    assert list(table.columns) == [
        "pump_um",
        "signal_um",
        "idler_um",
        "idler_um_error",
        "amplitude_re",
        "amplitude_im",
        "aligned",
        "reason",
    ]
    assert len(table) == 6
    cube = table["idler_um"].to_numpy().reshape(2, 3)
    np.testing.assert_array_equal(cube, result.idler_um)  # every digit
    np.testing.assert_array_equal(table["pump_um"][:3], [1.5, 1.5, 1.5])
    assert table["aligned"].tolist() == [True] * 3 + [False] * 3
    assert table["reason"][5] == result.reason[1, 2]
    header = [line for line in path.read_text().splitlines() if line.startswith("#")]
    assert "# column idler_um: idler wavelength [um]" in header
    assert "# input cross_section.width_um = 1.6" in header
    assert "# value length_mm = 10.0 [mm]" in header
    assert "# value length_mm_error = 0.1 [mm]" in header
    assert "# note second" in header


def test_hdf5_opens_with_xarray(result, tmp_path):
    path = tmp_path / "map.h5"
    result.to_hdf5(path)
    with xarray.open_dataset(path, engine="h5netcdf") as data:
        assert data["idler_um"].dims == ("pump_um", "signal_um")
        assert data["idler_um"].attrs == {"units": "um", "long_name": "idler wavelength"}
        np.testing.assert_array_equal(data["idler_um"], result.idler_um)
        np.testing.assert_array_equal(data["idler_um_error"], np.full((2, 3), 1e-9))
        assert data["idler_um_error"].attrs["units"] == "um"
        np.testing.assert_array_equal(data["signal_um"], [1.4, 1.6, 1.7])
        assert set(data.coords) == {"pump_um", "signal_um"}
        both = data["amplitude_re"].values + 1j * data["amplitude_im"].values
        np.testing.assert_array_equal(both, result.amplitude)
        assert data["aligned"].dtype == np.int8
        assert data["aligned"].values.tolist() == [1, 0]
        assert data["reason"].values.tolist() == result.reason.tolist()
        assert data["label"].item() == "TE0"
        assert data["length_mm"].item() == 10.0
        assert json.loads(data.attrs["inputs"])["cross_section"]["core"] == "Si3N4-Luke2015"
        assert json.loads(data.attrs["provenance"])["grid"] == "ladder 3:4:5"
        assert data.attrs["notes"] == "first\nsecond"


def test_axis_without_values(tmp_path):
    column = Variable("gap_mhz", np.array([1.0, 2.0]), ("pair",), "MHz", "misalignment")
    write_hdf5(tmp_path / "a.h5", [column], title="pairs")
    with xarray.open_dataset(tmp_path / "a.h5", engine="h5netcdf") as data:
        assert dict(data.sizes) == {"pair": 2}
        assert list(data.variables) == ["gap_mhz"]
    write_csv(tmp_path / "a.csv", [column], title="pairs")
    table = pandas.read_csv(tmp_path / "a.csv", comment="#")
    assert table["pair"].tolist() == [0, 1]


def test_scalars_alone_are_one_row(tmp_path):
    scalar = Variable("flux_per_s", np.array(3.5), (), "1/s", "flux", np.array(0.1))
    word = Variable("counted", np.array("pairs"), (), "", "what")
    write_csv(tmp_path / "a.csv", [scalar, word], title="flux")
    table = pandas.read_csv(tmp_path / "a.csv", comment="#")
    assert table.to_dict("records") == [
        {"flux_per_s": 3.5, "flux_per_s_error": 0.1, "counted": "pairs"}
    ]


def test_a_table_of_one_row_beside_scalars(tmp_path):
    scalar = Variable("w_um", np.array(1.55), (), "um", "wavelength")
    column = Variable("n_eff", np.array([1.8]), ("mode",), "1", "index")
    write_csv(tmp_path / "a.csv", [scalar, column], title="modes")
    table = pandas.read_csv(tmp_path / "a.csv", comment="#")
    assert table.to_dict("list") == {"mode": [0], "n_eff": [1.8]}


def test_a_list_apart_from_the_table_goes_to_the_header(tmp_path):
    w = Variable("w_um", np.array([1.0, 2.0, 3.0]), ("w_um",), "um", "wavelength")
    for zeros in ([], [1.5], [1.2, 1.7]):
        zero = Variable("zero_um", np.array(zeros), ("crossing",), "um", "zero dispersion")
        write_csv(tmp_path / "a.csv", [zero, w], title="curve")
        table = pandas.read_csv(tmp_path / "a.csv", comment="#")
        assert table.to_dict("list") == {"w_um": [1.0, 2.0, 3.0]}
        assert f"# value zero_um = {zeros} [um]" in (tmp_path / "a.csv").read_text()


def test_empty_table(tmp_path):
    column = Variable("zero_um", np.array([]), ("crossing",), "um", "zero dispersion")
    write_hdf5(tmp_path / "a.h5", [column], title="none")
    write_csv(tmp_path / "a.csv", [column], title="none")
    assert len(pandas.read_csv(tmp_path / "a.csv", comment="#")) == 0
    with xarray.open_dataset(tmp_path / "a.h5", engine="h5netcdf") as data:
        assert data["zero_um"].shape == (0,)


def test_axes_in_another_order(tmp_path):
    """An array whose axes stand the other way round lands on the right rows."""
    a = Variable("a", np.array([1, 2]), ("a",), "1", "a")
    b = Variable("b", np.array([10, 20, 30]), ("b",), "1", "b")
    f = Variable("f", np.add.outer([10, 20, 30], [1, 2]), ("b", "a"), "1", "sum")
    write_csv(tmp_path / "f.csv", [a, b, f], title="sum")
    table = pandas.read_csv(tmp_path / "f.csv", comment="#")
    assert (table["a"] + table["b"] == table["f"]).all()
    write_hdf5(tmp_path / "f.h5", [a, b, f], title="sum")
    with xarray.open_dataset(tmp_path / "f.h5", engine="h5netcdf") as data:
        assert float(data["f"].sel(a=2, b=30)) == 32


def test_disagreeing_axes_are_refused(tmp_path):
    one = Variable("one", np.zeros(3), ("x",), "1", "one")
    two = Variable("two", np.zeros(4), ("x",), "1", "two")
    with pytest.raises(InputError, match="two: 4 values along x, where others have 3"):
        write_csv(tmp_path / "a.csv", [one, two], title="")
    with pytest.raises(InputError, match="one name per axis"):
        Variable("one", np.zeros((3, 2)), ("x",), "1", "one")
    assert not list(tmp_path.iterdir())


def test_failed_writing_leaves_the_old_file(tmp_path):
    path = tmp_path / "a.txt"
    write_text(path, "old")
    with pytest.raises(KeyboardInterrupt), whole_file(path) as temporary:
        temporary.write_text("half")
        raise KeyboardInterrupt
    assert path.read_text() == "old"
    assert [p.name for p in tmp_path.iterdir()] == ["a.txt"]


def test_missing_folder_is_a_storage_error(tmp_path, result):
    path = tmp_path / "nowhere" / "map.csv"
    for write in (result.to_csv, result.to_hdf5):
        with pytest.raises(StorageError, match=r"nowhere.*No such file.*check that the folder"):
            write(path)
    try:
        result.to_csv(path)
    except StorageError as error:
        assert str(pickle.loads(pickle.dumps(error))) == str(error)


def test_permissions_follow_the_umask(tmp_path):
    old = os.umask(0o022)
    try:
        write_text(tmp_path / "a.txt", "text")
    finally:
        os.umask(old)
    assert (tmp_path / "a.txt").stat().st_mode & 0o777 == 0o644


def test_a_link_is_written_through(tmp_path):
    (tmp_path / "real.txt").write_text("old")
    (tmp_path / "link.txt").symlink_to(tmp_path / "real.txt")
    write_text(tmp_path / "link.txt", "new")
    assert (tmp_path / "link.txt").is_symlink()
    assert (tmp_path / "real.txt").read_text() == "new"


KILLED = """
import os, sys
from materials.common.files import whole_file
with whole_file(sys.argv[1]) as temporary:
    temporary.write_bytes(b"x" * 100000)
    os.kill(os.getpid(), 9)
"""


def test_a_killed_writer_leaves_the_old_file(tmp_path):
    path = tmp_path / "a.txt"
    write_text(path, "old")
    done = subprocess.run([sys.executable, "-c", KILLED, str(path)], check=False)
    assert done.returncode == -9
    assert path.read_text() == "old"
