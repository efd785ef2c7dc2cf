"""The ledger of a run: every point and every finished answer, in an SQLite file.

An answer is in the ledger or it is not; whatever ends the process, nothing between exists. The
write-ahead log lets others read while the run writes.
"""

from __future__ import annotations

import json
import shutil
import sqlite3
import tempfile
import time
from collections.abc import Iterable, Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from dda.errors import InputError
from dda.study.ledger_records import Answered, Entry, columns_of, entry_of, row_of
from dda.study.rows import Row, as_preview
from dda.study.sqlite_errors import is_the_disk, unwritable

LEDGER = "ledger.sqlite"
#: Raised when the tables below change.
FORMAT = 1
#: Statuses of a point besides those of a row.
WAITING, RUNNING = "waiting", "running"

_TABLES = """
CREATE TABLE about (key TEXT PRIMARY KEY, value TEXT NOT NULL);
CREATE TABLE studies (number INTEGER PRIMARY KEY, begun REAL NOT NULL, text TEXT NOT NULL,
    tables TEXT NOT NULL, versions TEXT NOT NULL);
CREATE TABLE points (number INTEGER PRIMARY KEY, identity TEXT NOT NULL, preview TEXT,
    wavelength_nm REAL NOT NULL, varied TEXT NOT NULL, weight REAL NOT NULL);
CREATE INDEX points_by_identity ON points (identity);
CREATE TABLE answers (identity TEXT PRIMARY KEY, status TEXT NOT NULL, numbers TEXT NOT NULL,
    message TEXT NOT NULL, seconds REAL, tries INTEGER NOT NULL, finished REAL NOT NULL,
    worker TEXT NOT NULL, file TEXT, checksum TEXT);
CREATE TABLE running (identity TEXT PRIMARY KEY, worker TEXT NOT NULL, begun REAL NOT NULL);
"""


