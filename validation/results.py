"""Groups of runs, their tables, and the page that holds them all.

A group is a function that returns a `Table`; it joins with the decorator `group` from any module of
this package called runs_*.py, and nothing else needs to know of it:

    @group("mie", rank=10)
    def mie(quick: bool) -> Table:
        '''Spheres against the Mie series.'''
"""

from __future__ import annotations

import importlib
import os
import pkgutil
import re
import sys
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

PAGE = Path(__file__).with_name("RESULTS.md")
FAILS = "FAILS"
HEAD = """# Validation

Every table on this page is written by `python -m validation`; do not edit it by hand.
`--list` names the groups, `--only NAME` runs one and replaces its section alone.
Errors are relative, (ours - reference)/reference. A verdict other than "ok" is a failure.
"""


@dataclass(frozen=True)
class Table:
    """What a group found.

    Attributes
    ----------
    title : str
    text : str
        What was compared, why, and with which tolerance; Markdown.
    columns : sequence of str
    rows : sequence of sequences of str
        A cell that begins with `FAILS` marks a failure.
    """

    title: str
    text: str
    columns: Sequence[str]
    rows: Sequence[Sequence[str]]

    @property
    def failures(self) -> int:
        """Number of rows that failed."""
        return sum(any(cell.startswith(FAILS) for cell in row) for row in self.rows)

    def markdown(self) -> str:
        """The section of the page, heading included."""
        for row in self.rows:
            if len(row) != len(self.columns):
                raise ValueError(f"{self.title}: {len(self.columns)} columns, but the row {row}")
        lines = [f"## {self.title}", "", self.text.strip(), ""]
        for row in (self.columns, ["---"] * len(self.columns), *self.rows):
            lines.append("| " + " | ".join(cell.replace("|", "\\|") for cell in row) + " |")
        return "\n".join(lines) + "\n"


Runs = Callable[[bool], Table]


@dataclass(frozen=True)
class Group:
    """A registered function, its name on the command line and its place on the page."""

    name: str
    rank: float
    runs: Runs

    @property
    def summary(self) -> str:
        """First line of the function's docstring."""
        return (self.runs.__doc__ or "").strip().split("\n")[0]


_groups: dict[str, Group] = {}


def group(name: str, rank: float) -> Callable[[Runs], Runs]:
    """Register a function of `quick` that returns a Table; sections follow each other by rank.

    With `quick` true the function runs a few small cases only, for a look or a test.
    """

    def register(runs: Runs) -> Runs:
        if not re.fullmatch(r"[a-z0-9-]+", name) or name in _groups:
            raise ValueError(f"{name!r} is taken or holds other characters than a-z, 0-9, -")
        _groups[name] = Group(name, rank, runs)
        return runs

    return register


def all_groups() -> dict[str, Group]:
    """The groups of all modules runs_*.py, by name, in the order of the page."""
    package = Path(__file__).parent
    for module in pkgutil.iter_modules([str(package)]):
        if module.name.startswith("runs_"):
            importlib.import_module(f"validation.{module.name}")
    return {g.name: g for g in sorted(_groups.values(), key=lambda g: g.rank)}


def write_section(name: str, section: str, order: Sequence[str], page: Path = PAGE) -> None:
    """Put the section of one group on the page and leave the others as they are.

    Parameters
    ----------
    name : str
        Of the group.
    section : str
        Markdown.
    order : sequence of str
        Names of all groups; sections of unknown groups are dropped.
    page : Path
    """
    sections = read_sections(page) | {name: section}
    parts = [HEAD]
    for known in order:
        if known in sections:
            parts.append(f"<!-- section {known} -->\n\n{sections[known].strip()}\n")
    draft = page.with_suffix(".new")
    draft.write_text("\n".join(parts), encoding="utf-8")
    os.replace(draft, page)


def read_sections(page: Path) -> dict[str, str]:
    """Markdown of the sections of a page by the name of their group; empty if there is no page."""
    if not page.exists():
        return {}
    pieces = re.split(r"<!-- section ([a-z0-9-]+) -->\n", page.read_text(encoding="utf-8"))
    return dict(zip(pieces[1::2], pieces[2::2], strict=True))


def footnote(seconds: float, threads: int) -> str:
    """Line under a table that says what it cost."""
    versions = f"Python {sys.version_info.major}.{sys.version_info.minor}, numpy {np.__version__}"
    return f"\nTook {seconds:.0f} s with {threads} threads ({versions}).\n"


def number(value: float, digits: int = 4) -> str:
    """A number for a table: `digits` significant ones, an exponent only where it must be.

    >>> number(12345.678), number(0.012344), number(1.5e-9, 2)
    ('12346', '0.01234', '1.5e-09')
    """
    if value != 0 and not 1e-3 <= abs(value) < 1e7:
        return f"{value:.{digits - 1}e}"
    if abs(value) >= 10**digits:
        return f"{value:.0f}"
    return np.format_float_positional(value, precision=digits, fractional=False, trim="-")


def verdict(passed: bool) -> str:
    """The last cell of a row."""
    return "ok" if passed else FAILS
