"""The command: verbs, exit codes, what goes to stdout and what to stderr."""

import io
import os
import pty
import re
import signal
import subprocess
import sys
import time
from pathlib import Path

import pandas
import pytest
import xarray

import phasematch
from materials.common import errors
from phasematch import cli
from phasematch.caution import LASER_CAUTION
from phasematch.design_file import read_design
from phasematch.outputs import file_names

DESIGN = """
[cross_section]
core = "Si3N4-Luke2015"
cladding = "SiO2-Malitson1965"
substrate = "SiO2-Malitson1965"
width_um = 1.6
height_um = 0.8
[band]
from_um = 1.5
to_um = 1.6
points = 5
[mode]
count = 1
[channel]
length_mm = 10
pump_um = 1.55
pump_w = 0.1
map_points = 5
[ring]
radius_um = 100
q_intrinsic = 2e6
q_coupling = 2e6
pump_um = 1.55
pairs = 5
[output]
resolution_dpi = 60
"""


@pytest.fixture
def here(tmp_path, monkeypatch):
    """A folder with design.toml, to work in."""
    monkeypatch.chdir(tmp_path)
    Path("design.toml").write_text(DESIGN)
    return tmp_path


@pytest.fixture
def idlermap(here, capsys):
    """Run the command in this process; gives exit code, stdout, stderr."""
    before = {number: signal.getsignal(number) for number in (signal.SIGTERM, signal.SIGINT)}

    def run(*arguments):
        with pytest.raises(SystemExit) as stopped:
            cli.main(list(arguments))
        out, err = capsys.readouterr()
        return stopped.value.code, out, err

    yield run
    for number, handler in before.items():
        signal.signal(number, handler)


# ---------------------------------------------------------------- verbs


def test_run_writes_everything_and_says_it_short(idlermap, here):
    code, out, err = idlermap("run", "design.toml", "-o", "out")
    assert code == 0
    written = {p.name for p in (here / "out").iterdir()}
    assert written == {
        "modes.csv", "mode_field.h5", "mode_field.png",
        "dispersion.csv", "dispersion.h5", "dispersion.png",
        "channel_map.h5", "channel_map.png", "conversion_band.csv", "pair_flux.csv",
        "ring_pairs.csv", "ring_pairs.h5", "ring_misalignment.png",
        "detuning_map.h5", "detuning_map.png", "ring_dispersion.csv",
        "design.toml", "summary.txt", "files.txt",
    }  # fmt: skip
    assert set((here / "out" / "files.txt").read_text().split()) == written
    assert set(file_names(read_design("design.toml"))) == written
    assert re.search(r"TE0 +1\.83454\d+\(\d+\)", out)
    assert " ".join(LASER_CAUTION.split()) in " ".join(out.split())
    assert max(map(len, out.splitlines())) <= 80
    assert "\x1b" not in out + err
    assert all(line.startswith("idlermap: ") for line in err.splitlines())
    assert "modes at 1.55 um" in err and "modes at 1.55 um" not in out
    summary = (here / "out" / "summary.txt").read_text()
    assert LASER_CAUTION in summary and "Si3N4-Luke2015" in summary
    for name, columns in (
        ("modes", {"n_eff", "n_eff_error", "loss_db_per_cm"}),
        ("dispersion", {"wavelength_um", "n_eff", "n_eff_error", "gamma_per_w_m"}),
        ("ring_pairs", {"mu", "misalignment_mhz", "misalignment_mhz_error", "aligned"}),
    ):
        table = pandas.read_csv(here / "out" / f"{name}.csv", comment="#")
        assert columns <= set(table.columns), name
        assert len(table) == {"modes": 1, "dispersion": 5, "ring_pairs": 5}[name]
    for name, variable, shape in (
        ("dispersion", "n_eff", (5,)),
        ("channel_map", "efficiency_db", (5, 5)),
        ("ring_pairs", "misalignment_mhz_error", (5,)),
    ):
        with xarray.open_dataset(here / "out" / f"{name}.h5", engine="h5netcdf") as data:
            assert data[variable].shape == shape
            assert data[variable].attrs["units"]