class Ledger:
    """Opens the ledger of a run folder.

    Parameters
    ----------
    folder : Path
        The run folder.
    write : bool
        Make it if it is missing, and be able to change it. Only one may, see `dda.study.lock`.

    Raises
    ------
    InputError
        There is no ledger, it is damaged, or another version of the program wrote it.
    """

    def __init__(self, folder: Path, write: bool = False) -> None:
        self.path = folder / LEDGER
        if not write and not self.path.is_file():
            raise InputError(f"{folder}: no run of a study ({LEDGER} is not there)")
        self._aside: tempfile.TemporaryDirectory | None = None
        self._base = _connect(self.path) if write else self._reader()
        try:
            if write:
                self._base.execute("PRAGMA synchronous = FULL")  # nothing is undone by a power cut
            # a process that was killed at once may leave a file with nothing in it
            empty = not self._base.execute("SELECT COUNT(*) FROM sqlite_master").fetchone()[0]
            if empty and not write:
                raise InputError(f"{folder}: no study was begun in it yet")
            if empty:
                self._make()
            self._check_format()
        except sqlite3.DatabaseError as error:
            self.close()
            if is_the_disk(error):
                raise unwritable(self.path, error) from None
            raise InputError(
                f"{self.path}: damaged, or no ledger ({error}); move it away and run the study "
                "again to begin anew, or bring a copy back"
            ) from None
        except BaseException:
            self.close()
            raise

    def __enter__(self) -> Ledger:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    def close(self) -> None:
        """Close the file; everything in it is on disk already."""
        self._base.close()
        if self._aside is not None:
            self._aside.cleanup()

    # --- what a run writes ---------------------------------------------------------------------

    def begin(self, text: str, tables: Mapping[str, Any], versions: Mapping[str, str]) -> None:
        """Note that a study is run now, unless it is the last one again.

        Parameters
        ----------
        text : str
            The study file.
        tables : mapping
            The same, parsed.
        versions : mapping
            Of the program and what it stands on.
        """
        values = text, json.dumps(tables, default=str), json.dumps(versions)
        with self._change() as base:
            base.execute("DELETE FROM running")
            last = base.execute(
                "SELECT text, tables, versions FROM studies ORDER BY number DESC LIMIT 1"
            ).fetchone()
            if last != values:
                base.execute(
                    "INSERT INTO studies (begun, text, tables, versions) VALUES (?, ?, ?, ?)",
                    (time.time(), *values),
                )

    def set_points(self, entries: Iterable[Entry]) -> None:
        """Replace the list of points; answers stay."""
        rows = (
            (e.number, e.identity, e.preview, e.wavelength_nm, json.dumps(dict(e.varied)), e.weight)
            for e in entries
        )
        with self._change() as base:
            base.execute("DELETE FROM points")
            base.executemany("INSERT INTO points VALUES (?, ?, ?, ?, ?, ?)", rows)

    def start(self, identity: str, worker: str) -> None:
        """Note that a point is being computed."""
        with self._change() as base:
            base.execute(
                "INSERT OR REPLACE INTO running VALUES (?, ?, ?)", (identity, worker, time.time())
            )

    def drop(self, identity: str) -> None:
        """Note that a point is not being computed any more."""
        with self._change() as base:
            base.execute("DELETE FROM running WHERE identity = ?", (identity,))

    def record(self, identity: str, answered: Answered) -> None:
        """Keep an answer; it is on disk when this returns."""
        self.record_all([(identity, answered)])

    def record_all(self, answers: Iterable[tuple[str, Answered]]) -> None:
        """Keep many answers at once: all of them, or none if this is cut short."""
        with self._change() as base:
            for identity, answered in answers:
                base.execute(
                    "INSERT OR REPLACE INTO answers VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
                    (identity, *columns_of(answered)),
                )
                base.execute("DELETE FROM running WHERE identity = ?", (identity,))

    def forget(self, identities: Iterable[str]) -> None:
        """Remove answers, so that they are computed again."""
        with self._change() as base:
            base.executemany(
                "DELETE FROM answers WHERE identity = ?", ((one,) for one in identities)
            )

    def note(self, key: str, value: str) -> None:
        """Keep a text about the run."""
        with self._change() as base:
            base.execute("INSERT OR REPLACE INTO about VALUES (?, ?)", (key, value))

    # --- what anyone reads ---------------------------------------------------------------------

    def about(self) -> dict[str, str]:
        """Return the texts about the run."""
        return dict(self._base.execute("SELECT key, value FROM about"))

    def study(self) -> tuple[str, dict[str, Any], dict[str, str], float] | None:
        """Return the last study: its text, its tables, the versions and when it was begun."""
        row = self._base.execute(
            "SELECT text, tables, versions, begun FROM studies ORDER BY number DESC LIMIT 1"
        ).fetchone()
        return None if row is None else (row[0], json.loads(row[1]), json.loads(row[2]), row[3])

    def entries(self) -> Iterator[Entry]:
        """Yield the points of the study in their order."""
        for row in self._base.execute("SELECT * FROM points ORDER BY number"):
            yield entry_of(row)

    def entry(self, point: int | str) -> Entry | None:
        """Return a point by its number or its identity."""
        column = "number" if isinstance(point, int) else "identity"
        row = self._base.execute(
            f"SELECT * FROM points WHERE {column} = ? ORDER BY number", (point,)
        ).fetchone()
        return None if row is None else entry_of(row)

    def known(self) -> dict[str, str]:
        """Return the status of every answer by its identity."""
        return dict(self._base.execute("SELECT identity, status FROM answers"))

    def files(self) -> list[tuple[str, str, str]]:
        """Return identity, file and checksum of the answers that have a file."""
        return self._base.execute(
            "SELECT identity, file, checksum FROM answers WHERE file IS NOT NULL"
        ).fetchall()

    def answer(self, identity: str) -> Answered | None:
        """Return one answer, without the values of the varied keys."""
        found = self._base.execute(
            "SELECT status, numbers, message, seconds, tries, worker, file, checksum, finished "
            "FROM answers WHERE identity = ?",
            (identity,),
        ).fetchone()
        if found is None:
            return None
        return Answered(row_of(found[:4], {}), *found[4:])

    def rows(self, varied: Mapping[str, Any] | None = None) -> Iterator[tuple[int, Row]]:
        """Yield number and row of the points that have an answer, in order.

        A point that has only its coarse answer gives that one, with the status "preview".

        Parameters
        ----------
        varied : mapping, optional
            Only the points with these values of the varied keys.
        """
        only, values = (
            ("", ()) if varied is None else ("AND varied = ?", (json.dumps(dict(varied)),))
        )
        query = f"""
            SELECT number, varied, a.status, a.numbers, a.message, a.seconds,
                   b.status, b.numbers, b.message, b.seconds
            FROM points LEFT JOIN answers a USING (identity)
            LEFT JOIN answers b ON b.identity = points.preview
            WHERE (a.status IS NOT NULL OR b.status IS NOT NULL) {only} ORDER BY number"""
        for number, text, *both in self._base.execute(query, values):
            if both[0] is not None:
                yield number, row_of(both[:4], json.loads(text))
            else:
                yield number, as_preview(row_of(both[4:], json.loads(text)))

    def tally(self) -> dict[str, tuple[int, float, float]]:
        """Return number, weight and seconds of the points of each status.

        The statuses "waiting" and "running" are those of the points without an answer; seconds
        are those that the answers took.
        """
        query = """
            SELECT COALESCE(answers.status, CASE WHEN running.identity IS NULL THEN ? ELSE ? END),
                   COUNT(*), TOTAL(weight), TOTAL(answers.seconds)
            FROM points LEFT JOIN answers USING (identity)
            LEFT JOIN running ON running.identity = points.identity GROUP BY 1"""
        return {row[0]: row[1:] for row in self._base.execute(query, (WAITING, RUNNING))}

    def counts(self) -> dict[str, int]:
        """Return how many points there are of each status, "waiting" and "running" included."""
        return {status: number for status, (number, _, _) in self.tally().items()}

    def work(self) -> tuple[float, float, float]:
        """Return the weight and the seconds of the points that are done, and the weight of all."""
        found = self.tally()
        done = [w for status, (_, w, _) in found.items() if status not in (WAITING, RUNNING)]
        return sum(done), sum(s for _, _, s in found.values()), sum(w for _, w, _ in found.values())

    def previews(self) -> tuple[int, int]:
        """Return for how many points a coarse answer is asked, and how many of these are there."""
        query = """
            SELECT COUNT(preview), COUNT(answers.identity)
            FROM points LEFT JOIN answers ON answers.identity = preview
            WHERE preview IS NOT NULL"""
        return self._base.execute(query).fetchone()

    def sets(self) -> list[tuple[dict[str, Any], int, int, int]]:
        """Return the sets of varied values in order.

        Each with its number of points, of those with an answer, and of those with an answer or a
        coarse one.
        """
        query = """
            SELECT varied, COUNT(*), COUNT(a.identity), COUNT(COALESCE(a.identity, b.identity))
            FROM points LEFT JOIN answers a USING (identity)
            LEFT JOIN answers b ON b.identity = preview GROUP BY varied ORDER BY MIN(number)"""
        return [(json.loads(row[0]), *row[1:]) for row in self._base.execute(query)]

    def doubtful(self, most: int = 50, failed: bool | None = None) -> list[tuple[Entry, str, str]]:
        """Return points that are done but not well: the entry, its status and its message.

        Parameters
        ----------
        most : int
            No more than this many, the first ones.
        failed : bool, optional
            Only those that failed, or only the others.
        """
        query = """
            SELECT points.*, status, message FROM points JOIN answers USING (identity)
            WHERE status != 'converged' AND COALESCE((status = 'failed') = ?, 1)
            ORDER BY number LIMIT ?"""
        return [(entry_of(r[:6]), r[6], r[7]) for r in self._base.execute(query, (failed, most))]

    def running(self) -> list[tuple[Entry, str, float]]:
        """Return the points being computed: the entry, the worker and when it began."""
        query = """
            SELECT points.*, worker, begun FROM running JOIN points USING (identity)
            GROUP BY points.identity ORDER BY begun"""
        return [(entry_of(r[:6]), r[6], r[7]) for r in self._base.execute(query)]

    # -------------------------------------------------------------------------------------------

    def _reader(self) -> sqlite3.Connection:
        """Open the file to be read, where nothing can be written either."""
        base = _connect(self.path, "mode=ro")
        try:
            base.execute("SELECT COUNT(*) FROM sqlite_master")
            return base
        except sqlite3.OperationalError as error:
            base.close()
            if "locked" in str(error):
                raise InputError(f"{self.path}: is busy; try again in a moment") from None
            # else its log's index can be neither found nor made: nobody writes, nobody can
        except sqlite3.DatabaseError:
            return base  # no ledger, or a damaged one: the caller finds out
        log = self.path.with_name(f"{LEDGER}-wal")
        if not (log.exists() and log.stat().st_size):
            return _connect(self.path, "mode=ro&immutable=1")
        self._aside = tempfile.TemporaryDirectory()
        for path in (self.path, log):
            shutil.copy(path, self._aside.name)
        return _connect(Path(self._aside.name, LEDGER), "mode=ro")

    def _make(self) -> None:
        self._base.execute("PRAGMA journal_mode = WAL")
        with self._change() as base:
            for statement in _TABLES.split(";"):
                base.execute(statement)
            base.execute("INSERT INTO about VALUES ('format', ?)", (str(FORMAT),))

    def _check_format(self) -> None:
        (found,) = self._base.execute("SELECT value FROM about WHERE key = 'format'").fetchone()
        if int(found) > FORMAT:
            raise InputError(
                f"{self.path}: written by a newer version of the program; update it "
                "(python -m pip install -U motelight), or run the study in another folder"
            )
        if int(found) < FORMAT:
            raise InputError(
                f"{self.path}: written by an older version of the program, which alone can go on "
                "with it; its spectrum.csv holds all that was finished. Run the study in another "
                "folder to compute it again"
            )

    @contextmanager
    def _change(self) -> Iterator[sqlite3.Connection]:
        """One transaction: all of it reaches the disk, or nothing."""
        try:
            self._base.execute("BEGIN IMMEDIATE")
            yield self._base
            self._base.execute("COMMIT")
        except BaseException as error:
            if self._base.in_transaction:
                self._base.execute("ROLLBACK")
            if isinstance(error, sqlite3.OperationalError):
                raise unwritable(self.path, error) from None
            raise


def _connect(path: Path, how: str = "") -> sqlite3.Connection:
    # Autocommit: transactions are begun and ended by hand, see `Ledger._change`.
    try:
        base = sqlite3.connect(
            f"{path.absolute().as_uri()}?{how}", timeout=30, isolation_level=None, uri=True
        )
    except sqlite3.OperationalError as error:
        raise InputError(f"{path}: cannot be opened: {error}") from None
    return base
