"""What the verbs of the command have in common: options, output, notes, exit codes."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import click
from rich.console import Console

from materials.common.errors import (
    InputError,
    NoGuidedMode,
    OutOfRange,
    SolverError,
    StorageError,
)
from materials.common.results import Result

BUG, USAGE, FAILED_POINTS, RANGE, STORAGE, INTERRUPTED = 1, 2, 3, 4, 5, 130


def out() -> Console:
    """Console of stdout: no colour where NO_COLOR is set or stdout is no terminal."""
    return Console(highlight=False, soft_wrap=False)


def say(message: str) -> None:
    """One line on stderr."""
    click.echo(f"idlermap: {message}", err=True)


@contextmanager
def progress() -> Iterator[Callable[[str], None]]:
    """Report what is being done: a moving line on a terminal, log lines elsewhere."""
    console = Console(stderr=True, highlight=False)
    if not console.is_terminal:
        yield say
        return
    with console.status("") as status:
        yield lambda message: status.update(f"{message} ...")


def notes(lines: Any) -> None:
    """Notes of a result on stderr, once each; the caution about pump powers on stdout."""
    from phasematch.caution import LASER_CAUTION
    from phasematch.report import notes_lines

    for line in notes_lines(lines):
        say(line)
    if LASER_CAUTION in lines:
        click.echo("\n" + click.wrap_text(LASER_CAUTION, 80))


def check_file(path: str | None, replace: bool) -> None:
    """Refuse a file named on the command line before any work is done."""
    if path is None:
        return
    if Path(path).suffix.lower() not in (".csv", ".h5"):
        raise click.BadParameter(f"{path}: the name must end in .csv or .h5", param_hint="-o")
    if not Path(path).absolute().parent.is_dir():
        raise StorageError(f"cannot write {path}: its folder does not exist; make it first")
    if os.path.exists(path) and not replace:
        raise StorageError(f"{path} exists; give another name, or --replace to replace it")


def save(result: Result, path: str | None) -> None:
    """Write a result to a file named on the command line; the suffix is the format."""
    if path is None:
        return
    if Path(path).suffix.lower() == ".csv":
        result.to_csv(path)
    else:
        result.to_hdf5(path)
    say(f"wrote {path}")


DESIGN = click.Path(exists=True, dir_okay=False)


def design_argument(function: Any) -> Any:
    changes = click.option(
        "--set", "changes", multiple=True, metavar="KEY=VALUE",
        help="Lay a value over the design, e.g. cross_section.width_um=1.7; repeatable.",
    )  # fmt: skip
    return click.argument("design", type=DESIGN)(changes(function))


def output_options(function: Any) -> Any:
    file = click.option("-o", "--output", help="Also write the result here (.csv or .h5).")
    again = click.option("--replace", is_flag=True, help="Replace an existing file.")
    return file(again(function))


def read(path: str, changes: tuple[str, ...]) -> Any:
    from phasematch.design_file import read_design

    return read_design(path, changes)


def exit_code(error: BaseException) -> int:
    """Exit code of an error, as the help text lists them."""
    if isinstance(error, NoGuidedMode | OutOfRange):
        return RANGE
    if isinstance(error, InputError):
        return USAGE
    if isinstance(error, SolverError):
        return FAILED_POINTS
    if isinstance(error, StorageError):
        return STORAGE
    return BUG
