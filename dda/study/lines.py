"""Where a key of a TOML text stands, so that a message can name the line."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Sequence

KeyPath = tuple[str | int, ...]

_KEY = r"""(?:[A-Za-z0-9_-]+|"(?:[^"\\]|\\.)*"|'[^']*')"""
_DOTTED = rf"{_KEY}(?:\s*\.\s*{_KEY})*"
_HEADER = re.compile(rf"^\s*(\[\[?)\s*({_DOTTED})\s*\]\]?")
_ASSIGNMENT = re.compile(rf"^\s*({_DOTTED})\s*=")
_FENCE = re.compile(r'"""|' + r"'''")


def line_of(text: str, path: Sequence[str | int]) -> int | None:
    """Return the line (from 1) of the key at ``path``, or of its nearest enclosing key.

    Parameters
    ----------
    text : str
        A TOML text; it may be invalid.
    path : sequence of str or int
        Keys from the outside inwards, list positions as integers.

    Returns
    -------
    int or None
        None when not even the outermost key stands in the text.

    Examples
    --------
    >>> line_of("[host]\\nindex = -1", ("host", "index"))
    2
    """
    known = _key_lines(text)
    for length in range(len(path), 0, -1):
        line = known.get(tuple(path[:length]))
        if line is not None:
            return line
    return None


def _key_lines(text: str) -> dict[KeyPath, int]:
    """Return the line of every table header and every key at the start of a line."""
    found: dict[KeyPath, int] = {}
    counts: dict[KeyPath, int] = {}
    table: KeyPath = ()
    fence = ""
    for number, line in enumerate(text.splitlines(), start=1):
        if not fence:
            if match := _HEADER.match(line):
                table = _split(match[2])
                if match[1] == "[[":
                    counts[table] = counts.get(table, -1) + 1
                    table = (*table, counts[table])
                else:
                    table = _inside_arrays(table, counts)
                _note(found, table, number)
            elif match := _ASSIGNMENT.match(line):
                _note(found, table + _split(match[1]), number)
        for mark in _FENCE.findall(line):
            fence = mark if not fence else ("" if mark == fence else fence)
    return found


def _inside_arrays(table: KeyPath, counts: dict[KeyPath, int]) -> KeyPath:
    """Put the position into ``[a.b]`` where ``a`` is an array of tables."""
    path: KeyPath = ()
    for key in table:
        path = (*path, key)
        if path in counts:
            path = (*path, counts[path])
    return path


def _note(found: dict[KeyPath, int], path: KeyPath, line: int) -> None:
    for length in range(1, len(path) + 1):
        found.setdefault(path[:length], line)


def _split(dotted: str) -> KeyPath:
    parts = re.findall(_KEY, dotted)
    return tuple(next(iter(tomllib.loads(f"{part} = 0"))) for part in parts)
