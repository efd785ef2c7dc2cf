"""The two ways a run can fail, and what the command line makes of them."""

from __future__ import annotations

import errno
from pathlib import Path

_FULL = (errno.ENOSPC, errno.EDQUOT)


class InputError(ValueError):
    """The user asked for something that cannot be done; the message says what would be right.

    The command line prints the message alone and exits with code 2.
    """


class ComputationError(RuntimeError):
    """A computation that was asked for correctly did not succeed; exit code 1."""


def write_error(path: Path, error: OSError) -> InputError | ComputationError:
    """Return what to raise when a file cannot be written.

    A disk that is full or fails is not the user's mistake: what he asked for is right, and the
    same command goes on when the disk is.

    >>> write_error(Path("spectrum.csv"), OSError(errno.ENOSPC, ""))
    ComputationError('spectrum.csv: cannot be written: the disk is full')
    """
    if error.errno in _FULL:
        return ComputationError(f"{path}: cannot be written: the disk is full")
    sentence = f"{path}: cannot be written: {error.strerror}"
    return ComputationError(sentence) if error.errno == errno.EIO else InputError(sentence)
