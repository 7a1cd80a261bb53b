"""The output folder: whole or not at all, refused when it holds something."""

import os
import subprocess
import sys

import pytest

from materials.common.errors import StorageError
from materials.common.folders import check_target, whole_folder


def write(folder, replace=False, **files):
    with whole_folder(folder, replace=replace) as staging:
        for name, text in files.items():
            (staging / f"{name}.txt").write_text(text)


def names(folder):
    return sorted(p.name for p in folder.iterdir())


def test_new_empty_and_nested(tmp_path):
    (tmp_path / "empty").mkdir()
    for folder in (tmp_path / "new", tmp_path / "empty", tmp_path / "deep" / "down"):
        write(folder, a="1")
        assert names(folder) == ["a.txt", "files.txt"]
    assert names(tmp_path) == ["deep", "empty", "new"]


def test_a_full_folder_is_refused_and_left_alone(tmp_path):
    (tmp_path / "out").mkdir()
    (tmp_path / "out" / "mine.txt").write_text("mine")
    with pytest.raises(StorageError, match=r"out is not empty; give another name, or --replace"):
        write(tmp_path / "out", a="1")
    assert names(tmp_path / "out") == ["mine.txt"]
    assert names(tmp_path) == ["out"]


def test_replacing_drops_own_files_and_keeps_others(tmp_path):
    out = tmp_path / "out"
    write(out, a="1", b="1")
    (out / "mine.txt").write_text("mine")
    (out / "deeper").mkdir()
    (out / "deeper" / "mine.txt").write_text("mine too")
    write(out, replace=True, a="2", c="2")
    assert names(out) == ["a.txt", "c.txt", "deeper", "files.txt", "mine.txt"]
    assert (out / "a.txt").read_text() == "2"
    assert (out / "deeper" / "mine.txt").read_text() == "mine too"
    assert names(tmp_path) == ["out"]


@pytest.mark.parametrize("listing", ["", "a.txt\nb.txt\n", None])
def test_what_no_run_wrote_is_never_overwritten(tmp_path, listing):
    """Unlisted, or listed by a files.txt that is not ours, or with no listing at all."""
    out = tmp_path / "out"
    out.mkdir()
    (out / "a.txt").write_text("mine")
    if listing is not None:
        (out / "files.txt").write_text(listing)
    before = names(out)
    for known in ([], ["a.txt"]):
        with pytest.raises(StorageError, match=r"(a|files).txt in out was not written by"):
            check_target(out, replace=True, names=known)
            write(out, replace=True, a="2")
    assert (out / "a.txt").read_text() == "mine"
    assert names(out) == before and names(tmp_path) == ["out"]


def test_folders_and_links_of_the_user_are_kept(tmp_path):
    out = tmp_path / "out"
    write(out, a="1")
    (out / "empty").mkdir()
    (tmp_path / "target.txt").write_text("far")
    (out / "link.txt").symlink_to(tmp_path / "target.txt")
    write(out, replace=True, a="2")
    assert names(out) == ["a.txt", "empty", "files.txt", "link.txt"]
    for name in ("empty", "link"):
        (out / f"{name}.txt").unlink(missing_ok=True)
        (out / f"{name}.txt").mkdir()
        with pytest.raises(StorageError, match="not written by an earlier run"):
            write(out, replace=True, **{name: "3"})
    assert (tmp_path / "target.txt").read_text() == "far"


@pytest.mark.parametrize("error", [KeyboardInterrupt, RuntimeError])
def test_a_failed_run_changes_nothing(tmp_path, error):
    out = tmp_path / "out"
    write(out, a="1")
    with pytest.raises(error), whole_folder(out, replace=True) as staging:
        (staging / "a.txt").write_text("2")
        raise error
    assert (out / "a.txt").read_text() == "1"
    assert names(tmp_path) == ["out"]


def test_files_and_the_working_folder_are_refused(tmp_path, monkeypatch):
    (tmp_path / "file").write_text("")
    with pytest.raises(StorageError, match="is a file"):
        check_target(tmp_path / "file")
    (tmp_path / "here" / "below").mkdir(parents=True)
    monkeypatch.chdir(tmp_path / "here" / "below")
    for folder in (tmp_path / "here", tmp_path / "here" / "below"):
        with pytest.raises(StorageError, match="working in"):
            check_target(folder, replace=True)


@pytest.mark.skipif(os.geteuid() == 0, reason="the superuser may write anywhere")
def test_no_permission(tmp_path):
    (tmp_path / "locked").mkdir(mode=0o500)
    with pytest.raises(StorageError, match="no permission"):
        check_target(tmp_path / "locked" / "out")


KILLED = """
import os, sys
from materials.common.folders import whole_folder
with whole_folder(sys.argv[1], replace=True) as staging:
    (staging / "a.txt").write_text("2")
    os.kill(os.getpid(), 9)
"""


def test_a_killed_run_leaves_the_old_folder(tmp_path):
    out = tmp_path / "out"
    write(out, a="1")
    done = subprocess.run([sys.executable, "-c", KILLED, str(out)], check=False)
    assert done.returncode == -9
    assert (out / "a.txt").read_text() == "1"
