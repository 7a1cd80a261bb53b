"""A design file is checked as a whole, completed and written out so that it runs again."""

import copy
import tomllib

import pytest

from materials.common.errors import DesignFileError, StorageError, UnknownName
from materials.common.results import make_provenance
from modesolve import CrossSection
from phasematch.design_file import check_design, read_design
from phasematch.design_tables import TABLES, CrossSectionKeys, allowed
from phasematch.starter import starter_text

GOOD = {
    "cross_section": {
        "core": "Si3N4-Luke2015",
        "cladding": "SiO2-Malitson1965",
        "substrate": "SiO2-Malitson1965",
        "width_um": 1.6,
        "height_um": 0.8,
    },
    "band": {"from_um": 1.2, "to_um": 2.0},
    "channel": {"length_mm": 10, "pump_um": 1.54, "pump_w": 0.2},
    "ring": {"radius_um": 100, "q_intrinsic": 2e6, "q_coupling": 2e6, "pump_um": 1.55},
}


def changed(**changes):
    """GOOD with ``table__key=value`` laid over; None takes the key or table away."""
    raw = copy.deepcopy(GOOD)
    for path, value in changes.items():
        table, _, key = path.partition("__")
        place, name = (raw.setdefault(table, {}), key) if key else (raw, table)
        if value is None:
            del place[name]
        else:
            place[name] = value
    return raw


def problems(raw):
    with pytest.raises(DesignFileError) as caught:
        check_design(raw, "my.toml")
    assert str(caught.value).splitlines() == list(caught.value.args[0])
    return caught.value.args[0]


@pytest.mark.parametrize(
    ("changes", "lines"),
    [
        (
            {"cross_section__width_um": -1.6},
            ["my.toml: cross_section.width_um = -1.6: must be a number from 0.005 to 100 um"],
        ),
        (
            {"cross_section__width_um": None},
            ["my.toml: cross_section.width_um: this key is missing; give a number from"],
        ),
        (
            {"cross_section__widht_um": 1.0},
            ["widht_um = 1.0: no such key in [cross_section]; did you mean width_um?"],
        ),
        ({"cross_section__height_um": float("nan")}, ["height_um = nan: must be a number"]),
        ({"cross_section__height_um": float("inf")}, ["height_um = inf: must be a number"]),
        ({"cross_section__height_um": "0.8"}, ['height_um = "0.8": must be a number']),
        ({"cross_section__height_um": True}, ["height_um = true: must be a number"]),
        ({"cross_section__core": 3}, ["core = 3: must be a material key"]),
        (
            {"cross_section__core": "Si3N4-Luke2016"},
            ['core = "Si3N4-Luke2016": no medium', "Si3N4-Luke2015"],
        ),
        (
            {"cross_section__slab_um": 0.8},
            ["cross_section.slab_um = 0.8 um: allowed 0 up to less than height_um (0.8 um)"],
        ),
        (
            {"cross_section__sidewall_deg": 119.0, "cross_section__width_um": 0.5},
            ["my.toml: cross_section.sidewall_deg = 119", "is -0.3869 um wide at its narrow end"],
        ),
        ({"cross_section__sidewall_deg": 45}, ["= 45: must be a number from 60 to 120 degrees"]),
        (
            {"cross_section__bend_radius_um": 0.5},
            ["my.toml: cross_section.bend_radius_um = 0.5 um: allowed", "clear the bend's axis"],
        ),
        (
            {"cross_section__temperature_degc": 30.0, "cross_section__core": "As2S3-Rodney1958"},
            ["my.toml: cross_section: As2S3-Rodney1958 has no dn/dT"],
        ),
        (
            {"cross_section__layers_below": [["SiO2-Malitson1965", 0.5], ["gold", 0.1]]},
            ['cross_section.layers_below[2][1] = "gold": no medium'],
        ),
        (
            {"cross_section__layers_below": [["SiO2-Malitson1965", 0.0]]},
            ["cross_section.layers_below[1][2] = 0.0: must be pairs [material key, thickness"],
        ),
        ({"band__from_um": 2.1}, ["band.from_um = 2.1: must be below to_um = 2 um"]),
        (
            {"band__to_um": 6.0},
            ["band.to_um = 6: outside the range of Si3N4-Luke2015, 0.31 to 5.504 um"],
        ),
        ({"band": None}, ["my.toml: [band]: this table is missing; the wavelengths"]),
        ({"band": 3}, ["my.toml: band = 3: must be a table [band]"]),
        ({"rnig": {}}, ["my.toml: rnig = {...}: no such table; did you mean ring?"]),
        ({"mode__label": "HE11"}, ['mode.label = "HE11": must be a mode label such as "TE0"']),
        ({"mode__count": 2.0}, ["mode.count = 2.0: must be a whole number from 1 to 40"]),
        ({"ring__pump_um": 2.2}, ["ring.pump_um = 2.2: must be inside the band, 1.2 to 2 um"]),
        ({"ring__radius_um": 0}, ["ring.radius_um = 0: must be a number from 1 to 1e+06 um"]),
        (
            {"channel__map_signal_um": [1.3, 1.25]},
            ["channel.map_signal_um = [1.3, 1.25]: must rise and lie inside the band"],
        ),
        ({"channel__map_signal_um": [1.3]}, ["map_signal_um = [1.3]: must be two wavelengths"]),
        ({"output__figures": "gif"}, ['output.figures = "gif": must be "png", "pdf", "svg" or']),
    ],
)
def test_each_problem_is_said_in_one_line(changes, lines):
    found = problems(changed(**changes))
    assert len(found) == 1
    for piece in lines:
        assert piece in found[0]


