"""The exit codes of the command: one table, from which help text and mapping follow.

Examples
--------
>>> from materials.common.errors import NotConverged, OutOfRange, UnknownName
>>> [exit_code(kind("")) for kind in (OutOfRange, UnknownName, NotConverged)]
[4, 2, 1]
"""

from __future__ import annotations

from typing import NamedTuple

from materials.common.errors import (
    InputError,
    NoGuidedMode,
    OutOfRange,
    SolverError,
    StorageError,
)

GOOD, FAULT, USAGE, FAILED_POINTS, RANGE, STORAGE, INTERRUPTED = 0, 1, 2, 3, 4, 5, 130


class ExitCode(NamedTuple):
    """A code, what it means, and the errors that lead to it (with their children)."""

    code: int
    words: str
    errors: tuple[type[BaseException], ...] = ()


#: All of them. A child of two entries counts as the nearer one (`OutOfRange` is an
#: `InputError`); any error that is not listed is a bug.
EXIT_CODES = (
    ExitCode(GOOD, "good"),
    ExitCode(FAULT, "our fault: a bug, or a solver that did not do its work", (SolverError,)),
    ExitCode(USAGE, "wrong usage, or problems in the design file (one line each)", (InputError,)),
    ExitCode(FAILED_POINTS, "finished, but values that were asked for are unknown"),
    ExitCode(RANGE, "an input out of range, or no guided mode", (OutOfRange, NoGuidedMode)),
    ExitCode(
        STORAGE,
        "a design, file, folder or stdout could not be read or written",
        (StorageError,),
    ),
    ExitCode(INTERRUPTED, "interrupted, or told to terminate", (KeyboardInterrupt,)),
)


def exit_code(error: BaseException) -> int:
    """Exit code of an error: that of its nearest ancestor in the table."""
    codes = {kind: entry.code for entry in EXIT_CODES for kind in entry.errors}
    return next((codes[kind] for kind in type(error).__mro__ if kind in codes), FAULT)


def help_text() -> str:
    """The table as the help shows it."""
    lines = [f"  {entry.code:<3}  {entry.words}" for entry in EXIT_CODES]
    return "\n".join(["\b", "Exit codes:", *lines])
