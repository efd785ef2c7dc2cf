"""Spectra as tables: the CSV file, and the lines printed at the end of a run."""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Sequence
from pathlib import Path

from dda.files import write_aside
from dda.study.rows import COLUMNS, Row
from dda.study.spectrum import Peak, find_peak

#: The printed table is thinned out to about this many lines; the file has all of them.
PRINTED_LINES = 14


def write_csv(path: Path, rows: Sequence[Row]) -> None:
    """Write rows to a CSV file, whole or not at all.

    The first line names the columns, the units in their names: the varied keys, what every table
    has, and what else the study asked for. Numbers have nine digits; what is
    not known is empty.

    Parameters
    ----------
    path : Path
        The file; one that exists is replaced.
    rows : sequence of Row
    """
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    varied = list(dict.fromkeys(key for row in rows for key in row.varied))
    more = list(dict.fromkeys(key for row in rows for key in row.more))
    writer.writerow([*varied, *COLUMNS, *more])
    for row in rows:
        writer.writerow(
            [
                *(_cell(row.varied.get(key, "")) for key in varied),
                *(_cell(getattr(row, column)) for column in COLUMNS),
                *(_cell(row.more.get(key, math.nan)) for key in more),
            ]
        )
    write_aside(path, text.getvalue().encode())


def spectrum_text(rows: Sequence[Row]) -> str:
    """Return the table that is printed at the end of a run, and the peaks under it."""
    columns = ("wavelength", "C_ext", "C_abs", "C_sca", "Q_ext", "status")
    units = ("nm", "nm^2", "nm^2", "nm^2", "", "")
    wide = (12, 20, 20, 20, 10, 12)
    lines = [
        "".join(f"{text:>{w}}" for text, w in zip(line, wide, strict=True))
        for line in (columns, units)
    ]
    for row in _thinned(rows):
        cells = (
            _short(row.wavelength_nm),
            _with_error(row.c_ext_nm2, row.c_ext_error_nm2),
            _with_error(row.c_abs_nm2, row.c_abs_error_nm2),
            _with_error(row.c_sca_nm2, row.c_sca_error_nm2),
            _short(row.q_ext),
            row.status,
        )
        lines.append("".join(f"{text:>{w}}" for text, w in zip(cells, wide, strict=True)))
    answered = [row for row in rows if row.answered]
    if len(answered) > 2:
        lines.append("")
        lines.extend(_peak_lines(answered))
    return "\n".join(lines)


def peak_sentence(peak: Peak | None) -> str:
    """Return where a peak is, how high and how wide, in words.

    >>> peak_sentence(Peak(561.23, 12345.6, 533.0, 598.5))
    'peak at 561.2 nm, 1.235e+04 nm^2, full width at half maximum 65.5 nm'
    """
    if peak is None:
        return "no peak between the ends of the spectrum"
    place = f"peak at {peak.position:.1f} nm, {peak.height:.4g} nm^2"
    if peak.width is not None:
        return f"{place}, full width at half maximum {peak.width:.1f} nm"
    if peak.red is not None:
        half = peak.red - peak.position
        return f"{place}, half width on the red side {half:.1f} nm (blue side stays above half)"
    if peak.blue is not None:
        half = peak.position - peak.blue
        return f"{place}, half width on the blue side {half:.1f} nm (red side stays above half)"
    return f"{place}, wider than the spectrum (neither side falls to half)"


def _peak_lines(rows: Sequence[Row]) -> list[str]:
    wavelength = [row.wavelength_nm for row in rows]
    curves = {
        "extinction": [row.c_ext_nm2 for row in rows],
        "absorption": [row.c_abs_nm2 for row in rows],
        "scattering": [row.c_sca_nm2 for row in rows],
    }
    return [
        f"{name:<12}{peak_sentence(find_peak(wavelength, curve))}" for name, curve in curves.items()
    ]


def _thinned(rows: Sequence[Row]) -> list[Row]:
    """Leave out converged rows until the table is short; the highest row always stays."""
    step = math.ceil(len(rows) / PRINTED_LINES)
    answered = [row for row in rows if row.answered]
    top = max(answered, key=lambda row: row.c_ext_nm2, default=None)
    return [
        row
        for i, row in enumerate(rows)
        if i % step == 0 or row is top or not row.converged or i == len(rows) - 1
    ]


def _cell(value: object) -> str:
    if isinstance(value, float):
        return f"{value:.9g}" if math.isfinite(value) else ""
    return str(value)


def _with_error(value: float, error: float) -> str:
    """A value and its error bar in percent.

    >>> _with_error(1234.5, 12.0)
    '1234 ± 0.97 %'
    """
    if not math.isfinite(error) or not value:
        return _short(value)
    return f"{_short(value)} ± {100 * error / abs(value):.2g} %"


def _short(value: float) -> str:
    return f"{value:.4g}" if math.isfinite(value) else "-"
