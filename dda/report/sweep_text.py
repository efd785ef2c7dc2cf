"""A sweep in words: a line for each combination of the varied keys."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import groupby
from typing import Any

from dda.study.rows import Row
from dda.study.spectrum import find_peak

#: The printed table is thinned out to about this many lines; the file has all of them.
PRINTED_LINES = 20


def sweep_text(rows: Sequence[Row]) -> str:
    """Return the peak of every combination, thinned out if there are many.

    Parameters
    ----------
    rows : sequence of Row
        Those of a combination side by side.
    """
    combinations = [list(same) for _, same in groupby(rows, key=lambda row: row.varied)]
    step = -(-len(combinations) // PRINTED_LINES)
    shown = combinations[::step]
    keys = list(shown[0][0].varied)
    table = [[*keys, "points", "good", "peak (nm)", "C_ext there (nm^2)", "width (nm)"]]
    table += [[*map(_text, c[0].varied.values()), *_peak(c)] for c in shown]
    wide = [max(len(line[i]) for line in table) + 2 for i in range(len(table[0]))]
    lines = ["".join(f"{cell:>{w}}" for cell, w in zip(line, wide, strict=True)) for line in table]
    if step > 1:
        lines.append(f"({len(shown)} of {len(combinations)} combinations; the table has all)")
    return "\n".join(lines)


def _peak(rows: Sequence[Row]) -> list[str]:
    answered = [row for row in rows if row.answered]
    good = str(sum(row.converged for row in rows))
    peak = find_peak([r.wavelength_nm for r in answered], [r.c_ext_nm2 for r in answered])
    if peak is None:
        top = max(answered, key=lambda row: row.c_ext_nm2, default=None)
        where = "-" if top is None or len(rows) > 2 else f"{top.c_ext_nm2:.4g}"
        return [str(len(rows)), good, "-", where, "-"]
    width = "-" if peak.width is None else f"{peak.width:.1f}"
    return [str(len(rows)), good, f"{peak.position:.1f}", f"{peak.height:.4g}", width]


def _text(value: Any) -> str:
    return f"{value:.6g}" if isinstance(value, float) else str(value)
