"""How far a run is: counted from its ledger, whoever writes it meanwhile."""

from __future__ import annotations

import shlex
import time
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from dda.study.ledger import RUNNING, WAITING, Ledger
from dda.study.ledger_records import Entry
from dda.study.lock import holder_of

#: Kinds of points in the order in which they are told, and what each means.
KINDS = {
    "converged": "solver and target reached",
    "coarse": "target not reached; the error bars hold",
    "not converged": "the solver did not end; do not rely on these",
    "failed": "no answer",
    "running": "being computed now",
    "waiting": "not begun",
}


@dataclass(frozen=True)
class Doubt:
    """A point that is done but not well.

    Attributes
    ----------
    number : int
        Its row, from 0.
    varied : mapping
    wavelength_nm : float
    kind : str
        "coarse", "not converged" or "failed".
    reason : str
    """

    number: int
    varied: Mapping[str, Any]
    wavelength_nm: float
    kind: str
    reason: str


@dataclass(frozen=True)
class Task:
    """A point that is being computed, since when (seconds) and by whom."""

    varied: Mapping[str, Any]
    wavelength_nm: float
    worker: str
    seconds: float


@dataclass(frozen=True)
class Status:
    """How far a run is.

    Attributes
    ----------
    folder, study : str
        Where it is and what it is called.
    total, done : int
        Points of the study, and those that have an answer, good or bad.
    counts : dict
        Points of every kind in `KINDS`.
    previews : (2,) tuple of int
        Coarse answers asked for in advance, and those that are there.
    holder : mapping or None
        The process that runs it, its machine and since when; None if nobody does.
    seconds_left : float or None
        Until all is done with as many workers as now; None where no pace is known.
    doubts : tuple of Doubt
        The first points to look at, failed ones first.
    tasks : tuple of Task
        What is being computed.
    next : str
        What to do now: a command.
    """

    folder: str
    study: str
    total: int
    done: int
    counts: dict[str, int]
    previews: tuple[int, int]
    holder: Mapping[str, Any] | None
    seconds_left: float | None
    doubts: tuple[Doubt, ...]
    tasks: tuple[Task, ...]
    next: str

    @property
    def doubtful(self) -> int:
        """Number of points that are done but not well."""
        return sum(self.counts[kind] for kind in ("coarse", "not converged", "failed"))


def read_status(folder: Path, most: int = 10) -> Status:
    """Read how far a run is.

    Parameters
    ----------
    folder : Path
        The run folder; it may be read-only, and may be written at the same time.
    most : int
        No more than this many doubtful points and points at work are listed.

    Raises
    ------
    InputError
        It is no run folder.
    """
    with Ledger(folder) as ledger:
        holder = holder_of(folder)
        study = ledger.study()
        tally = ledger.tally()
        counts = _counts(tally, held=holder is not None)
        running = ledger.running() if counts["running"] else []
        found = ledger.doubtful(most, failed=True) if counts["failed"] else []
        if counts["coarse"] + counts["not converged"] and len(found) < most:
            found += ledger.doubtful(most - len(found), failed=False)
        previews = ledger.previews()
    now = time.time()
    total = sum(counts.values())
    done = total - counts["waiting"] - counts["running"]
    return Status(
        folder=str(folder),
        study=str(study[1].get("name") or folder.name) if study else folder.name,
        total=total,
        done=done,
        counts=counts,
        previews=previews,
        holder=holder,
        seconds_left=_seconds_left(tally, running, now),
        doubts=tuple(
            Doubt(e.number, e.varied, e.wavelength_nm, kind_of(status), message)
            for e, status, message in found
        ),
        tasks=tuple(
            Task(e.varied, e.wavelength_nm, worker, max(0.0, now - begun))
            for e, worker, begun in running[:most]
        ),
        next=_next(folder, holder is not None, total - done, counts),
    )


def kind_of(status: str) -> str:
    """Return the kind of a point in `KINDS` by the status of its row.

    >>> kind_of("stalled"), kind_of("converged")
    ('not converged', 'converged')
    """
    return status if status in KINDS or status == "preview" else "not converged"


def set_text(varied: Mapping[str, Any]) -> str:
    """Return the values of varied keys in words.

    >>> set_text({"particle.edge": 40.0, "host.material": "water"})
    'particle.edge = 40, host.material = water'
    """
    words = (
        f"{key} = {value:.10g}" if isinstance(value, float) else f"{key} = {value}"
        for key, value in varied.items()
    )
    return ", ".join(words)


def _counts(tally: Mapping[str, tuple[int, float, float]], held: bool) -> dict[str, int]:
    counts = dict.fromkeys(KINDS, 0)
    for status, (number, _, _) in tally.items():
        counts[kind_of(status)] += number
    if not held:  # what a process was computing when it ended
        counts["waiting"] += counts["running"]
        counts["running"] = 0
    return counts


def _seconds_left(
    tally: Mapping[str, tuple[int, float, float]],
    running: list[tuple[Entry, str, float]],
    now: float,
) -> float | None:
    """Weight that is left, at the seconds that a unit of weight took so far, over the workers."""
    open_ones = (WAITING, RUNNING)
    left = sum(tally[status][1] for status in open_ones if status in tally)
    weight = sum(row[1] for status, row in tally.items() if status not in open_ones)
    seconds = sum(row[2] for row in tally.values())
    if left == 0:
        return 0.0
    if not weight > 0 or not seconds > 0:
        return None
    pace = seconds / weight
    begun = sum(min(now - since, pace * entry.weight) for entry, _, since in running)
    return max(0.0, pace * left - begun) / max(1, len({worker for _, worker, _ in running}))


def _next(folder: Path, held: bool, left: int, counts: Mapping[str, int]) -> str:
    place = shlex.quote(str(folder))
    if held:
        return f"dda watch {place}"
    if left:
        return f"dda run {place}"
    again = counts["failed"] + counts["not converged"]
    return f"dda run {place} --again" if again else f"dda export {place} --to csv"
