"""Rules of the test suite: slow tests, sources of outside values, the installed package."""

import os
import subprocess
import sys
from pathlib import Path

import pytest

HERE = Path(__file__).parent


def pytest_addoption(parser):
    parser.addoption("--slow", action="store_true", help="also run the tests marked slow")
    parser.addoption(
        "--source", action="store_true", help="let the packages come from the source tree"
    )


def pytest_collection_modifyitems(config, items):
    unsourced = [item.nodeid for item in items if _lacks_source(item)]
    if unsourced:
        raise pytest.UsageError(
            'tests in tests/reference need @pytest.mark.source("citation", "place", "digits"): '
            + ", ".join(unsourced)
        )
    if not config.getoption("--slow"):
        skip = pytest.mark.skip(reason="slow; run with --slow")
        for item in items:
            if "slow" in item.keywords:
                item.add_marker(skip)


def _lacks_source(item):
    if HERE / "reference" not in item.path.parents:
        return False
    marks = list(item.iter_markers("source"))
    return not any(len(mark.args) == 3 and all(mark.args) for mark in marks)


@pytest.fixture
def run_idlermap(tmp_path):
    """Run the command in a process of its own, in an empty folder; stdout and stderr as text."""
    return lambda *arguments, environment=None: _run(tmp_path, arguments, environment)


@pytest.fixture(scope="session")
def example_output(tmp_path_factory):
    """Output folder of a shipped design, by file name; each is run once a session."""
    folders = {}

    def output(name):
        if name not in folders:
            folder = tmp_path_factory.mktemp("example")
            done = _run(folder, ("run", str(HERE.parent / "examples" / name), "-o", "out"))
            assert done.returncode == 0, done.stderr
            folders[name] = folder / "out"
        return folders[name]

    return output


def _run(folder, arguments, environment=None):
    import phasematch

    return subprocess.run(
        [sys.executable, "-c", "from phasematch.cli import main; main()", *arguments],
        cwd=folder,
        env=child_environment(Path(phasematch.__file__).parents[1], environment),
        capture_output=True,
        text=True,
        check=False,
        timeout=300,
    )


def child_environment(root, more=None):
    """Environment in which a child finds the same packages as this process."""
    return {**os.environ, "PYTHONPATH": str(root), **(more or {})}
