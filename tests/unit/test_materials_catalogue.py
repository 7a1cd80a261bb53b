"""The tables: complete, readable, sources stated, names found."""

import ast
import math
import subprocess
import sys
import tomllib
import types
from importlib import resources

import pytest

import materials
from materials.common.errors import InputError, OutOfRange, UnknownName

KINDS = ("n2", "dn_dt", "two_photon")
SOURCES = (
    "published data set",
    "abstract read",
    "from memory (high)",
    "from memory (medium)",
    "from memory (low)",
    "computed from published data set",
    "computed from a formula from memory (high)",
    "computed from a formula from memory (medium)",
    "computed (ideal gas)",
    "band gap",
    "by definition",
)


def tables():
    folder = resources.files("materials") / "tables"
    return sorted(p.name.removesuffix(".toml") for p in folder.iterdir())


def read(stem):
    return (resources.files("materials") / "tables" / f"{stem}.toml").read_text("utf-8")


def test_public_list_is_what_is_public():
    public = {
        name
        for name, value in vars(materials).items()
        if not name.startswith("_") and not isinstance(value, types.ModuleType)
    }
    assert public == set(materials.__all__)
    assert list(materials.__all__) == sorted(materials.__all__)


def test_import_is_light():
    code = "import sys, materials; print([m for m in sys.modules if m.startswith('scipy')])"
    out = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert ast.literal_eval(out.stdout) == []


def test_loading_one_key_reads_one_table():
    code = (
        "import sys, materials; materials.load('SiO2-Malitson1965');"
        "print(sys.modules['materials.catalogue']._read.cache_info().currsize)"
    )
    out = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert int(out.stdout) == 1


def test_keys_are_sorted_and_complete():
    keys = materials.catalogue()
    assert list(keys) == sorted(set(keys))
    assert len(keys) >= 70
    plain = {stem for stem in tables() if not stem.endswith("-x")}
    assert plain <= set(keys)


@pytest.mark.parametrize("key", materials.catalogue())
def test_every_key_loads(key):
    medium = materials.load(key)
    entry = materials.describe(key)
    assert medium.key == entry.key == key
    assert medium.range_um == entry.range_um
    low, high = medium.range_um or (1.0, 2.0)
    middle = math.sqrt(low * high)
    for w in (low, middle, high):
        assert 1.0 <= medium.index(w) < 5.0
    assert medium.group_index(middle) >= medium.index(middle) or key.startswith("vacuum")
    assert medium.n2_m2_per_w == entry.n2_m2_per_w
    assert medium.dn_dt_per_k == entry.dn_dt_per_k
    assert medium.two_photon_m_per_w == entry.two_photon_m_per_w
    assert medium.axis in (None, "o", "e")
    assert materials.load(key) is medium  # cached


@pytest.mark.parametrize("key", materials.catalogue())
def test_every_value_has_a_source_and_what_has_none_is_missing(key):
    entry, medium = materials.describe(key), materials.load(key)
    assert entry.citation and entry.data_source and entry.form
    names = {"n2": "n2", "dn_dt": "dn/dT", "two_photon": "two-photon absorption"}
    for kind in KINDS:
        records = getattr(entry, kind)
        assert (names[kind] in medium.missing) == (not records)
        for record in records:
            assert record.source_kind in SOURCES and record.citation
            assert math.isfinite(record.value)
            assert record.axis in (None, entry.axis) or entry.axis is None
        if records and "from memory" in records[0].source_kind:
            said = [c for c in medium.caveats if c.startswith(f"{names[kind]}: ")]
            assert len(said) == 1 and "from memory, not checked against its source" in said[0]
        if records:
            citation = getattr(medium, f"{kind}_citation")
            assert citation.startswith(records[0].citation.partition(" from memory")[0])


def test_sizes_of_the_coefficients_are_those_of_their_units():
    for entry in materials.entries():
        for record in entry.n2:
            assert record.value == 0.0 or 1e-21 < abs(record.value) < 1e-16
        for record in entry.dn_dt:
            assert abs(record.value) < 1e-3
        for record in entry.two_photon:
            assert 0.0 <= record.value < 1e-9


@pytest.mark.parametrize("stem", tables())
def test_tables_are_sound(stem):
    text = read(stem)
    table = tomllib.loads(text)
    assert table["key"] == stem
    assert "/database/" not in text and ".yml" not in text and "source_file" not in text
    if "data set" in table["data_source"]:
        assert "Sci. Data 11, 94 (2024)" in table["data_source"]
        assert "CC0" in table["data_source"]
    if "points" in table:
        points = table["points"]
        assert len(points["wavelength_um"]) == len(points["index"]) > 10


