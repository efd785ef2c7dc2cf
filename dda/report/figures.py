"""Figures made with matplotlib."""

from __future__ import annotations

import io
import math
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from dda.files import write_aside
from dda.study.rows import Row
from dda.study.spectrum import find_peak

#: Colour, dash pattern and marker of a curve: told apart by any one of them (Okabe & Ito 2008).
CURVES = {
    "extinction": ("c_ext_nm2", "#000000", "-", "o"),
    "absorption": ("c_abs_nm2", "#D55E00", "--", "s"),
    "scattering": ("c_sca_nm2", "#0072B2", ":", "^"),
}


def draw_spectrum(path: Path, rows: Sequence[Row], title: str) -> None:
    """Draw the cross sections over the wavelength into a PNG file.

    The bands are the error bars. Points that did not converge are ringed; failed ones leave a
    gap in the curves.

    Parameters
    ----------
    path : Path
        The PNG file; one that exists is replaced.
    rows : sequence of Row
    title : str
    """
    from matplotlib.figure import Figure

    figure = Figure(figsize=(7.2, 4.5), layout="constrained")
    axes = figure.add_subplot()
    wavelength = [row.wavelength_nm for row in rows]
    marked = len(rows) <= 60
    for name, (column, colour, dash, marker) in CURVES.items():
        values = [getattr(row, column) for row in rows]
        shape = marker if marked else None
        axes.plot(wavelength, values, dash, color=colour, marker=shape, ms=3, lw=1.6, label=name)
        errors = [getattr(row, column.replace("_nm2", "_error_nm2")) for row in rows]
        low = [v - e for v, e in zip(values, errors, strict=True)]
        high = [v + e for v, e in zip(values, errors, strict=True)]
        axes.fill_between(wavelength, low, high, color=colour, alpha=0.2, lw=0)
    _ring_doubtful(axes, rows)
    _mark_peak(axes, rows)
    axes.set_xlabel("vacuum wavelength (nm)")
    axes.set_ylabel("cross section (nm²)")
    axes.set_ylim(bottom=0)
    axes.grid(alpha=0.25, lw=0.6)
    axes.legend(frameon=False)
    axes.set_title(title, loc="left", fontsize=11)
    _efficiency_axis(axes, rows)
    save(figure, path)


def save(figure: Any, path: Path) -> None:
    """Write a figure to a PNG file, whole or not at all."""
    content = io.BytesIO()
    figure.savefig(content, format="png", dpi=160)
    write_aside(path, content.getvalue())


def _ring_doubtful(axes: Any, rows: Sequence[Row]) -> None:
    doubtful = [row for row in rows if row.answered and not row.converged]
    if doubtful:
        axes.plot(
            [row.wavelength_nm for row in doubtful],
            [row.c_ext_nm2 for row in doubtful],
            "o",
            ms=10,
            mfc="none",
            mec="#CC79A7",
            mew=1.5,
            label="not converged",
        )


def _mark_peak(axes: Any, rows: Sequence[Row]) -> None:
    peak = find_peak([row.wavelength_nm for row in rows], [row.c_ext_nm2 for row in rows])
    if peak is None:
        return
    axes.axvline(peak.position, color="#000000", lw=0.7, alpha=0.5)
    axes.annotate(
        f"{peak.position:.1f} nm",
        (peak.position, peak.height),
        xytext=(6, 2),
        textcoords="offset points",
        fontsize=9,
    )
    axes.margins(y=0.08)


def _efficiency_axis(axes: Any, rows: Sequence[Row]) -> None:
    """Put the efficiency on the right: the same curves, over pi r_eff^2."""
    areas = [row.c_ext_nm2 / row.q_ext for row in rows if row.answered and row.q_ext > 0]
    if not areas or not math.isfinite(areas[0]):
        return
    area = areas[0]
    right = axes.secondary_yaxis("right", functions=(lambda c: c / area, lambda q: q * area))
    right.set_ylabel("efficiency Q")
