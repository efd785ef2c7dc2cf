"""A mistake in a study, with the key it sits at."""

from __future__ import annotations

from collections.abc import Sequence

from dda.errors import InputError


def dotted(key: Sequence[str | int]) -> str:
    """Return a key path as it is written in messages.

    >>> dotted(("particle", "parts", 0, "edge"))
    'particle.parts[0].edge'
    """
    words = [f"[{part}]" if isinstance(part, int) else f".{part}" for part in key]
    return "".join(words).removeprefix(".")


class Mistake(InputError):
    """An input error at a known key; the reader adds the file and the line.

    Attributes
    ----------
    key : tuple of str or int
        Keys from the outside inwards.
    message : str
        What is wrong and what would be right.
    """

    def __init__(self, key: Sequence[str | int], message: str) -> None:
        self.key = tuple(key)
        self.message = message
        super().__init__(f"{dotted(self.key)}: {message}" if key else message)
