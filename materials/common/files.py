"""Files that appear whole or not at all, and the named quantities that go into them.

Every file is written to a temporary one in the same folder, closed, flushed to the disk
and renamed over the target; the folder's entry is flushed last. A run killed at any
moment leaves the old file or the new one, never half of one.
"""

from __future__ import annotations

import contextlib
import os
import secrets
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from materials.common.errors import InputError, StorageError

ADVICE = "check that the folder exists and may be written to, and that the disk has room"


@dataclass(frozen=True, slots=True, eq=False)
class Variable:
    """One named quantity as it goes into a file.

    Attributes
    ----------
    name : str
        Column or dataset name, unit suffix included.
    values : ndarray
        Numbers, booleans or strings, one axis per entry of ``dims``.
    dims : tuple of str
        Names of the axes. A variable named like a dimension holds that axis's values.
    unit, long_name : str
        Unit ("1" where there is none) and the axis label in words.
    error : ndarray or None
        Absolute error bar of the same shape and unit.
    """

    name: str
    values: np.ndarray
    dims: tuple[str, ...]
    unit: str
    long_name: str
    error: np.ndarray | None = None

    def __post_init__(self) -> None:
        if np.ndim(self.values) != len(self.dims):
            raise InputError(
                f"{self.name}: an array of shape {np.shape(self.values)} does not fit the "
                f"dimensions {self.dims}; give one name per axis"
            )


@contextlib.contextmanager
def whole_file(path: str | os.PathLike[str]) -> Iterator[Path]:
    """Give a temporary path to write to; put it in place of ``path`` on a clean exit.

    Raises
    ------
    StorageError
        When the file cannot be written, flushed or renamed. The target is untouched then.
    """
    target = Path(os.path.realpath(path))
    temporary = target.with_name(f".{target.name}.{secrets.token_hex(4)}.part")
    try:
        # created here, not by mkstemp, so that the user's umask decides who may read it
        os.close(os.open(temporary, os.O_CREAT | os.O_EXCL | os.O_WRONLY, 0o666))
        yield temporary
        flush(temporary)
        os.replace(temporary, target)
        flush(target.parent)
    except StorageError:
        raise
    except OSError as exc:
        raise StorageError(f"cannot write {path}: {exc.strerror or exc}; {ADVICE}") from exc
    finally:
        with contextlib.suppress(OSError):
            temporary.unlink(missing_ok=True)


def flush(path: Path) -> None:
    """Flush a closed file or a folder to the disk."""
    descriptor = os.open(path, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)


def check_free(path: str | os.PathLike[str], *, replace: bool = False) -> None:
    """Refuse a file that exists, unless it may be replaced.

    Raises
    ------
    StorageError
    """
    if os.path.exists(path) and not replace:
        raise taken(f"{path} exists")


def taken(what: str) -> StorageError:
    """The error of a place that holds something."""
    return StorageError(f"{what}; give another name, or --replace to replace it")


def write_text(path: str | os.PathLike[str], text: str) -> None:
    """Write a text file, UTF-8, whole or not at all."""
    with whole_file(path) as temporary:
        temporary.write_text(text, encoding="utf-8", newline="\n")


def plain(value: Any) -> Any:
    """Reduce a value to what JSON holds: numbers, strings, None, lists, mappings.

    An object with a ``key`` (a medium of the catalogue) becomes that key.
    """
    if value is None or isinstance(value, str | bool | int | float):
        return value
    if isinstance(value, np.generic):
        return plain(value.item())
    if isinstance(value, complex):
        return {"re": value.real, "im": value.imag}
    if isinstance(value, Mapping):
        return {str(k): plain(v) for k, v in value.items()}
    if isinstance(value, np.ndarray):
        return plain(value.tolist())
    if isinstance(value, Sequence | set | frozenset):
        return [plain(v) for v in value]
    key = getattr(value, "key", None)
    return key if isinstance(key, str) else str(value)


def flatten(mapping: Mapping[str, Any], prefix: str = "") -> dict[str, Any]:
    """Nested mappings as one level, keys joined by dots."""
    out: dict[str, Any] = {}
    for key, value in mapping.items():
        name = f"{prefix}{key}"
        if isinstance(value, Mapping):
            out.update(flatten(value, name + "."))
        else:
            out[name] = value
    return out


def axes(variables: Sequence[Variable]) -> dict[str, int]:
    """Length of every dimension, in order of first use; a clash of lengths is refused."""
    lengths: dict[str, int] = {}
    for variable in variables:
        for dim, length in zip(variable.dims, np.shape(variable.values), strict=True):
            if lengths.setdefault(dim, length) != length:
                raise InputError(
                    f"{variable.name}: {length} values along {dim}, where others have "
                    f"{lengths[dim]}; all must agree"
                )
    return lengths


def parts(variable: Variable) -> Iterator[tuple[str, np.ndarray]]:
    """The real arrays that stand for a variable: value (or _re, _im) and error bar."""
    values = np.asarray(variable.values)
    if np.iscomplexobj(values):
        yield f"{variable.name}_re", values.real
        yield f"{variable.name}_im", values.imag
    else:
        yield variable.name, values
    if variable.error is not None:
        error = np.broadcast_to(np.asarray(variable.error, dtype=float), values.shape)
        yield f"{variable.name}_error", error