def test_resolved_design_runs_again_with_the_same_numbers(idlermap, here):
    assert idlermap("run", "design.toml", "-o", "one", "--set", 'output.figures="none"')[0] == 0
    assert idlermap("run", "one/design.toml", "-o", "two")[0] == 0
    for name in ("dispersion", "ring_pairs", "modes"):
        tables = [
            pandas.read_csv(here / folder / f"{name}.csv", comment="#") for folder in ("one", "two")
        ]
        pandas.testing.assert_frame_equal(*tables, check_exact=True)
    text = (here / "one" / "design.toml").read_text()
    assert '# materials: ["Si3N4-Luke2015", "SiO2-Malitson1965"]' in text
    assert "points = 5" in text and "slab_um = 0.0" in text


def test_a_full_folder_is_refused_before_any_work(idlermap, here):
    (here / "out").mkdir()
    (here / "out" / "mine.txt").write_text("mine")
    code, out, err = idlermap("run", "design.toml", "-o", "out")
    assert (code, out) == (cli_codes().STORAGE, "")
    assert err == (
        "idlermap: the output folder out is not empty; give another name, or --replace to "
        "replace it\n"
    )
    arguments = ["run", "design.toml", "-o", "out", "--replace", "--set", 'output.figures="none"']
    assert idlermap(*arguments)[0] == 0
    assert (here / "out" / "mine.txt").read_text() == "mine"
    assert (here / "out" / "dispersion.csv").exists()


def test_replacing_never_takes_the_design_or_a_file_of_the_user(idlermap, here):
    """Exit 5 and one line before any work; the folder stays as it was."""
    out, arguments = here / "out", ["-o", "out", "--replace"]
    out.mkdir()
    (out / "design.toml").write_text(DESIGN)
    code, said, err = idlermap("run", "out/design.toml", *arguments)
    assert (code, said, len(err.splitlines())) == (5, "", 1) and "out/design.toml is the" in err
    (out / "files.txt").write_text("design.toml\nfiles.txt\n")  # also when a run listed it
    assert idlermap("run", "out/design.toml", *arguments)[0] == 5
    (out / "modes.csv").write_text("mine")
    code, said, err = idlermap("run", "design.toml", *arguments)
    assert (code, said, len(err.splitlines())) == (5, "", 1)
    assert "modes.csv in out was not written by an earlier run" in err
    assert (out / "design.toml").read_text() == DESIGN
    assert (out / "modes.csv").read_text() == "mine"
    assert sorted(p.name for p in out.iterdir()) == ["design.toml", "files.txt", "modes.csv"]


def test_a_table_never_replaces_the_design(idlermap, here):
    (here / "design.csv").write_text(DESIGN)
    code, _, err = idlermap("modes", "design.csv", "-o", "design.csv", "--replace")
    assert code == 5 and "design.csv is the design" in err
    assert (here / "design.csv").read_text() == DESIGN


def test_the_names_of_a_run_are_known_before_it(here):
    names = file_names(read_design("design.toml", ["ring.pump_w=0.01", 'output.figures="pdf"']))
    assert {"pair_rates.csv", "channel_map.pdf", "files.txt"} <= set(names)
    bare = file_names(read_design("design.toml", ['output.figures="none"']))
    assert "pair_rates.csv" not in bare and not any(n.endswith("none") for n in bare)


def test_modes_columns_in_order(idlermap):
    code, out, _ = idlermap("modes", "design.toml", "-o", "modes.csv")
    assert code == 0
    header = out.splitlines()[1]
    places = [header.index(word) for word in ("mode", "n_eff", "D ", "gamma", "area", "loss")]
    assert places == sorted(places)
    assert pandas.read_csv("modes.csv", comment="#")["mode"].tolist() == ["TE0"]


@pytest.mark.parametrize(
    ("verb", "words"),
    [
        ("dispersion", ["Dispersion of TE0", "1.525", "Zero dispersion: none"]),
        ("channel", ["Channel, 10 mm, 0.1 W", "best signal", "Caution"]),
        ("ring", ["D2/2pi", "Pairs, cold", "linewidths"]),
    ],
)
def test_single_verbs(idlermap, verb, words):
    code, out, _ = idlermap(verb, "design.toml", "-o", "result.h5")
    assert code == 0
    for word in words:
        assert word in out
    assert ("Caution" in out) == (verb == "channel")  # goes with a pump power
    with xarray.open_dataset("result.h5", engine="h5netcdf") as data:
        assert data.sizes
    code, _, err = idlermap(verb, "design.toml", "-o", "result.h5")
    assert code == cli_codes().STORAGE and "result.h5 exists" in err


