"""(4) Error in n_eff against seconds: plain even grids, ladders, finite elements, as a figure.

Even grids are solved in the plain way (SuperLU's default order, ARPACK by the generalised
route); the finite elements are those meshes of `meshes.py` that none beats in both.
Errors of ladders and meshes are the largest of their own and those of the next finer ones, so
that no point owes its place to a lucky cancellation.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import matplotlib
from cases import CASES, Case
from harness import OUTPUT, Report, Stages, save_csv
from meshes import MESHES
from methods import (
    Ladder,
    elements_index,
    even_index,
    ladder_index,
    lasting_ladder_error,
    lasting_mesh_error,
)

matplotlib.use("Agg")
from matplotlib import pyplot as plt

LADDERS = ((2, 3), (2, 3, 4), (2, 3, 4, 5), (3, 4, 5, 6), (4, 5, 6, 7), (4, 5, 6, 7, 8))
#: Cells along the core's height.
EVEN_CELLS = (5, 10, 20, 40, 80)
ROUNDS = 9

Point = tuple[str, str, int, float, float]  # method, detail, unknowns, error, seconds

STYLES = {
    "even grid": ("o", "#7f7f7f", "plain even grid"),
    "ladder": ("s", "#0072b2", "ladder, as the package lays it"),
    "lean ladder": ("D", "#56b4e9", "ladder, lean"),
    "finite elements": ("^", "#d55e00", "finite elements, order 3"),
}
HEAD = ("guide", "method", "detail", "unknowns", "error_n_eff", "seconds")


def ladder_points(case: Case, lean: bool) -> list[Point]:
    """Ladders of more and finer grids."""
    out = []
    for grids in LADDERS:
        ladder = Ladder.lean_of(grids) if lean else Ladder(grids)
        _, seconds = _quickest(lambda s, x=ladder: ladder_index(case, x, s), ROUNDS)
        error = lasting_ladder_error(case, ladder)
        method = "lean ladder" if lean else "ladder"
        out.append((method, str(ladder), ladder.unknowns(case), error, seconds))
    return out


def element_points(case: Case) -> list[Point]:
    """Finite elements on ever finer meshes, those alone that no quicker one beats."""
    out: list[Point] = []
    for mesh in MESHES:
        found, seconds = _quickest(lambda s, x=mesh: elements_index(case, x, s), ROUNDS)
        detail, error = f"{mesh.layers} layers", lasting_mesh_error(case, mesh)
        out.append(("finite elements", detail, found[1], error, seconds))
    out.sort(key=lambda point: point[4])
    return [p for i, p in enumerate(out) if p[3] < min((q[3] for q in out[:i]), default=1.0)]


def even_points(case: Case) -> list[Point]:
    """Plain even grids."""
    out = []
    for cells in EVEN_CELLS:
        step, rounds = case.section.height_um / cells, ROUNDS if cells < 40 else 1
        found, seconds = _quickest(lambda s, x=step: even_index(case, x, s), rounds)
        error = abs(found[0] - case.n_eff)
        out.append(("even grid", f"{1e3 * step:.3g} nm", found[1], error, seconds))
    return out


def points_of(case: Case) -> list[Point]:
    """All methods."""
    ladders = [*ladder_points(case, False), *ladder_points(case, True)]
    return [*ladders, *element_points(case), *even_points(case)]


def _quickest(work: Callable[[Stages], Any], rounds: int) -> tuple[Any, float]:
    """What a work returns and the fewest seconds it took."""
    fewest = math.inf
    for _ in range(rounds):
        stages = Stages()
        found = work(stages)
        fewest = min(fewest, stages.total)
    return found, fewest


def draw(points: dict[str, list[Point]]) -> None:
    """One panel a guide."""
    figure, panels = plt.subplots(
        1, len(points), figsize=(7.2, 3.5), sharex=True, sharey=True, layout="constrained"
    )
    for panel, (guide, found) in zip(panels, points.items(), strict=True):
        for method, (marker, colour, label) in STYLES.items():
            own = [p for p in found if p[0] == method]
            seconds, errors = [p[4] for p in own], [p[3] for p in own]
            panel.loglog(seconds, errors, marker=marker, color=colour, label=label, ms=4.5, lw=1.2)
        panel.set_title(f"{guide} um core in silica, TE0", fontsize=9)
        panel.set_xlabel("processor time (s)")
        panel.grid(True, which="major", color="0.9", lw=0.6)
        panel.spines[["top", "right"]].set_visible(False)
    panels[0].set_ylabel("error of effective index (1)")
    lines, labels = panels[0].get_legend_handles_labels()
    figure.legend(
        lines, labels, loc="outside upper center", ncols=len(labels), frameon=False, fontsize=8
    )
    figure.savefig(OUTPUT / "error_against_seconds.png", dpi=200)
    plt.close(figure)


def run() -> None:
    """Print and keep the figures."""
    report = Report("error_against_seconds", "(4) error of n_eff of TE0 against seconds")
    points = {case.name: points_of(case) for case in CASES}
    rows = [(guide, *point) for guide, found in points.items() for point in found]
    report.table(HEAD, [(*row[:4], f"{row[4]:.1e}", f"{row[5]:.4f}") for row in rows])
    report.say(
        f"quickest of {ROUNDS} runs (even grids of 40 cells and more along the core: one run); "
        "each finds the mode from the guide alone; ladder and even grids on half of the guide, "
        "lean ladder (both mirror planes, grading q 3) and finite elements on a quarter; the "
        "converged indices are uncertain by 2e-11 (nitride) and 4e-10 (silicon)"
    )
    report.save()
    save_csv("error_against_seconds", HEAD, [(*r[:4], f"{r[4]:.3e}", f"{r[5]:.5f}") for r in rows])
    draw(points)
