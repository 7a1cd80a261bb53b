"""Run the benchmarks by hand: ``python tests/benchmarks/run.py [name ...]``.

Names: curve, factorisation, equal_error, error_against_seconds; all of them by default. Figures
are printed and kept in the folder ``output`` beside this file. Everything runs on one thread;
the whole takes about five minutes, half of them for the finest even grids. Needs the extra
``test``.
"""

from __future__ import annotations

import importlib
import os
import sys
from pathlib import Path

NAMES = ("curve", "factorisation", "equal_error", "error_against_seconds")
THREADS = ("OMP", "OPENBLAS", "MKL", "NUMEXPR", "VECLIB_MAXIMUM")


def main(names: list[str]) -> None:
    """Run the benchmarks named, or all."""
    unknown = [name for name in names if name not in NAMES]
    if unknown:
        sys.exit(f"no benchmark {', '.join(unknown)}: choose from {', '.join(NAMES)}")
    # before NumPy is imported, which each benchmark does
    os.environ.update({f"{library}_NUM_THREADS": "1" for library in THREADS})
    sys.path.insert(1, str(Path(__file__).parents[1]))
    for name in names or NAMES:
        importlib.import_module(name).run()
        print()


if __name__ == "__main__":
    main(sys.argv[1:])
