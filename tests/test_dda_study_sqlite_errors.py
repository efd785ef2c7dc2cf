"""A full disk is told from a damaged file, also where none can be filled."""

import shutil
import sqlite3
from types import SimpleNamespace

import pytest

from dda.errors import ComputationError
from dda.study.ledger import Ledger
from dda.study.sqlite_errors import is_the_disk, unwritable
from tests.runs import answer, begin, grid


def _error(code, text="disk I/O error"):
    error = sqlite3.OperationalError(text)
    error.sqlite_errorcode = code
    return error


@pytest.mark.parametrize(
    ("code", "disk"),
    [
        (sqlite3.SQLITE_FULL, True),
        (sqlite3.SQLITE_IOERR, True),
        (sqlite3.SQLITE_IOERR_SHMSIZE, True),
        (sqlite3.SQLITE_CORRUPT, False),
        (sqlite3.SQLITE_NOTADB, False),
    ],
)
def test_the_disk_or_the_file(code, disk):
    assert is_the_disk(_error(code)) is disk
    assert not is_the_disk(sqlite3.OperationalError("of Python itself"))


def test_no_room_for_the_index_of_the_log_is_a_full_disk(tmp_path, monkeypatch):
    path = tmp_path / "ledger.sqlite"
    error = _error(sqlite3.SQLITE_IOERR_SHMSIZE)
    assert str(unwritable(path, error)) == f"{path}: cannot be written: disk I/O error"
    monkeypatch.setattr(shutil, "disk_usage", lambda _: SimpleNamespace(free=4096))
    assert str(unwritable(path, error)) == f"{path}: cannot be written: the disk is full"
    locked = unwritable(path, _error(sqlite3.SQLITE_BUSY, "database is locked"))
    assert str(locked).endswith("cannot be written: database is locked")


def test_a_ledger_that_may_not_grow_keeps_what_it_has(tmp_path):
    entries = grid()
    with begin(tmp_path, entries) as ledger:
        ledger.record(entries[0].identity, answer(entries[0]))
        ledger._base.execute("PRAGMA max_page_count = 1")  # that is: no more than there are
        with pytest.raises(ComputationError, match=r"ledger\.sqlite: cannot be written: the disk"):
            ledger.record(entries[1].identity, answer(entries[1], "failed", "x" * 100_000))
        assert ledger.known() == {entries[0].identity: "converged"}
    with Ledger(tmp_path) as ledger:
        assert ledger.known() == {entries[0].identity: "converged"}
