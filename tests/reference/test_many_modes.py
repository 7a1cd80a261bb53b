"""Wide cores with many modes: none missed, none twice, none of the box among them.

Indices from this repository's vector finite elements (order 6, five layers towards the
corners, both parities), converged to the last digit printed.
"""

from __future__ import annotations

import pytest

from modesolve import CrossSection, solve_modes

SILICA = "SiO2-Malitson1965"
SOURCE = pytest.mark.source(
    "vector finite elements with scikit-fem, this repository's tests", "computed", "7"
)


@SOURCE
@pytest.mark.slow
def test_silicon_strip_of_two_micrometres():
    section = CrossSection(core="Si-Salzberg1957", cladding=SILICA, substrate=SILICA,
                           width_um=2.0, height_um=0.22)  # fmt: skip
    expected = [2.823650, 2.744797, 2.608615, 2.406737, 2.124965, 2.024062, 1.931375, 1.774535,
                1.748497, 1.558076]  # fmt: skip
    modes = solve_modes(section, 1.55, 14)
    assert len(modes) == len(expected)
    for mode, index in zip(modes, expected, strict=True):
        assert abs(mode.n_eff - index) < 1.5e-6  # a digit of the reference and the solver's 5e-7


@SOURCE
def test_second_mode_of_a_rib_just_above_its_slab():
    """TE1 at 2.043535 (margins of 6, 10 and 14 um agree to 1e-5), the slab's mode at 2.03281."""
    section = CrossSection(core="Si-Salzberg1957", cladding="vacuum", substrate=SILICA,
                           width_um=0.5, height_um=0.22, slab_um=0.09)  # fmt: skip
    modes = solve_modes(section, 1.55, 6)
    assert [m.label for m in modes] == ["TE0", "TE1"]
    assert abs(modes[1].n_eff - 2.043535) < 1e-5 + modes[1].error["n_eff"]


@SOURCE
@pytest.mark.slow
def test_higher_label_of_a_wide_nitride_core():
    """TE6 of a core of 5 um is one mode among twenty; its label follows from all above it."""
    section = CrossSection(core="Si3N4-Luke2015", cladding=SILICA, substrate=SILICA,
                           width_um=5.0, height_um=0.8)  # fmt: skip
    modes = solve_modes(section, 1.55, 14)
    indices = [m.n_eff for m in modes]
    assert len(set(round(n, 6) for n in indices)) == 14
    assert all(0.0 <= m.te_fraction <= 1.0 for m in modes)
    mode = next(m for m in modes if m.label == "TE6")
    assert abs(mode.n_eff - 1.581647) < 2e-6
