"""(2) Sparse factorisation in the grid's own nested-dissection order against SuperLU's default.

The same shifted matrix both times. The order costs once per grid shape and is kept, so it has
its own column; the ratio is that of the factorisations, permuting included, and the ratio with
the order computed afresh stands beside it. Multiplications follow from the factors' structure:
a pivot with l entries below and u to its right costs l (u + 1).
"""

from __future__ import annotations

import numpy as np
import scipy.sparse as sp
from cases import NITRIDE, TE_BOUNDARY, forget
from harness import Report, in_turns, seconds_of
from scipy.sparse.linalg import SuperLU, splu

from modesolve.eigen import Factorisation, Pencil, dissection_order

#: Refinements that give about 6 000, 25 000, 65 000 and 200 000 unknowns, and repeats.
SIZES = ((5, 15), (10, 9), (16, 7), (28, 5))
LEAST_RATIO = 2.0


def shifted_matrix(refinement: int) -> tuple[sp.csr_array, tuple[int, int]]:
    """A - shift Mn of nitride TE0 on one graded grid, and the grid's shape."""
    grid = NITRIDE.layout.grid(NITRIDE.box(11.0), refinement)
    permittivity = NITRIDE.layout.permittivity(NITRIDE.omega, 0)[:, 0]
    pencil = Pencil(NITRIDE.layout.operators(grid, TE_BOUNDARY), NITRIDE.k0, permittivity)
    shift = (NITRIDE.k0 * NITRIDE.n_eff) ** 2 * (1.0 + 1e-4)
    return sp.csr_array(pencil.matrix - shift * pencil.mass), grid.shape


def multiplications(factors: SuperLU) -> float:
    """Multiplications and divisions of the elimination, from the factors' structure."""
    below = np.diff(factors.L.tocsc().indptr) - 1
    right = np.diff(factors.U.tocsr().indptr) - 1
    return float(np.sum(below.astype(float) * (right + 1)))


def own_factors(matrix: sp.csr_array, order: np.ndarray) -> SuperLU:
    """The factors that `Factorisation` keeps to itself, for counting."""
    return splu(
        sp.csc_array(matrix[order][:, order]),
        permc_spec="NATURAL",
        diag_pivot_thresh=0.0,
        options={"SymmetricMode": True},
    )


def run() -> None:
    """Print and keep the figures."""
    report = Report("factorisation", "(2) factorisation of nitride TE0, graded grids")
    rows = []
    for refinement, rounds in SIZES:
        matrix, shape = shifted_matrix(refinement)
        forget()
        order_seconds, order = seconds_of(lambda shape=shape: dissection_order(shape, TE_BOUNDARY))
        as_columns = sp.csc_array(matrix)
        default = multiplications(splu(as_columns))
        own = multiplications(own_factors(matrix, order))
        works = {
            "own": lambda m=matrix, o=order: Factorisation(m, o),
            "default": lambda m=as_columns: splu(m),
        }
        seconds = {name: min(taken) for name, taken in in_turns(works, rounds).items()}
        rows.append(
            (
                matrix.shape[0],
                f"{seconds['default']:.4f}",
                f"{seconds['own']:.4f}",
                f"{seconds['default'] / seconds['own']:.2f}",
                f"{order_seconds:.4f}",
                f"{seconds['default'] / (seconds['own'] + order_seconds):.2f}",
                f"{default:.2e}",
                f"{own:.2e}",
                f"{default / own:.2f}",
            )
        )
    head = (
        "unknowns",
        "default s",
        "own s",
        "ratio",
        "order s",
        "with order",
        "default mult.",
        "own mult.",
        "ratio",
    )
    report.table(head, rows)
    report.say(
        f"ratio wanted {LEAST_RATIO:g}; minimum of {', '.join(str(r) for _, r in SIZES)} runs "
        "taken in turns"
    )
    report.save()
