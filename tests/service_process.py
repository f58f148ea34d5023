"""Serves the small data folder in a process of its own, with a solver that only ends when told.

Run as ``python -m tests.service_process FOLDER PORT``; a mass of 500 kg is answered at once.
"""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Any

from service.app import create_app
from service.server import bind, serve
from tests.service_support import SlowSolver, settings_in, stand_in

slow = SlowSolver(longest_s=60.0)


def solver(store: Any, case: Any, **given: Any) -> Any:
    """Answer light aeroplanes at once, the others only when stopped or after a minute."""
    return (stand_in if case.polar.mass_kg == 500.0 else slow)(store, case, **given)


if __name__ == "__main__":
    serve(create_app(settings_in(Path(sys.argv[1])), solver), bind("127.0.0.1", int(sys.argv[2])))