def test_export_writes_csv_to_stdout_or_a_file(idlermap, here):
    code, out, _ = idlermap("export", "curve", "design.toml", "--points", "3")
    assert code == 0
    table = pandas.read_csv(io.StringIO(out), comment="#")
    assert {"n_eff", "n_group", "beta2_ps2_per_km", "dispersion_ps_per_nm_km"} <= set(table)
    assert {"effective_area_um2", "gamma_per_w_m"} <= set(table)
    assert table["wavelength_um"].tolist() == [1.5, 1.55, 1.6]
    code, out, _ = idlermap("export", "betas", "design.toml", "-o", "betas.csv")
    assert (code, out) == (0, "")
    betas = pandas.read_csv("betas.csv", comment="#")
    assert betas["order"].tolist() == [0, 1, 2, 3, 4]
    # beta2 of the table about the pump and of the curve are one number
    assert betas["beta"][2] == pytest.approx(table["beta2_ps2_per_km"][1], rel=1e-9)


def test_export_taper_marks_what_failed(idlermap):
    code, out, err = idlermap(
        "export", "taper", "design.toml", "--set", 'mode.label="TE1"',
        "--from-um", "0.6", "--to-um", "1.6", "--points", "2",
    )  # fmt: skip
    assert code == cli_codes().FAILED_POINTS
    table = pandas.read_csv(io.StringIO(out), comment="#")
    assert table["n_eff"].isna().tolist() == [True, False]
    assert "no guided mode TE1" in table["reason"][0]
    assert "points without a value: 1" in err


def test_new_check_and_resolved(idlermap):
    assert idlermap("new", "start.toml")[0] == 0
    assert idlermap("check", "start.toml") == (0, "start.toml: good\n", "")
    code, _, err = idlermap("new", "start.toml")
    assert code == cli_codes().STORAGE and "start.toml exists" in err
    assert idlermap("new", "-") == (0, Path("start.toml").read_text(), "")
    code, out, _ = idlermap("check", "--resolved", "start.toml")
    assert code == 0 and 'label = "TE0"' in out


def test_materials(idlermap):
    code, out, _ = idlermap("materials", "list", "malitson")
    assert code == 0 and "SiO2-Malitson1965" in out and "Luke" not in out
    code, out, _ = idlermap("materials", "show", "SiO2-Malitson1965")
    assert code == 0 and "1.4440236" in out and "Malitson, J. Opt. Soc. Am." in out
    code, _, err = idlermap("materials", "show", "SiO2-Malitson1956")
    assert code == cli_codes().USAGE and "SiO2-Malitson1965" in err


def test_files_of_single_verbs_carry_the_whole_design(idlermap, here):
    assert idlermap("ring", "design.toml", "-o", "pairs.csv")[0] == 0
    header = (here / "pairs.csv").read_text()
    for line in (
        '# input design.cross_section.core = "Si3N4-Luke2015"',
        "# input design.ring.q_intrinsic = 2000000.0",
        "# input radius_um = 100.0",
        "# provenance grid = ",
        "# provenance made.at = ",
    ):
        assert line in header


def test_every_file_that_states_a_pump_power_carries_the_caution(idlermap, here):
    assert idlermap("run", "design.toml", "-o", "out", "--set", 'output.figures="none"')[0] == 0
    assert idlermap("export", "betas", "design.toml", "-o", "out/betas.csv")[0] == 0
    for path in (here / "out").iterdir():
        if path.suffix == ".h5":
            with xarray.open_dataset(path, engine="h5netcdf") as data:
                text = data.attrs["inputs"] + "\n" + data.attrs["notes"]
        else:
            text = path.read_text()
        assert (LASER_CAUTION in text) == ("pump_w" in text or path.stem == "summary"), path.name
    unpowered = (here / "design.toml").read_text().split("[channel]")[0]
    (here / "bare.toml").write_text(unpowered)
    assert idlermap("export", "curve", "bare.toml", "-o", "curve.csv")[0] == 0
    assert "Caution" not in (here / "curve.csv").read_text()


def test_extrapolation_is_marked_on_results(idlermap, here):
    film = 'cross_section.core="Si3N4-Philipp1973"'  # measured up to 1.24 um
    code, _, err = idlermap("modes", "design.toml", "--set", film)
    assert code == 2 and "band.extrapolate = true" in err
    wider = ["--set", film, "--set", "band.extrapolate=true"]
    for verb in ("modes", "dispersion", "channel", "ring"):
        code, _, err = idlermap(verb, "design.toml", "-o", f"{verb}.csv", *wider)
        assert code == 0
        note = "Si3N4-Philipp1973: may be extrapolated outside"
        assert note in err and note in (here / f"{verb}.csv").read_text(), verb


