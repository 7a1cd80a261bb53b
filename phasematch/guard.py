"""Refuse to start on somebody else's ``modesolve`` or ``materials``; see `modesolve.guard`."""

from __future__ import annotations

from importlib.util import find_spec
from pathlib import Path

_spec = find_spec("modesolve")
_found = None if _spec is None or _spec.origin is None else Path(_spec.origin)

if _found is None or _found.parents[1] != Path(__file__).parents[1]:
    raise ImportError(
        f"Idlermap's package 'modesolve' is hidden by {_found or 'another modesolve folder'}: "
        "rename that file or folder, or start Python elsewhere"
    )

import modesolve.guard  # noqa: E402, F401 - checks `materials` in turn
