"""The folder a run writes: the store of its points, and the tables and pictures made from it."""

from __future__ import annotations

import csv
import io
import json
import os
import re
import time
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from itertools import groupby
from pathlib import Path
from typing import Any

from dda.errors import InputError, write_error
from dda.files import write_aside
from dda.report.figures import draw_spectrum
from dda.report.scattering import draw_scattering, scattering_table
from dda.report.sweep_figure import draw_sweep
from dda.report.table import write_csv
from dda.study.engines import Done, Task
from dda.study.identity import near_fingerprint
from dda.study.point_file import read_point
from dda.study.points import Point
from dda.study.prepare import Prepared
from dda.study.reader import Study
from dda.study.rows import Row, as_preview
from dda.study.store import Store, versions

TABLE, PICTURE, STUDY, ABOUT = "spectrum.csv", "spectrum.png", "study.toml", "about.json"
ANGLES, ANGLES_PICTURE = "scattering.csv", "scattering.png"
NEAR, NEAR_NUMBERS = "near", "near_field_numbers.csv"
#: The table is written again after a row if this many seconds have passed since the last time,
#: or this many times as long as writing it took.
REST, REST_FACTOR = 1.0, 20.0


@dataclass
class RunFolder:
    """Keeps the store and the files of a run up to date.

    Every file is written aside and renamed, so that it is whole whenever one looks.
    """

    path: Path
    study: Study
    files: list[str] = field(default_factory=list)
    _rows: dict[int, Row] = field(default_factory=dict)
    _store: Store | None = None
    _total: int = 0
    _next: float = 0.0

    @property
    def rows(self) -> list[Row]:
        """The rows so far, in the order of the study."""
        return [self._rows[number] for number in sorted(self._rows)]

    @property
    def opened(self) -> bool:
        """Whether it is known what the folder holds."""
        return self._store is not None

    @property
    def store(self) -> Store:
        """The store, once the folder is open."""
        assert self._store is not None
        return self._store

    def check(self) -> None:
        """Refuse a folder that cannot be written, before anything is computed.

        Raises
        ------
        InputError
        """
        if self.path.exists() and not self.path.is_dir():
            raise InputError(f"{self.path}: a file of that name is in the way; give another --out")
        existing = self.path.absolute()
        while not existing.exists():
            existing = existing.parent
        if not existing.is_dir() or not os.access(existing, os.W_OK | os.X_OK):
            raise InputError(f"{self.path}: cannot be written here; give another --out")

    def open(self, prepared: Prepared, again: bool = False, others: Sequence[Path] = ()) -> None:
        """Make the folder or go on in it.

        Raises
        ------
        InputError
            It cannot be made, or someone else holds it.
        ComputationError
            The disk is full or fails.
        """
        try:
            self.path.mkdir(parents=True, exist_ok=True)
        except OSError as error:
            raise write_error(self.path, error) from error
        self._store = Store(self.path, prepared, again, others)
        self._total = len(prepared.points)
        self._rows = dict(self.store.ledger.rows())
        try:
            self._put_aside()
        except OSError as error:
            raise write_error(self.path, error) from error
        write_aside(self.path / STUDY, self.study.text.encode())
        write_aside(self.path / ABOUT, json.dumps(versions(), indent=1).encode())

    def begin(self, task: Task, worker: str) -> None:
        """Note that a task is being computed."""
        self.store.begin(task, worker)

    def keep(self, done: Done) -> None:
        """Keep an outcome; the table on disk follows within a moment."""
        self.store.keep(done)
        number, row = done.task.number % self._total, done.outcome.row
        if done.task.number == number:
            self._rows[number] = row
        elif number not in self._rows:
            self._rows[number] = as_preview(row)
        if time.monotonic() > self._next:
            self._write_table()

    def finish(self) -> None:
        """Write tables and pictures from what there is."""
        # points that stand twice in the study were computed once
        self._rows = dict(self.store.ledger.rows())
        self.files = [STUDY]
        if not self._rows:
            return
        self._write_table()
        rows = self.rows
        draw = draw_sweep if any(row.varied for row in rows) else draw_spectrum
        draw(self.path / PICTURE, rows, self.study.name)
        self.files = [TABLE, PICTURE, STUDY, *self._write_angles()]

    def close(self) -> None:
        """Let go of the folder."""
        if self._store is not None:
            self._store.close()

    # --- near fields ---------------------------------------------------------------------------

    def near_units(self, prepared: Prepared) -> Iterator[tuple[Point, list[Row], Path, str]]:
        """Yield what is left of the near fields: a point, its spectrum, a folder and a title.

        There is one for each combination of varied keys.
        """
        known = self.store.ledger.about()
        for point, rows in self._combinations(prepared):
            key = near_fingerprint(point, rows)
            folder = self._near_folder(point)
            done = known.get(f"near {key}")
            if done != str(folder) or not (self.path / folder / NEAR_NUMBERS).is_file():
                yield point, rows, self.path / folder, _title(self.study.name, point.varied)

    def near_done(self, point: Point, rows: Sequence[Row]) -> None:
        """Note that the near field of a combination is in its place."""
        key = near_fingerprint(point, rows)
        self.store.ledger.note(f"near {key}", str(self._near_folder(point)))

    def gather_near(self, prepared: Prepared) -> None:
        """Put the numbers of all combinations into one table."""
        if not self.study.vary.axes:
            return
        header: list[str] = []
        lines: list[list[Any]] = []
        for point, _ in self._combinations(prepared):
            path = self.path / self._near_folder(point) / NEAR_NUMBERS
            if path.is_file():
                with path.open(newline="", encoding="utf-8") as file:
                    first, *others = list(csv.reader(file))
                header = [*point.varied, *first]
                lines += [[*point.varied.values(), *other] for other in others]
        if lines:
            text = io.StringIO()
            csv.writer(text, lineterminator="\n").writerows([header, *lines])
            write_aside(self.path / NEAR_NUMBERS, text.getvalue().encode())

    def _combinations(self, prepared: Prepared) -> Iterator[tuple[Point, list[Row]]]:
        """Each combination of varied keys that has an answer, with its rows."""
        numbered = enumerate(prepared.points)
        for _, same in groupby(numbered, key=lambda pair: id(pair[1].tables)):
            points = list(same)
            rows = [self._rows[number] for number, _ in points if number in self._rows]
            if any(row.answered for row in rows):
                yield points[0][1], rows

    def _near_folder(self, point: Point) -> Path:
        return Path(NEAR) / _slug(point.varied) if point.varied else Path()

    # -------------------------------------------------------------------------------------------

    def _put_aside(self) -> None:
        """Move the tables of another study out of the way: nothing of them is overwritten."""
        before = self.path / STUDY
        if not (self.path / TABLE).exists():
            return
        if before.exists() and before.read_text(encoding="utf-8") == self.study.text:
            return
        number = 1
        while (earlier := self.path / f"earlier-{number}").exists():
            number += 1
        earlier.mkdir()
        names = [TABLE, PICTURE, STUDY, ANGLES, ANGLES_PICTURE]
        for name in (*names, *(p.name for p in self.path.glob("near_field*"))):
            if (self.path / name).exists():
                os.replace(self.path / name, earlier / name)

    def _write_table(self) -> None:
        started = time.monotonic()
        write_csv(self.path / TABLE, self.rows)
        took = time.monotonic() - started
        self._next = time.monotonic() + max(REST, REST_FACTOR * took)

    def _write_angles(self) -> list[str]:
        """Write the scattered light by angle, if the study asked for it."""
        if self.study.tables.scattering is None:
            return []
        text = scattering_table(self._with_arrays())
        if not text:
            return []
        write_aside(self.path / ANGLES, text.encode())
        draw_scattering(self.path / ANGLES_PICTURE, self._with_arrays(), self.study.name)
        return [ANGLES, ANGLES_PICTURE]

    def _with_arrays(self) -> Iterator[tuple[Row, dict[str, Any]]]:
        files = {identity: name for identity, name, _ in self.store.ledger.files()}
        for entry in self.store.ledger.entries():
            if entry.identity in files and entry.number in self._rows:
                yield self._rows[entry.number], read_point(self.path / files[entry.identity])


def _title(name: str, varied: dict[str, Any]) -> str:
    at = ", ".join(f"{key} = {value}" for key, value in varied.items())
    return f"{name}, {at}" if at else name


def _slug(varied: dict[str, Any]) -> str:
    """A folder name from the values of varied keys.

    >>> _slug({"particle.edge": 60, "host.index": 1.33})
    'edge=60,index=1.33'
    """
    words = [f"{key.rpartition('.')[2]}={value}" for key, value in varied.items()]
    return re.sub(r"[^\w.,=+-]", "_", ",".join(words))[:120]