def test_shell_completion(run_idlermap):
    done = run_idlermap(environment={"_IDLERMAP_COMPLETE": "bash_source"})
    assert done.returncode == 0 and "_idlermap_completion" in done.stdout


def test_version_and_help(idlermap):
    code, out, _ = idlermap("--version")
    assert code == 0 and out.startswith("idlermap, version ")
    code, out, _ = idlermap("--help")
    assert code == 0
    for number in (0, 1, 2, 3, 4, 5, 130):
        assert re.search(rf"^ +{number}  ", out, re.MULTILINE), number
    assert "_IDLERMAP_COMPLETE=bash_source" in out
    assert max(map(len, out.splitlines())) <= 80


# ---------------------------------------------------------------- exit codes


def cli_codes():
    from phasematch import exit_codes

    return exit_codes


def test_codes_are_the_documented_numbers():
    codes = cli_codes()
    assert (codes.FAULT, codes.USAGE, codes.FAILED_POINTS) == (1, 2, 3)
    assert (codes.RANGE, codes.STORAGE, codes.INTERRUPTED) == (4, 5, 130)


@pytest.mark.parametrize(
    ("arguments", "code", "words"),
    [
        (["modes", "none.toml"], 5, "cannot read none.toml: No such file"),
        (["modes", ""], 5, "give the path of a design file"),
        (["modes"], 2, "Missing argument 'DESIGN'. See \"idlermap modes --help\"."),
        (["modes", "design.toml", "-o", ""], 2, "the name is empty"),
        (["modes", "design.toml", "--count", "x"], 2, "'x' is not a valid integer"),
        (["modes", "design.toml", "--outputs", "x"], 2, "No such option"),
        (["materials", "show", "nope"], 2, "idlermap materials list"),
        (
            ["export", "taper", "design.toml", "--from-um", "1", "--to-um", "200"],
            4,
            "--to-um = 200 um: allowed core widths are 0.005 to 100 um",
        ),
        (
            [
                "export",
                "taper",
                "design.toml",
                "--from-um",
                "0.02",
                "--to-um",
                "0.03",
                "--points",
                "2",
                "--set",
                'mode.label="TE4"',
            ],
            4,
            "no width has a value; at 0.02 um: ",
        ),
        (["nonsense"], 2, "No such command"),
        (["modes", "design.toml", "-o", "modes.txt"], 2, "must end in .csv or .h5"),
        (["modes", "design.toml", "--set", "width=2"], 2, "write table.key=value"),
        (["modes", "design.toml", "--wavelength-um", "9"], 4, "9 um is outside"),
        (["modes", "design.toml", "--wavelength-um", "nan"], 4, "wavelength_um = nan"),
        (["modes", "design.toml", "--count", "0"], 4, "count = 0"),
        (["run", "design.toml", "-o", "o", "--set", 'mode.label="TM5"'], 4, "TM5"),
        (["modes", "design.toml", "-o", "no/where.csv"], 5, "no/where.csv"),
        (["run", "design.toml", "-o", "design.toml"], 5, "is a file"),
        (["run", "design.toml", "-o", ".", "--replace"], 5, "working in"),
    ],
)
def test_errors_are_lines_on_stderr_with_their_code(idlermap, here, arguments, code, words):
    found, out, err = idlermap(*arguments)
    assert (found, out) == (code, "")
    assert words in err
    assert err.splitlines()[-1].startswith("idlermap: ")
    assert not any(word in err for word in ("Traceback", "Usage:", "Try "))
    assert sorted(p.name for p in here.iterdir()) == ["design.toml"]


def test_a_bad_design_is_listed_line_by_line(idlermap):
    Path("bad.toml").write_text(
        DESIGN.replace("1.6\nheight", "-1.6\nheight").replace("pairs", "pair")
    )
    code, out, err = idlermap("run", "bad.toml", "-o", "out")
    assert (code, out) == (2, "")
    lines = err.splitlines()
    assert lines == [
        "bad.toml: cross_section.width_um = -1.6: must be a number from 0.005 to 100 um",
        "bad.toml: ring.pair = 5: no such key in [ring]; did you mean pairs?",
    ]
    code, out, again = idlermap("check", "bad.toml", "none.toml", "design.toml")
    assert (code, out) == (2, "design.toml: good\n")
    missing, *rest = again.splitlines()
    assert rest == lines and missing.startswith("idlermap: cannot read none.toml")
    assert idlermap("check", "none.toml", "design.toml")[:2] == (5, "design.toml: good\n")


