"""Computes channel_values.toml: converged finite-element values of channels and ribs.

Run from the repository's root, `PYTHONPATH=.:tests python tests/reference/compute_channel_values.py
[name ...]`; a quarter of an hour on one core, or only the cases named. Each case is solved on
three meshes (order 5, 6, 7 with 6, 7, 8 layers towards each corner) and once more with margins
half as wide again. The value is the finest mesh's; its uncertainty is the larger of the change
from the mesh before, the change with the margins, and a floor for rounding, so it bounds the
error from above: each step divides the error by about ten.
"""

from __future__ import annotations

import math
import sys
import time
from dataclasses import dataclass, field, replace
from pathlib import Path

from reference.finite_element_guides import Guide, Resolution, areas, channel, lowest_mode

import materials

TARGET = Path(__file__).with_name("channel_values.toml")
DECAYS = 17.0  # field decay lengths in a margin: exp(-34) = 2e-15, before the derivatives grow it
N2_M2_PER_W = {"silicon": 5.0e-18, "nitride": 2.4e-19, "silica": 2.5e-20, "air": 0.0}
KEYS = {
    "Si-Salzberg1957": "silicon",
    "Si3N4-Luke2015": "nitride",
    "SiO2-Malitson1965": "silica",
    1.0: "air",
}
FLOOR = {"n_eff": 2e-11, "n_group": 1e-9}


@dataclass(frozen=True)
class Case:
    """One cross-section and mode; ``beside`` is the index that the field feels far beside it."""

    name: str
    guide: Guide
    core: object
    substrate: object
    cladding: object
    polarisation: str
    wavelength_um: float = 1.55
    beside: float | None = None
    size: dict = field(default_factory=dict)


def _case(name, size, media, polarisation, **more):
    """Case of a channel (width, height) or rib (width, height, slab) of (core, below, above)."""
    core, below, above = media
    symmetric = len(size) == 2 and below == above
    guide = channel(*size, mirror_y=symmetric)
    keys = ("width_um", "height_um", "slab_um")
    return Case(
        f"{name}-{polarisation}",
        guide,
        core,
        below,
        above,
        polarisation,
        size=dict(zip(keys, size, strict=False)),
        **more,
    )


SI, SIN, OX = "Si-Salzberg1957", "Si3N4-Luke2015", "SiO2-Malitson1965"
GOELL = 1 / math.sqrt(1.5**2 - 1)


def cases() -> list[Case]:
    """All cross-sections, those with a value from elsewhere first."""
    both, te = ("TE", "TM"), ("TE",)
    table = [
        ("buried-nitride-constant", (1.6, 0.8), (2.0, 1.444, 1.444), both, {}),
        ("buried-silicon-constant", (0.5, 0.22), (3.48, 1.444, 1.444), both, {}),
        ("silicon-wire-eight-methods", (0.5, 0.22), (3.5, 1.45, 1.0), te, {}),
        ("rib-low-contrast", (2.0, 1.3, 0.2), (3.44, 3.34, 1.0), both, {"beside": 3.34}),
        ("square-goell", (GOELL, GOELL), (1.5, 1.0, 1.0), te, {"wavelength_um": 1.0}),
        ("nitride-1600x800-in-silica", (1.6, 0.8), (SIN, OX, OX), both, {}),
        ("silicon-500x300-in-silica", (0.5, 0.3), (SI, OX, OX), te, {}),
        ("nitride-1200x600-air-above", (1.2, 0.6), (SIN, OX, 1.0), both, {}),
        ("silicon-500x220-in-silica", (0.5, 0.22), (SI, OX, OX), both, {}),
        ("silicon-600x300-in-silica", (0.6, 0.3), (SI, OX, OX), both, {}),
        ("silicon-rib-air-above", (0.45, 0.22, 0.09), (SI, OX, 1.0), te, {"beside": 2.1}),
        ("silicon-rib-in-silica", (0.45, 0.22, 0.09), (SI, OX, OX), te, {"beside": 2.2}),
        ("nitride-rib-in-silica", (1.6, 0.8, 0.3), (SIN, OX, OX), te, {"beside": 1.68}),
    ]
    return [
        _case(name, size, media, pol, **more)
        for name, size, media, pols, more in table
        for pol in pols
    ]


def _index(medium):
    return medium if isinstance(medium, float) else materials.load(medium).index


