"""What a designer may state, and what is refused."""

from __future__ import annotations

import pickle

import pytest

import materials
from materials.common.errors import InputError, MissingData, OutOfRange, UnknownName
from modesolve import CrossSection

SILICA, NITRIDE = "SiO2-Malitson1965", "Si3N4-Luke2015"


def made(**more):
    base = dict(core=NITRIDE, cladding=SILICA, substrate=SILICA, width_um=1.6, height_um=0.8)
    return CrossSection(**{**base, **more})


@pytest.mark.parametrize(
    ("change", "error", "says"),
    [
        (dict(width_um=0.0), OutOfRange, "width_um"),
        (dict(width_um=-1.0), OutOfRange, "0.005 to 100 um"),
        (dict(height_um=800.0), OutOfRange, "check the unit"),
        (dict(width_um=float("nan")), OutOfRange, "finite"),
        (dict(width_um="wide"), InputError, "number"),
        (dict(slab_um=0.8), OutOfRange, "less than height_um"),
        (dict(slab_um=-0.1), OutOfRange, "slab_um"),
        (dict(slab_um=0.001), OutOfRange, "at least"),
        (dict(sidewall_deg=50.0), OutOfRange, "60 to 120"),
        (dict(width_um=0.3, sidewall_deg=70.0, width_at=0.0), OutOfRange, "narrow end"),
        (dict(width_at=1.5), OutOfRange, "width_at"),
        (dict(core="Si3N4-Luke2016"), UnknownName, "Si3N4-Luke2015"),
        (dict(core=3), InputError, "catalogue key"),
        (dict(layers_above=(SILICA, 0.2)), InputError, "pairs"),
        (dict(layers_below=((SILICA, 0.0),)), OutOfRange, "thickness_um"),
        (dict(core=materials.constant(2.0, name="film"), temperature_degc=60.0), MissingData,
         "film"),
    ],
)  # fmt: skip
def test_impossible_sections_say_what_is_wrong_in_one_line(change, error, says):
    with pytest.raises(error) as caught:
        made(**change).layout()
    assert says in str(caught.value)
    assert "\n" not in str(caught.value)


def test_layers_stack_from_the_core_outwards():
    section = made(
        layers_below=((NITRIDE, 0.1), (SILICA, 0.3)),
        layers_above=((SILICA, 0.2), (NITRIDE, 0.05)),
        slab_um=0.2,
    )
    layout = section.layout()
    assert layout.up.walls == pytest.approx((-0.4, -0.1, 0.0, 0.2, 0.8, 1.0, 1.05))
    keys = [layout.media[i].key for i in layout.fill[0]]
    assert keys == [SILICA, SILICA, NITRIDE, NITRIDE, NITRIDE, SILICA, NITRIDE, SILICA]
    beside = [layout.media[i].key for i in layout.fill[1]]
    assert beside == [SILICA, SILICA, NITRIDE, NITRIDE, SILICA, SILICA, NITRIDE, SILICA]


def test_media_are_counted_once_and_survive_pickling():
    section = made(layers_above=((SILICA, 0.2),))
    assert [m.key for m in section.media] == [NITRIDE, SILICA]
    again = pickle.loads(pickle.dumps(section))
    assert again.describe() == section.describe()
    assert len(again.media) == 2


def test_temperature_moves_every_medium():
    cold, hot = made().layout(), made(temperature_degc=80.0).layout()
    omega = 1215.0
    assert all(hot.indices(omega) > cold.indices(omega))


@pytest.mark.parametrize(
    ("angle", "at", "bottom", "top"),
    [(90.0, 1.0, 1.6, 1.6), (80.0, 1.0, 1.8115, 1.6), (80.0, 0.0, 1.6, 1.3885),
     (100.0, 0.5, 1.4942, 1.7058)],
)  # fmt: skip
def test_walls_lean_about_the_height_where_the_width_holds(angle, at, bottom, top):
    """0.6 um of etch: 0.6/tan(80 deg) = 0.1058 um on each side."""
    line = made(slab_um=0.2, sidewall_deg=angle, width_at=at).wall_line()
    assert 2.0 * line.half_bottom_um == pytest.approx(bottom, abs=1e-4)
    assert 2.0 * line.half_top_um == pytest.approx(top, abs=1e-4)
    assert (line.bottom_um, line.top_um) == (0.2, 0.8)
