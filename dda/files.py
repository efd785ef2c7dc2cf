"""Files that are whole or absent: written aside, then renamed."""

from __future__ import annotations

import contextlib
import os
import secrets
from pathlib import Path

from dda.errors import write_error


def write_aside(path: Path, content: bytes) -> None:
    """Write a file under another name, flush it to disk and rename it.

    Parameters
    ----------
    path : Path
        The file; one that exists is replaced only by the whole new one.
    content : bytes

    Raises
    ------
    InputError
        The file cannot be written; what was there before is still there.
    ComputationError
        The disk is full or fails; the same holds.
    """
    aside = path.with_name(f".{path.name}.{secrets.token_hex(4)}.part")
    try:
        with aside.open("wb") as file:
            file.write(content)
            file.flush()
            os.fsync(file.fileno())
        os.replace(aside, path)
    except OSError as error:
        raise write_error(path, error) from error
    finally:
        with contextlib.suppress(OSError):  # it was renamed, or never there
            aside.unlink()
