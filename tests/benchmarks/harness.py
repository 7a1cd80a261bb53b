"""Clock, tables and facts shared by the benchmarks.

Seconds are processor time of the one thread in use: on an idle core the same as time on the
wall, and on a busy machine far steadier. Works to be compared run in turns, so that whatever
else the machine does meets them alike.
"""

from __future__ import annotations

import csv
import gc
import os
import platform
import textwrap
import time
from collections import Counter
from collections.abc import Callable, Iterator
from contextlib import ExitStack, contextmanager
from importlib.metadata import version
from pathlib import Path
from typing import Any
from unittest.mock import patch

OUTPUT = Path(__file__).with_name("output")
WIDTH = 96


class Stages:
    """Seconds by stage; a stage inside another counts for itself alone."""

    def __init__(self) -> None:
        self.seconds: Counter[str] = Counter()
        self._inner = [0.0]

    @contextmanager
    def __call__(self, name: str) -> Iterator[None]:
        started = time.process_time()
        self._inner.append(0.0)
        try:
            yield
        finally:
            whole = time.process_time() - started
            self.seconds[name] += whole - self._inner.pop()
            self._inner[-1] += whole

    @contextmanager
    def inside(self, *places: tuple[Any, str, str]) -> Iterator[None]:
        """Count calls of functions, given as (owner, attribute, stage), as a stage each."""
        with ExitStack() as stack:
            for owner, attribute, stage in places:
                timed = self._timed(getattr(owner, attribute), stage)
                stack.enter_context(patch.object(owner, attribute, timed))
            yield

    def _timed(self, function: Callable, stage: str) -> Callable:
        def run(*arguments, **named):
            with self(stage):
                return function(*arguments, **named)

        return run

    @property
    def total(self) -> float:
        """Seconds of all stages."""
        return sum(self.seconds.values())


def seconds_of(work: Callable[[], Any]) -> tuple[float, Any]:
    """Processor seconds of one call, and what it returned."""
    gc.collect()
    started = time.process_time()
    result = work()
    return time.process_time() - started, result


def in_turns(works: dict[str, Callable[[], Any]], rounds: int) -> dict[str, list[float]]:
    """Processor seconds of each work, all run one after the other in every round."""
    out: dict[str, list[float]] = {name: [] for name in works}
    for _ in range(rounds):
        for name, work in works.items():
            out[name].append(seconds_of(work)[0])
    return out


def facts() -> str:
    """What the figures were taken with."""
    names = ("numpy", "scipy", "scikit-fem")
    libraries = ", ".join(f"{name} {version(name)}" for name in names)
    return (
        f"one thread, {os.cpu_count()} cores, Python {platform.python_version()}, {libraries}; "
        "seconds are processor time"
    )


class Report:
    """What a benchmark prints, kept as text in the output folder too."""

    def __init__(self, name: str, title: str) -> None:
        self.name = name
        self._lines: list[str] = []
        self.say(title)
        self.say(facts())

    def say(self, line: str = "") -> None:
        """Print one paragraph."""
        for part in textwrap.wrap(line, WIDTH) or [""]:
            self._put(part)

    def _put(self, line: str) -> None:
        print(line, flush=True)
        self._lines.append(line)

    def table(self, head: tuple[str, ...], rows: list[tuple[Any, ...]]) -> None:
        """Print rows under a head, columns aligned."""
        texts = [head, *(tuple(str(cell) for cell in row) for row in rows)]
        widths = [max(len(row[i]) for row in texts) for i in range(len(head))]
        self.say()
        for row in texts:
            cells = [row[0].ljust(widths[0])]
            cells += [cell.rjust(width) for cell, width in zip(row[1:], widths[1:], strict=True)]
            self._put("  ".join(cells).rstrip())
        self.say()

    def save(self) -> None:
        """Write the text."""
        OUTPUT.mkdir(exist_ok=True)
        (OUTPUT / f"{self.name}.txt").write_text("\n".join(self._lines) + "\n", encoding="utf-8")


def save_csv(name: str, head: tuple[str, ...], rows: list[tuple[Any, ...]]) -> None:
    """Write rows as CSV to the output folder."""
    OUTPUT.mkdir(exist_ok=True)
    with (OUTPUT / f"{name}.csv").open("w", newline="", encoding="utf-8") as stream:
        csv.writer(stream, lineterminator="\n").writerows([head, *rows])