def test_core_below_cladding():
    raw = changed(cross_section__core="SiO2-Malitson1965", cross_section__cladding="Si3N4-Luke2015")
    found = problems(raw)
    assert "its index 1.4481 at 1.2 um must be above 2.0065, that of the cladding" in found[0]


def test_all_problems_at_once():
    """Wrong values, a misspelt key, a missing one and a joint problem: none hides another."""
    raw = changed(
        cross_section__width_um=0,
        cross_section__heigth_um=1.0,
        cross_section__slab_um=3.0,
        band__from_um=2.5,
        ring__q_intrinsic=None,
        mode__label=1,
    )
    text = "\n".join(problems(raw))
    for piece in ("width_um", "heigth_um", "slab_um", "band.from_um", "q_intrinsic", "mode.label"):
        assert piece in text


def test_problems_of_one_cross_section_do_not_hide_each_other():
    found = problems(
        changed(
            cross_section__core="gold",
            cross_section__slab_um=0.9,
            cross_section__sidewall_deg=119.0,
            cross_section__width_um=0.5,
            cross_section__bend_radius_um=0.1,
        )
    )
    keys = ("core", "slab_um", "sidewall_deg", "bend_radius_um")
    assert [line.split()[1] for line in found] == [f"cross_section.{key}" for key in keys]


def test_limits_are_those_of_the_solver():
    for angle in (60.0, 120.0):
        section = check_design(changed(cross_section__sidewall_deg=angle)).tables.cross_section
        assert CrossSection(**section.model_dump()).sidewall_deg == angle
    assert "# bend_radius_um =" in starter_text()


def test_extrapolation_must_be_asked_for():
    check_design(changed(band__to_um=6.0, band__extrapolate=True))


def test_defaults_follow_from_other_keys():
    tables = check_design(GOOD).tables
    assert tables.mode.wavelength_um == 1.55  # the ring's pump comes first
    assert tables.channel.map_signal_um == (1.2, 2.0)
    assert tables.channel.map_pump_um == pytest.approx((0.98 * 1.54, 1.02 * 1.54))
    assert check_design(changed(ring=None)).tables.mode.wavelength_um == 1.54
    alone = check_design(changed(ring=None, channel=None))
    assert alone.reference_um == pytest.approx(1.5)  # the middle of 1.2 to 2.0 um in frequency


def test_resolved_design_runs_again():
    raw = changed(cross_section__layers_above=[["Si3N4-Luke2015", 0.1]])
    design = check_design(raw)
    text = design.to_toml(make_provenance(["Si3N4-Luke2015"]))
    assert '# materials: ["Si3N4-Luke2015"]' in text
    again = check_design(tomllib.loads(text))
    assert again.as_dict() == design.as_dict()


def test_reading_and_changing(tmp_path):
    path = tmp_path / "my.toml"
    path.write_text(check_design(GOOD).to_toml())
    design = read_design(path, ["cross_section.width_um=1.7", 'mode.label = "TM0"'])
    assert design.tables.cross_section.width_um == 1.7
    assert design.tables.mode.label == "TM0"
    with pytest.raises(DesignFileError, match=r"my.toml: ring.pairs = 0: must be a whole number"):
        read_design(path, ["ring.pairs=0"])
    for bad in ("width_um=1", "cross_section.width_um", "mode.label=TM0", "a.b.c=1"):
        with pytest.raises(UnknownName, match=r"write table.key=value"):
            read_design(path, [bad])


def test_unreadable_files(tmp_path):
    (tmp_path / "broken.toml").write_text("[band\nfrom_um = 1")
    with pytest.raises(DesignFileError, match=r"broken.toml: not readable as TOML.*line 1"):
        read_design(tmp_path / "broken.toml")
    (tmp_path / "bytes.toml").write_bytes(b"\xff\xfe")
    with pytest.raises(DesignFileError, match="not readable as TOML"):
        read_design(tmp_path / "bytes.toml")
    with pytest.raises(StorageError, match="cannot read"):
        read_design(tmp_path / "none.toml")


def test_cross_section_keys_are_the_arguments():
    from dataclasses import fields

    names = [f.name for f in fields(CrossSection)]
    assert list(CrossSectionKeys.model_fields) == names


def test_every_key_says_what_it_is_and_what_is_allowed():
    for table in TABLES.values():
        for field in table.model_fields.values():
            assert field.description and allowed(field)
