"""Entry point of the command: ready for Ctrl-C before the heavy imports begin."""

from __future__ import annotations

import os
import signal
from typing import Any

INTERRUPTED = 130


def _leave(number: int, frame: Any) -> None:
    """Leave at once and quietly: while modules load, nothing has been begun."""
    os._exit(INTERRUPTED)


def main() -> None:
    """Run the command; `phasematch.cli.main` takes the signals over."""
    signal.signal(signal.SIGINT, _leave)
    signal.signal(signal.SIGTERM, _leave)
    from phasematch.cli import main as run

    run()


if __name__ == "__main__":
    main()