def test_lengths_in_nanometres_are_guessed(idlermap):
    Path("nm.toml").write_text(
        DESIGN.replace("width_um = 1.6", "width_um = 1600").replace(
            "from_um = 1.5", "from_um = 1500"
        )
    )
    lines = idlermap("check", "nm.toml")[2].splitlines()
    assert lines[0].endswith("to 100 um (nm? 1600 nm are 1.6 um)")
    assert lines[1].startswith("nm.toml: band.from_um = 1500: must be")
    assert lines[1].endswith("(nm? 1500 nm are 1.5 um)")


def test_missing_table_for_a_verb(idlermap):
    Path("bare.toml").write_text(DESIGN.split("[channel]")[0])
    for verb in ("channel", "ring"):
        code, _, err = idlermap(verb, "bare.toml")
        assert code == 2 and f"bare.toml: [{verb}]: this table is missing" in err


@pytest.mark.parametrize(
    ("error", "code"),
    [
        (errors.NotConverged("a"), 1),
        (errors.OutsideMaterialRange("a"), 4),
        (errors.TooCloseToCutoff("a"), 4),
        (errors.UnknownName("a"), 2),
        (errors.MissingData("a"), 2),
        (errors.DesignFileError(("a",)), 2),
        (errors.StorageError("a"), 5),
        (KeyboardInterrupt(), 130),
    ],
)
def test_every_error_has_the_code_of_its_nearest_ancestor(idlermap, monkeypatch, error, code):
    def fail(*arguments):
        raise error

    monkeypatch.setattr("phasematch.cli.read", fail)
    found, out, err = idlermap("modes", "design.toml")
    assert (found, out) == (code, "")
    assert "Traceback" not in err and len(err.splitlines()) <= 2
    assert ("please report" in err) == (code == 1)


@pytest.mark.parametrize(
    ("verb", "changes", "code"),
    [
        # a core without n2: no gamma, so neither efficiency nor flux; misalignment needs none
        ("channel", ['cross_section.core="Nb2O5-Lemarchand2013"'], 3),
        ("run", ['cross_section.core="Nb2O5-Lemarchand2013"'], 3),
        ("ring", ['cross_section.core="Nb2O5-Lemarchand2013"'], 0),
        ("ring", ["ring.pump_w=10.0"], 3),  # far above the threshold of oscillation
        ("ring", ["ring.pairs=500"], 3),  # most lie outside the band
        ("channel", ["channel.pump_um=1.51"], 0),  # likewise the idlers of some signals
    ],
)
def test_missing_points_give_one_code_from_every_verb(idlermap, here, verb, changes, code):
    folder = ["-o", "out", "--set", 'output.figures="none"'] if verb == "run" else []
    sets = [word for change in changes for word in ("--set", change)]
    found, _, err = idlermap(verb, "design.toml", *folder, *sets)
    assert found == code, err
    assert ("points without a value" in err) == (code == 3)


@pytest.mark.parametrize(
    "arguments", [("materials", "list"), ("check", "--resolved", "design.toml"), ("--help",)]
)
def test_a_full_disk_or_a_reader_gone_away_is_no_bug(here, arguments):
    """Code 5; one line where the disk is full, none where nobody reads."""
    root = Path(phasematch.__file__).parents[1]
    command = [sys.executable, "-c", "from phasematch.cli import main; main()", *arguments]
    about = {"cwd": here, "env": {**os.environ, "PYTHONPATH": str(root)}}
    with open("/dev/full", "w") as full:
        done = subprocess.run(
            command, stdout=full, stderr=subprocess.PIPE, text=True, check=False, **about
        )
    line = "idlermap: cannot write to stdout: No space left on device; check that the disk has room"
    assert (done.returncode, done.stderr) == (5, f"{line}\n")
    read, write = os.pipe()
    os.close(read)
    done = subprocess.run(
        command, stdout=write, stderr=subprocess.PIPE, text=True, check=False, **about
    )
    os.close(write)
    assert (done.returncode, done.stderr) == (5, "")


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_interrupted_while_it_loads(here, number):
    """A signal in the middle of the imports ends it with 130 and not a word."""
    code = f"""
import os, sys
class Interrupting:
    def find_spec(self, name, *about):
        if name == "scipy":
            os.kill(os.getpid(), {int(number)})
sys.meta_path.insert(0, Interrupting())
from phasematch.__main__ import main
main()
"""
    root = Path(phasematch.__file__).parents[1]
    done = subprocess.run(
        [sys.executable, "-c", code, "--version"], capture_output=True, text=True, check=False,
        env={**os.environ, "PYTHONPATH": str(root)},
    )  # fmt: skip
    assert (done.returncode, done.stdout, done.stderr) == (130, "", "")


