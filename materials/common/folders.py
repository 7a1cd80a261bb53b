"""An output folder that appears whole or not at all.

Everything is written to a hidden folder beside the target and moved into place by one
rename. Replacing an older result takes two renames; killed between them, the older
result is still there under its hidden name, and nothing is lost.
"""

from __future__ import annotations

import contextlib
import os
import secrets
import shutil
from collections.abc import Iterable, Iterator
from pathlib import Path

from materials.common.errors import StorageError
from materials.common.files import flush, taken

#: File in which a run lists the files it wrote, so that replacing deletes no others.
LISTING = "files.txt"


def check_target(
    folder: str | os.PathLike[str], *, replace: bool = False, names: Iterable[str] = ()
) -> Path:
    """Refuse an output folder that cannot be used, before any work is done.

    Parameters
    ----------
    folder : path
        The folder to be written. It may be missing or empty.
    replace : bool
        Whether a folder that holds something may be replaced.
    names : iterable of str
        Files that are to be written into it, as far as they are known.

    Returns
    -------
    Path
        The folder with links resolved.

    Raises
    ------
    StorageError
        It is a file, holds something and ``replace`` is False, holds a file of one of the
        names that no run wrote, is the folder one works in, or its parent cannot be
        written to.
    """
    target = Path(os.path.realpath(folder))
    if target.exists() and not target.is_dir():
        raise StorageError(f"{folder} is a file; give the name of a folder")
    if target.is_dir() and any(target.iterdir()) and not replace:
        raise taken(f"the output folder {folder} is not empty")
    here = Path.cwd()
    if target == here or target in here.parents:
        raise StorageError(
            f"the output folder {folder} is the one you are working in; name a folder inside it"
        )
    _check_names(target, [*names, LISTING])
    parent = _nearest_folder(target)
    if not os.access(parent, os.W_OK | os.X_OK):
        raise StorageError(
            f"cannot write {folder}: no permission in {parent}; choose another place"
        )
    return target


def _own_files(folder: Path) -> set[str]:
    """Names that an earlier run listed as its own; a listing that lacks itself is not ours."""
    listing = folder / LISTING
    if not listing.is_file():
        return set()
    listed = set(listing.read_text(encoding="utf-8", errors="replace").splitlines())
    return listed if LISTING in listed else set()


def _check_names(folder: Path, names: Iterable[str]) -> None:
    """Refuse to write over what no run wrote."""
    if not folder.is_dir():
        return
    own = _own_files(folder)
    for name in names:
        place = folder / name
        if os.path.lexists(place) and (name not in own or _real_folder(place)):
            raise StorageError(
                f"{name} in {folder.name} was not written by an earlier run (it is not in its "
                f"{LISTING}); move it away, or give another folder"
            )


def _real_folder(path: Path) -> bool:
    return path.is_dir() and not path.is_symlink()


def _nearest_folder(target: Path) -> Path:
    return next(p for p in target.parents if p.is_dir())


@contextlib.contextmanager
def whole_folder(folder: str | os.PathLike[str], *, replace: bool = False) -> Iterator[Path]:
    """Give a folder to write to; put it in place of ``folder`` on a clean exit.

    With ``replace``, files that an earlier run listed as its own vanish; anything else in
    the folder is kept, and a new file that has the name of such a thing is refused.

    Raises
    ------
    StorageError
        As `check_target`, or when the folder cannot be put in place.
    """
    target = check_target(folder, replace=replace)
    staging = target.with_name(f".{target.name}.{secrets.token_hex(4)}.part")
    try:
        try:
            target.parent.mkdir(parents=True, exist_ok=True)
            staging.mkdir()
            yield staging
            _list_files(staging)
            _check_names(target, _names(staging))
            _put_in_place(staging, target)
        except StorageError:
            raise
        except OSError as exc:
            raise StorageError(
                f"cannot write the folder {folder}: {exc.strerror or exc}; check that its parent "
                "may be written to and that the disk has room"
            ) from exc
    finally:
        shutil.rmtree(staging, ignore_errors=True)


def _list_files(staging: Path) -> None:
    text = "\n".join([*_names(staging), LISTING]) + "\n"
    (staging / LISTING).write_text(text, encoding="utf-8")


def _names(folder: Path) -> list[str]:
    """Everything in a folder that is no folder itself, below it as well."""
    found = (p for p in folder.rglob("*") if not _real_folder(p))
    return sorted(p.relative_to(folder).as_posix() for p in found)


def _put_in_place(staging: Path, target: Path) -> None:
    older = None
    if target.is_dir() and any(target.iterdir()):
        older = target.with_name(f".{target.name}.{secrets.token_hex(4)}.old")
        os.rename(target, older)
    try:
        os.rename(staging, target)
    except OSError:
        if older is not None:
            os.rename(older, target)
        raise
    if older is not None:
        _keep_other_files(older, target)
        shutil.rmtree(older, ignore_errors=True)
    flush(target.parent)


def _keep_other_files(older: Path, target: Path) -> None:
    """Move what no run wrote from the older folder to the new one."""
    own = _own_files(older)
    for name in _names(older):
        if name not in own:
            (target / name).parent.mkdir(parents=True, exist_ok=True)
            os.rename(older / name, target / name)
    for path in older.rglob("*"):  # folders that hold nothing are the user's too
        if _real_folder(path):
            (target / path.relative_to(older)).mkdir(parents=True, exist_ok=True)
