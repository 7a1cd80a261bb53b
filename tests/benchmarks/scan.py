"""Search for the most economical third-order finite-element meshes.

Not part of the run: what it found stands in `meshes.py`. Starting from that, meshes are drawn
at random, then the best are varied; kept are those that no other beats in both seconds and
lasting error.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
from cases import CASES, Case
from harness import Stages
from meshes import MESHES, Mesh
from methods import elements_index, lasting_mesh_error

DRAWS, ROUNDS, SEED = 400, 25, 1

Tried = tuple[float, float, Mesh]  # lasting error, seconds


def drawn(random: np.random.Generator) -> Mesh:
    """Any mesh."""
    return Mesh(
        layers=int(random.integers(1, 11)),
        ratio=float(random.uniform(0.05, 0.4)),
        step=float(random.uniform(0.3, 2.0)),
        growth=float(random.uniform(1.2, 3.5)),
        widest=float(random.uniform(0.6, 5.0)),
        margin=float(random.uniform(5.0, 11.0)),
    )


def varied(mesh: Mesh, random: np.random.Generator) -> Mesh:
    """A mesh much like another."""
    factor = np.exp(random.normal(0.0, 0.12, 5))
    return replace(
        mesh,
        layers=max(1, mesh.layers + int(random.integers(-1, 2))),
        ratio=min(0.5, mesh.ratio * float(factor[0])),
        step=mesh.step * float(factor[1]),
        growth=max(1.1, mesh.growth * float(factor[2])),
        widest=mesh.widest * float(factor[3]),
        margin=min(11.0, mesh.margin * float(factor[4])),
    )


def tried(case: Case, mesh: Mesh, front: list[Tried]) -> Tried:
    """Lasting error and seconds; only the plain error where that is beaten already."""
    try:
        seconds, error = math.inf, math.inf
        for _ in range(2):
            stages = Stages()
            error = abs(elements_index(case, mesh, stages)[0] - case.n_eff)
            seconds = min(seconds, stages.total)
        if not any(e <= error and s <= seconds for e, s, _ in front):
            error = lasting_mesh_error(case, mesh)
    except RuntimeError:  # elements so small that rounding keeps the iteration from settling
        return math.inf, math.inf, mesh
    return error, seconds, mesh


def best(meshes: list[Tried]) -> list[Tried]:
    """Those that nothing quicker is more exact than, quickest first."""
    kept: list[Tried] = []
    for one in sorted(meshes, key=lambda t: t[1]):
        if one[0] < min((t[0] for t in kept), default=math.inf):
            kept.append(one)
    return kept


def scan(case: Case) -> list[Tried]:
    """Best meshes of a case."""
    random = np.random.default_rng(SEED)
    front: list[Tried] = []
    for mesh in MESHES:
        front = best([*front, tried(case, mesh, front)])
    for _ in range(DRAWS):
        front = best([*front, tried(case, drawn(random), front)])
    for _ in range(ROUNDS):
        for _, _, mesh in list(front):
            front = best([*front, tried(case, varied(mesh, random), front)])
    return front


if __name__ == "__main__":
    for case in CASES:
        print(case.name)
        for error, seconds, mesh in scan(case):
            print(f"{error:.1e} {1e3 * seconds:.1f} ms  {mesh}", flush=True)
