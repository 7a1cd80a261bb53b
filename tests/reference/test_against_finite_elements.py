"""The mode solver against a live finite-element solve of the same cross-section.

The two have nothing in common but the media; every wrong factor, interface condition, derivative
or mirror wall would show. The finite elements here are within 2e-8 (nitride) and 1e-7 (silicon)
of the converged values of channel_values.toml, which are checked too.
"""

from __future__ import annotations

import tomllib
from dataclasses import replace
from functools import cache
from pathlib import Path

import pytest
from reference.finite_element_guides import GuidedMode, Resolution, areas, channel, lowest_mode

import materials
import modesolve

OURS = "vector finite elements with scikit-fem, this repository's tests"
CONVERGED = tomllib.loads(Path(__file__).with_name("channel_values.toml").read_text())

#: One case of each kind; live solves are made of these, and --slow adds the rest.
QUICK = [
    "nitride-1600x800-in-silica-TE",
    "nitride-1600x800-in-silica-TM",
    "silicon-500x220-in-silica-TE",
    "silicon-500x220-in-silica-TM",
    "silicon-rib-air-above-TE",
]

# absolute tolerances of the ladder 3:4:5; beta2 in ps2/km
TOLERANCE = {
    "nitride": {"n_eff": 1e-7, "n_group": 4e-7, "beta2_ps2_per_km": 2e-2},
    "silicon": {"n_eff": 5e-7, "n_group": 2e-6, "beta2_ps2_per_km": 2e-1},
    "silicon-rib": {"n_eff": 3e-6, "n_group": 5e-6, "beta2_ps2_per_km": 2e-1},
}
AREAS = {"intensity": "intensity_area_um2", "power": "power_area_um2"}
NONLINEAR = {"nonlinear": "effective_area_um2", "gamma_per_w_m": "gamma_per_w_m"}
REGIONS = ("core", "substrate", "cladding")
LIVE = Resolution(order=5, layers=4, ratio=0.17, widest=1.5, margin_x=3.0, margin_y=(3.0, 3.0))
LIVE_RIB = replace(LIVE, order=6, layers=5, ratio=0.25, step=0.1)


def tolerance_of(name: str) -> dict[str, float]:
    """Absolute tolerances of a case of channel_values.toml."""
    if name.startswith("silicon-rib"):
        return TOLERANCE["silicon-rib"]
    return TOLERANCE["silicon" if name.startswith(("silicon", "buried-silicon")) else "nitride"]


def area_tolerance(name: str) -> float:
    """Relative; the field squared and its square are singular at corners, most in a rib."""
    return 6e-5 if name.startswith("silicon-rib") else 2e-5


def medium(entry):
    """A medium of the package from a key or a constant index."""
    return materials.load(entry) if isinstance(entry, str) else materials.constant(entry)


@cache
def ours(name: str):
    """The package's mode of a case."""
    case = CONVERGED[name]
    below, above = medium(case["substrate"]), medium(case["cladding"])
    section = modesolve.CrossSection(
        core=medium(case["core"]),
        cladding=below if case["substrate"] == case["cladding"] else above,
        substrate=below,
        width_um=case["width_um"],
        height_um=case["height_um"],
        slab_um=case.get("slab_um", 0.0),
    )
    # TE0 is the highest of every section here; TM0 is the second
    count = 1 if case["polarisation"] == "TE" else 2
    modes = modesolve.solve_modes(section, wavelength_um=case["wavelength_um"], count=count)
    if name.startswith("square"):  # both polarisations are one pair there, of any mixture
        return modes[0]
    return next(m for m in modes if m.label == case["polarisation"] + "0")


def live(case: dict) -> GuidedMode:
    """A finite-element mode of a case, solved here and now."""
    size = [case[k] for k in ("width_um", "height_um", "slab_um") if k in case]
    guide = channel(*size, mirror_y=len(size) == 2 and case["substrate"] == case["cladding"])
    media = {
        r: case[r] if isinstance(case[r], float) else materials.load(case[r]).index for r in REGIONS
    }
    res = LIVE_RIB if "slab_um" in case else LIVE
    return lowest_mode(guide, media, case["wavelength_um"], case["polarisation"], res)


@pytest.mark.source(OURS, "solved by the test", "n_eff 2e-8 to 1e-7")
@pytest.mark.parametrize("name", QUICK)
@pytest.mark.slow
def test_live_solve(name):
    case = CONVERGED[name]
    mode, other = ours(name), live(case)
    tolerance = tolerance_of(name)
    assert abs(mode.n_eff - other.n_eff) < tolerance["n_eff"]
    assert abs(mode.n_group - other.n_group) < tolerance["n_group"]
    assert abs(mode.beta2_ps2_per_km - other.beta_ps_per_km(2)) < tolerance["beta2_ps2_per_km"]
    assert abs(mode.te_fraction - other.x_fraction) < 1e-5
    kerr = {r: 1e12 * (medium(case[r]).n2_m2_per_w or 0.0) for r in REGIONS}
    found = areas(other, kerr)
    for short, attribute in (AREAS | NONLINEAR).items():
        assert getattr(mode, attribute) == pytest.approx(found[short], rel=area_tolerance(name))
    # and the live solve itself is where the converged one is
    assert abs(other.n_eff - case["n_eff"]["value"]) < tolerance["n_eff"] / 4


@pytest.mark.source(OURS, "channel_values.toml", "n_eff 3e-11 to 3e-9")
@pytest.mark.parametrize(
    "name",
    [
        pytest.param(name, marks=[] if name in QUICK else pytest.mark.slow)
        for name in sorted(CONVERGED)
    ],
)
def test_converged_values(name):
    case = CONVERGED[name]
    mode = ours(name)
    for key, tolerance in tolerance_of(name).items():
        assert abs(getattr(mode, key) - case[key]["value"]) < tolerance, key
    for key in AREAS.values():
        assert getattr(mode, key) == pytest.approx(case[key]["value"], rel=area_tolerance(name)), (
            key
        )


@pytest.mark.source(OURS, "channel_values.toml", "n_eff 3e-11 to 3e-9")
@pytest.mark.parametrize("name", sorted(CONVERGED))
def test_error_bars_cover_the_error(name):
    case = CONVERGED[name]
    mode = ours(name)
    for key in ("n_eff", "n_group", "beta2_ps2_per_km"):
        miss = abs(getattr(mode, key) - case[key]["value"]) - case[key]["uncertainty"]
        assert miss <= mode.error[key], key
