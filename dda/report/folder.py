"""The folder a run writes: ``spectrum.csv``, ``spectrum.png`` and a copy of the study."""

from __future__ import annotations

import os
import time
from dataclasses import dataclass, field
from pathlib import Path

from dda.errors import InputError
from dda.report.figures import draw_spectrum
from dda.report.files import write_aside
from dda.report.table import write_csv
from dda.study.reader import Study
from dda.study.rows import Row

TABLE, PICTURE, STUDY = "spectrum.csv", "spectrum.png", "study.toml"
#: The table is written again after a row if this many seconds have passed since the last time.
REST = 1.0


@dataclass
class RunFolder:
    """Collects rows and keeps the files of a run up to date.

    No file is written before the first row. Every file is written aside and renamed, so that it
    is whole whenever one looks.
    """

    path: Path
    study: Study
    rows: list[Row] = field(default_factory=list)
    _written: float = 0.0
    _behind: bool = False

    @property
    def files(self) -> tuple[str, ...]:
        """Names of the files of a run."""
        return (TABLE, PICTURE, STUDY)

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

    def begin(self) -> None:
        """Make the folder, so that it is known now whether that is possible.

        Raises
        ------
        InputError
        """
        try:
            self.path.mkdir(parents=True, exist_ok=True)
        except OSError as error:
            raise InputError(f"{self.path}: cannot be made: {error.strerror}") from error

    def add(self, row: Row) -> None:
        """Keep a row; the table on disk follows within a moment."""
        if not self.rows:
            self._put_aside()
            write_aside(self.path / STUDY, self.study.text.encode())
        self.rows.append(row)
        self._behind = True
        if time.monotonic() - self._written > REST:
            self._write_table()

    def close(self) -> None:
        """Write what is not yet written; without a row nothing, and an empty folder goes."""
        if not self.rows:
            if self.path.is_dir() and not any(self.path.iterdir()):
                self.path.rmdir()
            return
        if self._behind:
            self._write_table()
        draw_spectrum(self.path / PICTURE, self.rows, self.study.name)

    def _put_aside(self) -> None:
        """Move the results of another study out of the way: nothing of them is overwritten."""
        before = self.path / STUDY
        if not (self.path / TABLE).exists():
            return
        if before.exists() and before.read_text(encoding="utf-8") == self.study.text:
            return
        number = 1
        while (earlier := self.path / f"earlier-{number}").exists():
            number += 1
        earlier.mkdir()
        for name in (TABLE, PICTURE, STUDY, *(p.name for p in self.path.glob("near_field*"))):
            if (self.path / name).exists():
                os.replace(self.path / name, earlier / name)

    def _write_table(self) -> None:
        write_csv(self.path / TABLE, self.rows)
        self._written = time.monotonic()
        self._behind = False