def test_entry_point_and_module_are_the_command(here):
    root = Path(phasematch.__file__).parents[1]
    done = subprocess.run(
        [sys.executable, "-m", "phasematch", "--version"], capture_output=True, text=True,
        check=False, env={**os.environ, "PYTHONPATH": str(root)}, cwd=here,
    )  # fmt: skip
    assert done.returncode == 0 and done.stdout.startswith("idlermap, version ")


def test_pairs_without_a_value_are_unknown_with_the_reason(idlermap):
    code, out, _ = idlermap("ring", "design.toml", "--set", "ring.pump_um=1.5025")
    assert code == 3
    assert re.search(r"unknown pairs +\d+ +\d+ to 5$", out, re.MULTILINE)
    assert re.search(r"^5 .* none +unknown$", out, re.MULTILINE)
    assert "unknown: outside the solved band" in out
    code, out, err = idlermap("ring", "design.toml", "--set", "ring.pump_w=10.0")
    assert code == 3 and re.search(r"which pair \d+ reaches first at 0\.\d+ W", err)


def test_a_bug_says_so(idlermap, monkeypatch):
    monkeypatch.setattr("phasematch.cli.read", lambda *a: 1 / 0)
    code, _, err = idlermap("modes", "design.toml")
    assert code == 1
    assert "ZeroDivisionError" in err and "please report" in err


@pytest.mark.parametrize(("number", "code"), [(signal.SIGINT, 130), (signal.SIGTERM, 130)])
def test_interrupted_runs_leave_nothing(here, number, code):
    root = Path(phasematch.__file__).parents[1]
    with subprocess.Popen(
        [sys.executable, "-c", "from phasematch.cli import main; main()",
         "run", "design.toml", "-o", "out"],
        stderr=subprocess.PIPE, text=True, cwd=here,
        env={**os.environ, "PYTHONPATH": str(root)},
    ) as process:  # fmt: skip
        assert "modes at" in process.stderr.readline()
        process.send_signal(number)
        rest = process.stderr.read()
    assert process.returncode == code
    assert "Traceback" not in rest
    assert sorted(p.name for p in here.iterdir()) == ["design.toml"]


# ---------------------------------------------------------------- terminal


def on_a_terminal(folder, *arguments, **environment):
    """Run with stdout and stderr on a terminal; what it showed, as text."""
    root = Path(phasematch.__file__).parents[1]
    ours, theirs = pty.openpty()
    kept = {k: v for k, v in os.environ.items() if k not in ("NO_COLOR", "COLUMNS")}
    process = subprocess.Popen(
        [sys.executable, "-c", "from phasematch.cli import main; main()", *arguments],
        stdout=theirs, stderr=theirs, cwd=folder,
        env={**kept, "PYTHONPATH": str(root), "TERM": "xterm-256color", **environment},
    )  # fmt: skip
    os.close(theirs)
    shown = b""
    deadline = time.monotonic() + 120
    while time.monotonic() < deadline:
        try:
            piece = os.read(ours, 4096)
        except OSError:  # the terminal closes with its last user
            break
        if not piece:
            break
        shown += piece
    os.close(ours)
    assert process.wait() == 0
    return shown.decode()


COLOUR = re.compile(r"\x1b\[[0-9;]*\b(3[0-7]|38;5;\d+|9[0-7])m")


def test_no_color_is_honoured(here):
    assert COLOUR.search(on_a_terminal(here, "modes", "design.toml"))
    assert not COLOUR.search(on_a_terminal(here, "modes", "design.toml", NO_COLOR="1"))


def test_only_lines_when_stderr_is_no_terminal(run_idlermap, tmp_path):
    (tmp_path / "design.toml").write_text(DESIGN)
    done = run_idlermap("modes", "design.toml", environment={"FORCE_COLOR": ""})
    assert done.returncode == 0
    assert "\x1b" not in done.stdout + done.stderr
    assert done.stderr.splitlines()[0] == "idlermap: modes at 1.55 um"
