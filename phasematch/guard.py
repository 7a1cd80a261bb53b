"""Refuse to start on somebody else's ``materials`` or ``modesolve``; see `modesolve.guard`.

The text stands twice because no package may be imported before it was looked for.
"""

from __future__ import annotations

from importlib.util import find_spec
from pathlib import Path

for _name in ("materials", "modesolve"):
    _spec = find_spec(_name)
    _found = None if _spec is None or _spec.origin is None else Path(_spec.origin)
    if _found is None or _found.parents[1] != Path(__file__).parents[1]:
        raise ImportError(
            f"Idlermap's package '{_name}' is hidden by {_found or f'another {_name} folder'}: "
            "rename that file or folder, or start Python elsewhere"
        )
