"""What SQLite's errors mean for a run: a disk that is full or fails, or something else."""

from __future__ import annotations

import shutil
import sqlite3
from pathlib import Path

from dda.errors import ComputationError

# Bytes of the index of a write-ahead log, and of the pages it is written in.
_INDEX = 2**16


def is_the_disk(error: sqlite3.Error) -> bool:
    """Return whether the disk is full or fails; the file itself may be whole."""
    return _code(error) in (sqlite3.SQLITE_FULL, sqlite3.SQLITE_IOERR)


def unwritable(path: Path, error: sqlite3.Error) -> ComputationError:
    """Return what to raise when a file cannot be written."""
    full = _code(error) == sqlite3.SQLITE_FULL
    # SQLite's index of the log is mapped memory: without room for it, it says "disk I/O error"
    full = full or (is_the_disk(error) and shutil.disk_usage(path.parent).free < _INDEX)
    reason = "the disk is full" if full else str(error)
    return ComputationError(f"{path}: cannot be written: {reason}")


def _code(error: sqlite3.Error) -> int:
    return getattr(error, "sqlite_errorcode", 0) & 0xFF  # Python's own complaints have none
