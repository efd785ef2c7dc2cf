"""What the ledger holds of a point: how it is listed, and its answer."""

from __future__ import annotations

import json
import time
from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass
from typing import Any

from dda.study.rows import Row


@dataclass(frozen=True)
class Entry:
    """A point of the study as the ledger lists it.

    Attributes
    ----------
    number : int
        Its place in the study and in the table of results, from 0.
    identity : str
        Fingerprint of all that determines its answer.
    preview : str or None
        Fingerprint of its coarse answer, if one is asked for.
    wavelength_nm : float
    varied : mapping
        Values of the varied keys by dotted name.
    weight : float
        Expected cost, in any unit.
    """

    number: int
    identity: str
    preview: str | None
    wavelength_nm: float
    varied: Mapping[str, Any]
    weight: float


@dataclass(frozen=True)
class Answered:
    """A finished answer.

    Attributes
    ----------
    row : Row
    tries : int
        How often it was computed; 2 after another solver was tried.
    worker : str
        Who computed it.
    file : str or None
        Its arrays, a path relative to the run folder.
    checksum : str or None
        SHA-256 of that file.
    finished : float
        Seconds since 1970.
    """

    row: Row
    tries: int = 1
    worker: str = ""
    file: str | None = None
    checksum: str | None = None
    finished: float = 0.0


def columns_of(answered: Answered) -> tuple[Any, ...]:
    """The columns of an answer after its identity."""
    row = answered.row
    numbers = asdict(row)
    for name in ("status", "message", "seconds", "varied"):
        numbers.pop(name)
    told = row.status, json.dumps(numbers), row.message, row.seconds, answered.tries
    return *told, time.time(), answered.worker, answered.file, answered.checksum


def entry_of(columns: Sequence[Any]) -> Entry:
    """An entry from the columns of a point."""
    number, identity, preview, wavelength, varied, weight = columns
    return Entry(number, identity, preview, wavelength, json.loads(varied), weight)


def row_of(columns: Sequence[Any], varied: dict[str, Any]) -> Row:
    """A row from status, numbers, message and seconds of an answer."""
    status, numbers, message, seconds = columns
    return Row(
        **json.loads(numbers),
        status=status,
        message=message,
        seconds=float("nan") if seconds is None else seconds,
        varied=varied,
    )
