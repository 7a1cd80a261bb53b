"""(3) Eigen-solves of one mode against third-order vector finite elements at equal error.

Each side takes the smallest it needs: the ladder of fewest unknowns whose error lies below the
target, the most economical mesh of `meshes.py` whose does; in either case the errors of the
next finer ones must lie below it too, so that none is chosen for a lucky cancellation. The
ladder stands twice: as the package lays it by default (one mirror plane), and lean, that is
with both mirror planes, margins and grading chosen for economy as the meshes are. All start
from the guide and its symmetry class alone, build everything afresh (order of elimination
too), and stop at the index.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import partial
from itertools import combinations
from typing import Any

from cases import CASES, Case
from harness import Report, Stages
from meshes import MESHES, Mesh
from methods import (
    FACTORISATION,
    ITERATION,
    STAGES,
    Ladder,
    elements_index,
    ladder_index,
    lasting_ladder_error,
    lasting_mesh_error,
)

ROUNDS = 25
GRIDS = range(2, 7)
LEAST_RATIO, AIM = 1.0, 2.0


def smallest_ladder(case: Case, lean: bool) -> Ladder:
    """Ladder of three or four grids with fewest unknowns whose error is below the target."""
    chosen = [grids for count in (3, 4) for grids in combinations(GRIDS, count)]
    for grids in sorted(chosen, key=lambda grids: sum(m * m for m in grids)):
        ladder = Ladder.lean_of(grids) if lean else Ladder(grids)
        if lasting_ladder_error(case, ladder) <= case.target:
            return ladder
    raise SystemExit(f"no ladder reaches {case.target:.0e} on {case.name}")


def quickest_mesh(case: Case) -> Mesh:
    """Most economical mesh known whose error is below the target."""
    good = [mesh for mesh in MESHES if lasting_mesh_error(case, mesh) <= case.target]
    works = {mesh: lambda stages, m=mesh: elements_index(case, m, stages) for mesh in good}
    found = best_of(works, 5)
    return min(found, key=lambda mesh: found[mesh].total)


def best_of(works: dict[Any, Callable[[Stages], object]], rounds: int) -> dict[Any, Stages]:
    """Quickest of many runs of each, in turns."""
    best: dict[Any, Stages] = {}
    for _ in range(rounds):
        for name, work in works.items():
            stages = Stages()
            work(stages)
            if name not in best or stages.total < best[name].total:
                best[name] = stages
    return best


def run() -> None:
    """Print and keep the figures."""
    report = Report("equal_error", "(3) index of TE0 at equal error: ladder and finite elements")
    rows, ratios = [], []
    for case in CASES:
        mesh = quickest_mesh(case)
        ladders = [smallest_ladder(case, lean) for lean in (False, True)]
        works = {f"ladder {ladder}": partial(ladder_index, case, ladder) for ladder in ladders}
        works["finite elements"] = lambda s, c=case, m=mesh: elements_index(c, m, s)[0]
        sizes = [ladder.unknowns(case) for ladder in ladders]
        sizes.append(elements_index(case, mesh, Stages())[1])
        errors = [abs(work(Stages()) - case.n_eff) for work in works.values()]
        found = best_of(works, ROUNDS)
        for (name, stages), size, error in zip(found.items(), sizes, errors, strict=True):
            cells = [f"{1e3 * stages.seconds[stage]:.1f}" for stage in STAGES]
            total = f"{1e3 * stages.total:.1f}"
            rows.append((case.name, name, size, f"{error:.1e}", *cells, total))
        *own, other = found.values()
        solve = [s.seconds[FACTORISATION] + s.seconds[ITERATION] for s in (*own, other)]
        ratios.append(
            (
                case.name,
                f"{other.total / own[0].total:.2f}",
                f"{solve[2] / solve[0]:.2f}",
                f"{other.total / own[1].total:.2f}",
                f"{solve[2] / solve[1]:.2f}",
            )
        )
    report.table(("guide", "method", "unknowns", "error", *(f"{s} ms" for s in STAGES), "ms"), rows)
    head = ("ladder", "solve alone", "lean ladder", "solve alone")
    report.table(("finite elements over", *head), ratios)
    report.say(
        f"wanted above {LEAST_RATIO:g}, aimed at {AIM:g}; quickest of {ROUNDS} runs taken in "
        "turns; solve: factorisation and iteration; finite elements of order 3, the inside of "
        "elements eliminated first (in assembly)"
    )
    report.save()