def solve(case: Case, res: Resolution, guess=None):
    """Mode, named results, unknowns and seconds."""
    media = {name: _index(getattr(case, name)) for name in ("core", "substrate", "cladding")}
    start = time.perf_counter()
    mode = lowest_mode(
        case.guide, media, case.wavelength_um, case.polarisation, res, derivatives=4, guess=guess
    )
    out = {"n_eff": mode.n_eff, "n_group": mode.n_group}
    for k in (2, 3, 4):
        out[f"beta{k}_ps{k}_per_km"] = mode.beta_ps_per_km(k)
    named = all(getattr(case, r) in KEYS for r in media)
    n2 = {r: 1e12 * N2_M2_PER_W[KEYS[getattr(case, r)]] for r in media} if named else None
    for key, value in areas(mode, n2).items():
        if not key.startswith("weight"):
            out[key if key.startswith("gamma") else f"{key}_area_um2"] = value
    out["te_fraction"] = mode.x_fraction
    return out, {
        "unknowns": mode.pencil.unknowns,
        "skeleton": len(mode.pencil.skeleton),
        "seconds": time.perf_counter() - start,
    }


def _margins(case: Case, n_eff: float) -> dict:
    """Margins of DECAYS decay lengths on every side."""
    k0 = 2 * math.pi / case.wavelength_um

    def margin(medium):
        n = medium if isinstance(medium, float) else float(_index(medium)(case.wavelength_um))
        return max(0.5, DECAYS / (k0 * math.sqrt(n_eff**2 - n**2)))

    return {
        "margin_x": max(margin(n) for n in (case.beside or 1.0, case.substrate, case.cladding)),
        "margin_y": (margin(case.substrate), margin(case.cladding)),
    }


def converge(case: Case) -> dict:
    """Values with uncertainties, and how they came about."""
    first, _ = solve(case, Resolution(order=4, layers=4, margin_x=3.0, margin_y=(3.0, 3.0)))
    res = Resolution(**_margins(case, first["n_eff"]))
    guess = first["n_eff"] * (1 + 1e-4)
    runs = [
        solve(case, replace(res, order=p, layers=n), guess) for p, n in ((5, 6), (6, 7), (7, 8))
    ]
    wide = replace(res, margin_x=1.5 * res.margin_x, margin_y=tuple(1.5 * m for m in res.margin_y))
    wider, _ = solve(case, wide, guess)
    value, how = runs[-1]
    out = {}
    for key, fine in value.items():
        change = abs(fine - runs[1][0][key])
        # the wide domain's mesh differs a little, so this holds some mesh error too
        domain = abs(wider[key] - runs[1][0][key])
        floor = FLOOR.get(key, 1e-9 * abs(fine))
        out[key] = (fine, max(change, domain, floor))
    how["meshes"] = [run[0]["n_eff"] for run in runs]
    how["wider"] = wider["n_eff"]
    how["margins"] = (res.margin_x, *res.margin_y)
    return {"values": out, "how": how}


def _toml(case: Case, found: dict) -> str:
    how = found["how"]
    lines = [f'["{case.name}"]']
    lines += [f"{key} = {value:.10g}" for key, value in case.size.items()]
    for region in ("core", "substrate", "cladding"):
        medium = getattr(case, region)
        lines.append(
            f'{region} = "{medium}"' if isinstance(medium, str) else f"{region} = {medium}"
        )
    lines.append(f"wavelength_um = {case.wavelength_um}")
    lines.append(f'polarisation = "{case.polarisation}"')
    lines += [
        f"{key} = {{ value = {value:.14g}, uncertainty = {bar:.1e} }}"
        for key, (value, bar) in found["values"].items()
    ]
    mirrors = "x and y" if case.guide.mirror_y else "x"
    margins = ", ".join(f"{m:.2f}" for m in how["margins"])
    lines += [
        "order = 7",
        "layers = 8",
        f'mirror_planes = "{mirrors}"',
        f"margins_um = [{margins}]",
        f"unknowns = {how['unknowns']}",
        f"unknowns_after_elimination = {how['skeleton']}",
        f"seconds = {how['seconds']:.1f}",
        f"n_eff_of_the_meshes = [{', '.join(f'{n:.12f}' for n in how['meshes'])}]",
        f"n_eff_wider_margins = {how['wider']:.12f}",
    ]
    return "\n".join(lines) + "\n"


HEADER = """\
# Converged values of channels and ribs, written by compute_channel_values.py (see there how the
# uncertainties are found): vector finite elements on rectangles, order 7, eight layers of ratio
# 0.3 towards each corner; beta_k are exact derivatives of the discrete problem. mesh list: order
# 5, 6, 7. n2 for gamma, m2/W: silicon 5.0e-18, nitride 2.4e-19, silica 2.5e-20, air 0.
"""


def main(names: list[str]) -> None:
    """Solve and write; with names, print only those."""
    parts = []
    for case in cases():
        if names and not any(case.name.startswith(n) for n in names):
            continue
        parts.append(_toml(case, converge(case)))
        print(parts[-1], flush=True)
    if not names:
        TARGET.write_text(HEADER + "\n" + "\n".join(parts))


if __name__ == "__main__":
    main(sys.argv[1:])
