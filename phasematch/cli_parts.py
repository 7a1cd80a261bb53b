"""What the verbs of the command have in common: options, output, notes, the way work ends."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click
from rich.console import Console

from materials.common.errors import StorageError
from materials.common.files import check_free
from materials.common.results import Result
from phasematch.exit_codes import FAILED_POINTS, GOOD
from phasematch.reasons import count_failed

if TYPE_CHECKING:
    from phasematch.design_file import Design


class _Stdout(Console):
    """A console that leaves a reader gone away to the entry point, like any other failure."""

    def on_broken_pipe(self) -> None:
        raise BrokenPipeError


def out() -> Console:
    """Console of stdout: no colour where NO_COLOR is set or stdout is no terminal."""
    return _Stdout(highlight=False, soft_wrap=False)


def say(message: str) -> None:
    """One line on stderr."""
    click.echo(f"idlermap: {message}", err=True)


@contextmanager
def working() -> Iterator[Callable[[str], None]]:
    """Do heavy work: one thread of linear algebra, and a function to report progress.

    The sparse solver's dense blocks are small, and more threads only wait for each other.
    What is reported is a moving line on a terminal, log lines elsewhere.
    """
    from threadpoolctl import threadpool_limits

    with threadpool_limits(1, "blas"), _progress() as tell:
        yield tell


@contextmanager
def _progress() -> Iterator[Callable[[str], None]]:
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


def check_file(path: str | None, replace: bool, design: str) -> None:
    """Refuse a file named on the command line before any work is done."""
    if path is None:
        return
    if not path:
        raise click.BadParameter("the name is empty; give a file", param_hint="-o")
    if Path(path).suffix.lower() not in (".csv", ".h5"):
        raise click.BadParameter(f"{path}: the name must end in .csv or .h5", param_hint="-o")
    if not Path(path).absolute().parent.is_dir():
        raise StorageError(f"cannot write {path}: its folder does not exist; make it first")
    check_free(path, replace=replace)
    if os.path.exists(path) and os.path.samefile(path, design):
        raise StorageError(f"{path} is the design and would be replaced; give another name")


def save(result: Result, path: str | None) -> None:
    """Write a result to a file named on the command line; the suffix is the format."""
    if path is None:
        return
    if Path(path).suffix.lower() == ".csv":
        result.to_csv(path)
    else:
        result.to_hdf5(path)
    say(f"wrote {path}")


DESIGN = click.Path()  # one that cannot be read is an error of storage, not of usage


def design_argument(function: Any) -> Any:
    """The design file and what is laid over it."""
    changes = click.option(
        "--set", "changes", multiple=True, metavar="KEY=VALUE",
        help="Lay a value over the design, e.g. cross_section.width_um=1.7; repeatable.",
    )  # fmt: skip
    return click.argument("design", type=DESIGN)(changes(function))


def replace_option(about: str = "Replace an existing file.") -> Any:
    """--replace, for verbs that write."""
    return click.option("--replace", is_flag=True, help=about)


def output_options(about: str) -> Any:
    """-o with its meaning, and --replace."""

    def decorate(function: Any) -> Any:
        return click.option("-o", "--output", help=about)(replace_option()(function))

    return decorate


def finish(*results: Any) -> int:
    """Say how many points failed, and give the exit code that goes with it."""
    failed = count_failed(results)
    if not failed:
        return GOOD
    say(f"points without a value: {failed}; the column reason says why")
    return FAILED_POINTS


def read(path: str, changes: tuple[str, ...]) -> Design:
    """The checked design of a file, with changes laid over it."""
    from phasematch.design_file import read_design

    return read_design(path, changes)
