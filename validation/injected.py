"""Failures for the soak test: a run that is patched fails now and then, in every way there is."""

from __future__ import annotations

import hashlib
import os
import signal
from multiprocessing import parent_process
from typing import Any

from dda.errors import ComputationError

#: Share of the points at which the usual solver always fails, in an undisturbed run as well.
ALWAYS = 0.05
#: Shares of the points that fail in one process, whatever the solver, and that end a worker.
ONCE, DEADLY = 0.03, 0.01
#: The environment says whether failures that come and go are wanted.
ASKED = "INJECTED_FAILURES"


def patch() -> None:
    """Let the solver of this process fail at some points."""
    from dda.study import levels

    settle = levels.settle
    worker = parent_process() is not None

    def failing(matrix: Any, light: Any, **options: Any) -> Any:
        spacing = matrix.cells.spacing
        if _draw("always", spacing) < ALWAYS and options["method"] == "cocg":
            raise ComputationError("injected: the usual solver fails here")
        if os.environ.get(ASKED) == "yes":
            drawn = _draw(os.getpid(), spacing)
            if drawn < ONCE:
                kinds = (ComputationError, MemoryError, KeyError, ZeroDivisionError)
                raise kinds[int(drawn / ONCE * len(kinds))]("injected: this process fails here")
            if worker and drawn > 1 - DEADLY:
                os.kill(os.getpid(), signal.SIGKILL)
        return settle(matrix, light, **options)

    levels.settle = failing


def _draw(*what: object) -> float:
    """A number from 0 to 1 that is the same for the same things."""
    return int.from_bytes(hashlib.sha256(repr(what).encode()).digest()[:6]) / 2**48
