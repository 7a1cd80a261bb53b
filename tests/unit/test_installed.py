"""What is tested is the installed package, and it can stand in any folder."""

import importlib
import subprocess
import sys
import sysconfig
from importlib import metadata
from pathlib import Path

import pytest

PACKAGES = ("materials", "modesolve", "phasematch")


def test_packages_come_from_the_installed_wheel(request):
    if request.config.getoption("--source"):
        pytest.skip("the source tree was asked for")
    site = Path(sysconfig.get_path("purelib")).resolve()
    for name in PACKAGES:
        found = Path(importlib.import_module(name).__file__).resolve()
        assert site in found.parents, f"{name} comes from {found}: install the wheel, run pytest"
    assert metadata.version("idlermap")


@pytest.mark.parametrize(
    ("hidden", "package"),
    [("materials", "modesolve"), ("materials", "phasematch"), ("modesolve", "phasematch")],
)
@pytest.mark.parametrize("form", ["file", "folder"])
def test_a_file_that_hides_a_package_is_named(tmp_path, hidden, package, form):
    place = tmp_path / f"{hidden}.py"
    if form == "folder":
        (tmp_path / hidden).mkdir()
        place = tmp_path / hidden / "__init__.py"
    place.write_text("")
    root = Path(importlib.import_module(package).__file__).parents[1]
    code = f"import sys; sys.path[:0] = [{str(tmp_path)!r}, {str(root)!r}]; import {package}"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert done.returncode == 1
    last = done.stderr.strip().splitlines()[-1]
    assert f"package '{hidden}' is hidden by {place}" in last


def test_the_library_loads_no_command_line_or_plotting():
    heavy = "click", "rich", "pydantic", "matplotlib", "pandas"
    root = Path(importlib.import_module("phasematch").__file__).parents[1]
    code = (
        f"import sys; sys.path.insert(0, {str(root)!r}); import phasematch; "
        f"print([m for m in {heavy!r} if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