def test_pairs_of_axes_come_together():
    keys = set(materials.catalogue())
    single = {"MgO1-SLN-Gayer2008-e", "GaN-Barker1973-o", "SiC-hex-Singh1971-o"}
    for key in keys - single:
        if key.endswith("-o"):
            assert f"{key[:-1]}e" in keys
        if key.endswith("-e"):
            assert f"{key[:-1]}o" in keys


@pytest.mark.parametrize(
    ("typed", "meant"),
    [
        ("SiO2", "SiO2-Malitson1965"),
        ("sio2-malitson1965", "SiO2-Malitson1965"),
        ("Si3N4-Luke2016", "Si3N4-Luke2015"),
        ("LiNbO3-Zelmon1997", "LiNbO3-Zelmon1997-o"),
    ],
)
def test_unknown_key_names_the_nearest(typed, meant):
    with pytest.raises(UnknownName) as caught:
        materials.load(typed)
    assert typed in str(caught.value) and meant in str(caught.value)


@pytest.mark.parametrize("typed", ["", "zzzzzz", "../conftest", "GeO2-SiO2-Fleming1984-x", "x0.1"])
def test_keys_like_nothing(typed):
    with pytest.raises(UnknownName):
        materials.load(typed)


@pytest.mark.parametrize("typed", [None, 3, ["SiO2-Malitson1965"]])
def test_keys_that_are_no_text(typed):
    with pytest.raises(InputError, match="as a string"):
        materials.load(typed)


def test_mixtures_take_any_fraction():
    ends = materials.load("SiO2-Malitson1965"), materials.load("GeO2-Fleming1984")
    for fraction, end in zip(("0", "1"), ends, strict=True):
        mixed = materials.load(f"GeO2-SiO2-Fleming1984-x{fraction}")
        assert mixed.index(1.55) == pytest.approx(end.index(1.55), rel=1e-14)
    values = [materials.load(f"GeO2-SiO2-Fleming1984-x{x}").index(1.55) for x in (".03", "0.07")]
    assert 1.444024 < values[0] < values[1] < 1.46
    assert "0.07" in materials.load("GeO2-SiO2-Fleming1984-x0.07").name
    with pytest.raises(OutOfRange, match="from 0 to 1"):
        materials.load("GeO2-SiO2-Fleming1984-x1.2")


def test_listing_shows_what_a_user_chooses_by():
    by_key = {entry.key: entry for entry in materials.entries()}
    assert tuple(by_key) == materials.catalogue()
    nitride = by_key["Si3N4-Luke2015"]
    assert nitride.form.startswith("thin film, LPCVD")
    assert nitride.range_um == (0.31, 5.504)
    assert nitride.n2_m2_per_w == 2.4e-19 and nitride.n2[0].source_kind == "abstract read"
    assert nitride.n2_choice and nitride.n2_spread
    assert by_key["SiN-Vogt2015-n1.91"].fitted and not nitride.fitted
    assert "n2" in by_key["SiN-Vogt2015-n1.91"].missing


def test_air_covers_a_chip_and_vacuum_is_empty():
    air, vacuum = materials.load("air"), materials.load("vacuum")
    assert air.index(1.55) == materials.load("air-Ciddor1996").index(1.55)
    assert 2.72e-4 < air.index(4.5) - 1.0 < air.index(1.0) - 1.0 < 2.75e-4
    assert any("1.69 um" in c for c in air.caveats)
    assert vacuum.index(1e-2) == vacuum.index(1e2) == 1.0
    assert vacuum.n2_m2_per_w == 0.0 and vacuum.missing == ()


def test_fitted_tables_carry_their_residual():
    for entry in materials.entries():
        fit = materials.load(entry.key).fit
        assert (fit is not None) == entry.fitted
        if fit is not None:
            assert 0.0 < fit.residual_rms <= fit.residual_max < 6e-3
            assert entry.range_um[0] <= fit.window_um[0] < fit.window_um[1] <= entry.range_um[1]
            assert fit.points > 15 and fit.covariance.shape[0] == fit.covariance.shape[1]


def test_what_comes_from_memory_is_said_in_plain_words():
    """No text that reaches a user holds the short form of the tables."""
    for key in materials.catalogue():
        medium = materials.load(key)
        texts = (*medium.caveats, medium.citation, medium.n2_citation, medium.n2_spread)
        texts += (medium.dn_dt_citation, medium.two_photon_citation, medium.two_photon_spread)
        assert not any(f"memory ({word})" in t for t in texts for word in ("high", "medium", "low"))
        assert not any(caveat.startswith(key) for caveat in medium.caveats), key
    assert (
        "two-photon absorption: value from memory, not checked against its source "
        "(high confidence)" in materials.load("Si-Salzberg1957").caveats
    )
