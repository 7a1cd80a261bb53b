"""Every shipped design runs as the README says, and gives the numbers it should."""

import re
import textwrap
from pathlib import Path

import pandas
import pytest

EXAMPLES = Path(__file__).parents[2] / "examples"
#: The design of the README's first command; the others run with --slow.
QUICK = "nitride_ring.toml"

DESIGNS = sorted(path.name for path in EXAMPLES.glob("*.toml"))

#: File, row chosen by (column, value), column, value, relative tolerance. Own snapshots of
#: the shipped designs: they show that the examples work, they validate nothing.
CHECKS = {
    "nitride_ring.toml": [
        ("modes.csv", ("mode", "TE0"), "n_eff", 1.8072028, 2e-7),
        ("ring_pairs.csv", ("mu", 10), "misalignment_mhz", 96.0319, 5e-4),
        ("ring_dispersion.csv", None, "d2_mhz", 0.96160, 5e-4),
    ],
    "silicon_converter.toml": [
        ("modes.csv", ("mode", "TE0"), "n_eff", 2.8821736, 5e-7),
        ("conversion_band.csv", None, "width_thz", 23.998, 1e-3),
        ("conversion_band.csv", None, "peak_efficiency_db", -28.450, 1e-4),
    ],
}


def test_every_design_is_checked():
    assert set(DESIGNS) == set(CHECKS)


@pytest.mark.snapshot
@pytest.mark.parametrize(
    "name",
    [name if name == QUICK else pytest.param(name, marks=pytest.mark.slow) for name in DESIGNS],
)
def test_example(example_output, name):
    out = example_output(name)
    for file, row, column, expected, tolerance in CHECKS[name]:
        table = pandas.read_csv(out / file, comment="#")
        chosen = table if row is None else table[table[row[0]] == row[1]]
        assert len(chosen) == 1
        value, bar = chosen[column].item(), chosen[f"{column}_error"].item()
        assert abs(value - expected) <= tolerance * abs(expected)
        assert 0 < bar < tolerance * abs(expected)
    for figure in ("mode_field", "dispersion", "channel_map"):
        assert (out / f"{figure}.png").stat().st_size > 10_000


README = EXAMPLES.parent / "README.md"


def test_readme_lists_what_a_run_writes(example_output):
    listed, stem = set(), ""
    for row in re.findall(r"^\| (`.+?) \|", README.read_text(), re.MULTILINE):
        for name in re.findall(r"`([^`]+)`", row):
            if name.startswith("."):  # the same name with another suffix
                listed.add(stem + name)
            else:
                listed.add(name)
                stem = name.split(".")[0]
    assert {path.name for path in example_output(QUICK).iterdir()} == listed


@pytest.mark.slow
def test_readme_script_runs(capsys):
    text = README.read_text()
    block = text.split("The same from Python:")[1].split("Units are")[0]
    names = {}
    exec(textwrap.dedent(block), names)
    assert "n_eff" in capsys.readouterr().out
    assert names["pairs"].aligned.sum() == 14
    for figure in re.findall(r"\((examples/figures/[^)]+)\)", text):
        assert (README.parent / figure).is_file()


@pytest.mark.snapshot
def test_aligned_pairs_of_the_nitride_ring(example_output):
    """13 pairs stay within a linewidth; the misalignment is D2 mu^2 to lowest order."""
    pairs = pandas.read_csv(example_output(QUICK) / "ring_pairs.csv", comment="#")
    assert pairs["aligned"].sum() == 14 and pairs["aligned"][:14].all()
    # D4 mu^4/12 is below 1e-4 of it at mu = 2
    assert pairs["misalignment_mhz"][1] == pytest.approx(4 * pairs["misalignment_mhz"][0], rel=1e-3)
