"""Declared quantities, error bars, printing and provenance of result objects."""

import dataclasses
import pickle
from dataclasses import dataclass, field

import numpy as np
import pytest

from materials.common.results import (
    ErrorBars,
    Provenance,
    Result,
    format_number,
    frozen_array,
    make_provenance,
    quantity,
)


@dataclass(frozen=True, slots=True, eq=False)
class Curve(Result):
    wavelength_um: np.ndarray = quantity("wavelength", "um", ("wavelength_um",))
    n_eff: np.ndarray = quantity("effective index", "1", ("wavelength_um",))
    zero_um: float = quantity("zero-dispersion wavelength", "um")
    error: ErrorBars = field(default_factory=ErrorBars)
    inputs: dict = field(default_factory=dict)
    notes: tuple = ()
    provenance: Provenance | None = None


def curve(count=3, **more):
    return Curve(
        frozen_array(np.linspace(1.5, 1.6, count)),
        frozen_array(np.linspace(1.8, 1.7, count)),
        1.3,
        **more,
    )


@pytest.mark.parametrize(
    ("value", "bar", "text"),
    [
        (1.83454381, 4e-8, "1.83454381(4)"),
        (1.83454381, 1.2e-7, "1.83454381(12)"),
        (1.83454381, 3.2e-8, "1.83454381(4)"),  # rounded up: a bar is never too small
        (1.83454381, 9.6e-8, "1.8345438(1)"),
        (-93.2551, 0.034, "-93.26(4)"),
        (12345.6, 123.0, "12350 +- 130"),
        (1.23456e-7, 3e-11, "1.2346(3)e-07"),
        (1e-7, 5e-6, "0(5)e-06"),
        (0.0, 2e-3, "0.000(2)"),
        (1.5, 0.0, "1.5"),
        (1.5, None, "1.5"),
        (1.5, np.nan, "1.5"),
        (np.nan, 1e-3, "nan"),
        (np.inf, 1e-3, "inf"),
        (7, 1.0, "7"),
        ("TE0", None, "TE0"),
        (1.0, 3e-19, "1.000000000000000"),
        (29667950.0, 144.0, "2.966795(15)e+07"),
    ],
)
def test_format_number(value, bar, text):
    assert format_number(value, bar) == text


def test_format_number_with_fewer_digits():
    """As many as the bar allows, and no bar where it is below the last of them."""
    assert format_number(1.506530411, 1.2e-7, most=8) == "1.50653041(12)"
    assert format_number(1.506530411, 9.9e-8, most=8) == "1.5065304"  # never a bar too large
    assert format_number(821630.126, 0.14, most=9) == "821630.13(14)"
    assert format_number(8216301.26, 0.009, most=9) == "8.21630126e+06"
    assert format_number(12345.6, 1e-9, most=4) == "12346"
    assert format_number(2.0, 1e-15, most=9) == "2.00000000"
    assert format_number(1.506530411, 1.2e-5, most=8) == "1.506530(12)"


@pytest.mark.parametrize("seed", range(3))
def test_format_number_keeps_value_and_bar(seed):
    """Read back, the text holds the value to within the bar and a bar of at least its size."""
    rng = np.random.default_rng(seed)
    for _ in range(300):
        value = float(rng.normal()) * 10.0 ** rng.integers(-8, 6)
        bar = 10.0 ** rng.uniform(-9, -0.05)
        text = format_number(value, bar)
        if "+-" in text:
            continue
        number, rest = text.split("(")
        digits, _, power = rest.partition(")")
        decimals = len(number.partition(".")[2])
        scale = 10.0 ** (int(power[1:]) if power else 0)
        shown = int(digits) * 10.0**-decimals * scale
        # rounded up to one or two digits: never below, at most half as much again
        assert bar * (1 - 1e-9) <= shown <= 1.5 * bar
        assert abs(float(number) * scale - value) <= 0.5 * 10.0**-decimals * scale * (1 + 1e-9)


def test_error_bars_are_read_only_and_pickle():
    bars = ErrorBars({"n_eff": 1e-8}, table=np.array([1.0, 2.0]))
    again = pickle.loads(pickle.dumps(bars))
    assert dict(again, table=0) == {"n_eff": 1e-8, "table": 0}
    assert not again["table"].flags.writeable
    with pytest.raises(TypeError):
        bars["n_eff"] = 2.0
    with pytest.raises(AttributeError):
        bars.anything = 2.0
    with pytest.raises(KeyError):
        bars["beta2"]


def test_result_is_frozen_also_after_pickling():
    one = pickle.loads(pickle.dumps(curve(error=ErrorBars(n_eff=np.full(3, 1e-8)))))
    with pytest.raises(dataclasses.FrozenInstanceError):
        one.zero_um = 2.0
    with pytest.raises(ValueError, match="read-only"):
        one.n_eff[0] = 2.0
    assert one.error["n_eff"][0] == 1e-8


def test_frozen_array_copies():
    source = np.array([1.0, 2.0])
    kept = frozen_array(source)
    source[0] = 9.0
    assert kept[0] == 1.0


def test_printed_table_has_value_bar_unit_and_notes():
    text = repr(curve(error=ErrorBars(zero_um=2e-4, n_eff=np.full(3, 1e-3)), notes=("watch out",)))
    lines = text.splitlines()
    assert lines[0] == "Curve"
    assert lines[1].split() == ["zero_um", "1.3000(2)", "um"]
    assert lines[2].split() == ["wavelength_um", "n_eff"]
    assert lines[3].split() == ["1.5", "1.8000(10)"]
    assert lines[-1] == "  note: watch out"


def test_long_tables_are_cut():
    lines = repr(curve(500)).splitlines()
    assert len(lines) < 14
    assert lines[-1].split() == ["1.6", "1.7"]
    assert max(map(len, lines)) <= 80


def test_provenance_compares_without_time():
    first = make_provenance(["SiO2-Malitson1965"], "ladder 3:4:5", seconds=1.0)
    second = make_provenance(["SiO2-Malitson1965"], "ladder 3:4:5", seconds=2.0)
    assert first == second
    assert first != make_provenance(["SiO2-Malitson1965"], "ladder 4:5:6")
    kept = first.as_dict()
    assert kept["materials"] == ["SiO2-Malitson1965"]
    assert set(kept) == {"version", "materials", "grid", "python", "numpy", "scipy", "made"}
    assert kept["made"]["seconds"] == 1.0 and set(kept["made"]) == {"at", "seconds"}
