"""One writer a run folder: a lock that ends with the process that holds it, however it ends."""

from __future__ import annotations

import contextlib
import json
import os
import platform
import sqlite3
import time
from pathlib import Path

from dda.errors import InputError
from dda.study.sqlite_errors import is_the_disk, unwritable

LOCK, HOLDER = "lock.sqlite", "holder.json"


class Lock:
    """Holds a run folder.

    Parameters
    ----------
    folder : Path
        It must exist.

    Raises
    ------
    InputError
        Another process holds it; the message says which.
    ComputationError
        The disk is full or fails.

    Notes
    -----
    An open exclusive transaction on an SQLite file of its own is a lock of the operating system
    on all systems that Python runs on, and goes with the process.
    """

    def __init__(self, folder: Path) -> None:
        self._folder = folder
        try:
            self._base = _locked(folder / LOCK)
        except sqlite3.DatabaseError as error:
            if "locked" in str(error):
                raise InputError(f"{folder}: {_sentence(folder)}") from None
            if is_the_disk(error):
                raise unwritable(folder / LOCK, error) from None
            raise InputError(f"{folder / LOCK}: cannot be written: {error}") from None
        holder = {"process": os.getpid(), "machine": platform.node(), "since": time.time()}
        with contextlib.suppress(OSError):  # a full disk; the lock holds without its name
            (folder / HOLDER).write_text(json.dumps(holder), encoding="utf-8")

    def __enter__(self) -> Lock:
        return self

    def __exit__(self, *_: object) -> None:
        self.release()

    def release(self) -> None:
        """Let others have the folder."""
        (self._folder / HOLDER).unlink(missing_ok=True)
        self._base.close()  # the file stays: one removed now might be held by the next already


def _locked(path: Path) -> sqlite3.Connection:
    base = sqlite3.connect(path, timeout=0.5, isolation_level=None)
    try:
        base.execute("PRAGMA journal_mode = DELETE")
        base.execute("BEGIN EXCLUSIVE")
    except BaseException:
        base.close()
        raise
    return base


def holder_of(folder: Path) -> dict[str, object] | None:
    """Return who holds a run folder: process, machine, since (seconds since 1970); or None."""
    path = folder / LOCK
    if not path.exists():
        return None
    # A reader's lock: it asks for no right to write, and two who ask do not see each other.
    base = sqlite3.connect(f"{path.absolute().as_uri()}?mode=ro", timeout=0, uri=True)
    try:
        base.execute("SELECT COUNT(*) FROM sqlite_master")
        return None
    except sqlite3.OperationalError as error:
        return (_holder(folder) or {}) if "locked" in str(error) else None
    finally:
        base.close()


def _holder(folder: Path) -> dict[str, object] | None:
    try:
        found = json.loads((folder / HOLDER).read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return None
    whole = isinstance(found, dict) and found.keys() >= {"process", "machine", "since"}
    return found if whole else None


def _sentence(folder: Path) -> str:
    holder = _holder(folder)
    if holder is None:
        return "another process is running a study in it; wait for it, or give another --out"
    since = time.strftime("%Y-%m-%d %H:%M", time.localtime(float(str(holder["since"]))))
    return (
        f"process {holder['process']} on {holder['machine']} is running a study in it since "
        f"{since}; wait for it or stop it, or give another --out"
    )
