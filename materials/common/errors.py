"""The error tree. Every error a user can cause derives from ``IdlermapError``.

::

    IdlermapError
    |-- InputError (ValueError)          what was asked for makes no sense
    |   |-- OutOfRange                   a number outside its allowed range
    |   |   `-- OutsideMaterialRange     wavelength outside a material's measured range
    |   |-- UnknownName                  a key, option or label that does not exist
    |   |-- MissingData                  a value the request needs was never published
    |   `-- DesignFileError              one or more problems in a design file
    |-- NoGuidedMode (ValueError)        the cross-section guides nothing there
    |   `-- TooCloseToCutoff             guided, but decaying too slowly to resolve
    |-- SolverError (RuntimeError)       a numerical method did not do its work
    |   `-- NotConverged                 residual or ladder above what was allowed
    `-- StorageError (OSError)           a file could not be read or written whole

Arguments are positional, so that an error survives pickling from a worker process.
The command line maps these classes to exit codes: ``phasematch.exit_codes``.
"""

from __future__ import annotations


class IdlermapError(Exception):
    """Base of every error raised on purpose by this project."""


class InputError(IdlermapError, ValueError):
    """The request makes no sense; the message says what, the value and what is allowed."""


class OutOfRange(InputError):
    """A number lies outside its allowed range."""


class OutsideMaterialRange(OutOfRange):
    """A wavelength lies outside the measured range of a material."""


class UnknownName(InputError):
    """A key, option or label does not exist."""


class MissingData(InputError):
    """The request needs a value that the material table does not have."""


class DesignFileError(InputError):
    """Problems in a design file; ``args[0]`` is the tuple of one-line messages."""

    def __str__(self) -> str:
        return "\n".join(self.args[0])


class NoGuidedMode(IdlermapError, ValueError):
    """The cross-section guides no (such) mode at this wavelength."""


class TooCloseToCutoff(NoGuidedMode):
    """The field decays too slowly into the cladding for the margins allowed."""


class SolverError(IdlermapError, RuntimeError):
    """A numerical method did not do its work."""


class NotConverged(SolverError):
    """A residual or a ladder of grids stayed above what was allowed."""


class StorageError(IdlermapError, OSError):
    """A file could not be read or written whole."""
