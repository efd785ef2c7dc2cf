"""A progress bar with the time left, shown when a run takes more than a second on a terminal."""

from __future__ import annotations

import contextlib
import sys
import time
from collections.abc import Iterator
from types import TracebackType
from typing import Any

#: Runs shorter than this show no bar, seconds.
PATIENCE = 1.0
#: The bar is told of changes at most this often, seconds.
PERIOD = 0.1


class ProgressBar:
    """Shows how many points are done, what is being done and how much time is left.

    Parameters
    ----------
    total : int
        Number of points.
    shown : bool, optional
        By default when standard error is a terminal.
    """

    def __init__(self, total: int, shown: bool | None = None) -> None:
        self.total = total
        self.shown = sys.stderr.isatty() if shown is None else shown
        self.done = 0
        self._completed = 0.0
        self._started = self._told = time.monotonic()
        self._bar: Any = None
        self._task: Any = None

    def __enter__(self) -> ProgressBar:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        value: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        if self._bar is not None:
            self._bar.stop()

    def watch(self, message: str, part: float) -> None:
        """Tell what is being done and which part of the current point is done."""
        now = time.monotonic()
        if not self.shown or now - self._started < PATIENCE or now - self._told < PERIOD:
            return
        self._told = now
        if self._bar is None:
            self._bar, self._task = _begin(self.total)
        completed = self._completed + part
        self._bar.update(self._task, completed=completed, doing=message, points=self.done)

    def advance(self, share: float = 1.0) -> None:
        """Count one more point as done; ``share`` is its cost over that of a mean point."""
        self.done += 1
        self._completed += share
        if self._bar is not None:
            self._bar.update(self._task, completed=self._completed, points=self.done)


def duration_text(seconds: float) -> str:
    """Return a time in words.

    >>> duration_text(8.2), duration_text(200), duration_text(20000)
    ('8 s', '3.3 min', '5.6 h')
    """
    if seconds < 1:
        return "under 1 s"
    if seconds < 90:
        return f"{seconds:.0f} s"
    if seconds < 5400:
        return f"{seconds / 60:.1f} min"
    return f"{seconds / 3600:.1f} h"


def _begin(total: int) -> tuple[Any, Any]:
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeRemainingColumn

    bar = Progress(
        TextColumn("{task.fields[points]} of {task.total:g}"),
        BarColumn(),
        TimeRemainingColumn(elapsed_when_finished=True),
        TextColumn("left"),
        TextColumn("{task.fields[doing]}"),
        console=Console(stderr=True),
        transient=True,
    )
    task = bar.add_task("", total=total, doing="", points=0)
    bar.start()
    return bar, task


@contextlib.contextmanager
def working(message: str) -> Iterator[None]:
    """Show on a terminal that something whose end is not known is going on."""
    if not sys.stderr.isatty():
        yield
        return
    from rich.console import Console

    with Console(stderr=True).status(message):
        yield
