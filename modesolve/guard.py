"""Refuse to start on somebody else's ``materials``.

A file materials.py (or a folder materials) in a user's working folder comes before the
package of that name on the import path. This says so in one line instead of failing deep
inside.
"""

from __future__ import annotations

from importlib.util import find_spec
from pathlib import Path

_spec = find_spec("materials")
_found = None if _spec is None or _spec.origin is None else Path(_spec.origin)

if _found is None or _found.parents[1] != Path(__file__).parents[1]:
    raise ImportError(
        f"Idlermap's package 'materials' is hidden by {_found or 'another materials folder'}: "
        "rename that file or folder, or start Python elsewhere"
    )
