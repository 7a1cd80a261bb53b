"""Are the error bars honest? Counted over every outside value at hand.

A bar that is too small is a bug; one thirty times too large is one as well.
"""

from __future__ import annotations

import tomllib
from pathlib import Path

import numpy as np
import pytest
from reference import test_boxes, test_channels, test_slabs

from materials.common.constants import C_UM_PER_PS
from modesolve.maps import EVEN, Grading
from modesolve.refine import refine

CONVERGED = tomllib.loads(Path(__file__).with_name("channel_values.toml").read_text())


def slab_pairs():
    """(error, bar) of n_eff, n_group, D, beta3, beta4 of every slab."""
    for d, nf, ns, nc, mode, *values in test_slabs.FIXED:
        found, bars = test_slabs.figures(test_slabs.solved(d, nf, ns, nc, mode))
        yield from zip(np.abs(found[:3] - values), bars[:3], strict=True)
    for d, film, mode, *values in test_slabs.DISPERSIVE:
        silica = test_slabs.SILICA
        found, bars = test_slabs.figures(test_slabs.solved(d, film, silica, silica, mode))
        yield from zip(np.abs(found - values), bars, strict=True)


def box_pairs():
    """(error, bar) of n_eff and n_group of every box on both kinds of grid."""
    for grading in (EVEN, Grading()):
        for shape, _, *values in test_boxes.MODES:
            layout, omega, seed = test_boxes.seeded(shape, values[0], grading)
            resolved = refine(layout, omega, seed)

            def figures(series, omega=omega):
                beta = series["beta"]
                return np.array([C_UM_PER_PS * beta[0] / omega, C_UM_PER_PS * beta[1]])

            errors = np.abs(figures(resolved.values) - values)
            yield from zip(errors, resolved.bar(figures), strict=True)


def channel_pairs():
    """(error, bar) of every channel and rib that finite elements have solved to more digits."""
    for name, case in CONVERGED.items():
        if name.startswith("square"):
            continue  # both polarisations are one pair there
        mode = test_channels.solve(
            case["polarisation"] + "0",
            case["core"],
            case["substrate"],
            case["cladding"],
            case["width_um"],
            case["height_um"],
            wavelength_um=case["wavelength_um"],
            slab_um=case.get("slab_um", 0.0),
        )
        for key, entry in case.items():
            # gamma was computed there with n2 of its own; the areas stand for it
            if isinstance(entry, dict) and key in mode.error and key != "gamma_per_w_m":
                bar = mode.error[key]
                if entry["uncertainty"] < 0.3 * bar:
                    yield abs(getattr(mode, key) - entry["value"]), bar


@pytest.mark.slow
@pytest.mark.source(
    "closed forms and converged finite elements", "tests of slabs, boxes and channels", "9 to 16"
)
def test_errors_lie_inside_their_bars_and_bars_are_not_idle():
    pairs = np.array([*slab_pairs(), *box_pairs(), *channel_pairs()])
    inside = pairs[:, 0] <= pairs[:, 1]
    tight = pairs[:, 1] < 30.0 * pairs[:, 0]
    print(
        f"{inside.sum()} of {len(pairs)} errors inside their bars, "
        f"{tight.sum()} bars below thirty errors"
    )
    assert len(pairs) > 150
    assert inside.mean() >= 0.95
    assert tight.mean() > 0.5
