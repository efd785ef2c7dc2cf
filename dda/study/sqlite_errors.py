"""What SQLite's errors mean for a run: a disk that is full or fails, or something else."""

from __future__ import annotations

import sqlite3
from pathlib import Path

from dda.errors import ComputationError


def is_the_disk(error: sqlite3.Error) -> bool:
    """Return whether the disk is full or fails; the file itself may be whole."""
    return _code(error) in (sqlite3.SQLITE_FULL, sqlite3.SQLITE_IOERR)


def unwritable(path: Path, error: sqlite3.Error) -> ComputationError:
    """Return what to raise when a file cannot be written."""
    reason = "the disk is full" if _code(error) == sqlite3.SQLITE_FULL else str(error)
    return ComputationError(f"{path}: cannot be written: {reason}")


def _code(error: sqlite3.Error) -> int:
    return getattr(error, "sqlite_errorcode", 0) & 0xFF  # Python's own complaints have none
