"""The picture of a sweep: the extinction of every combination of the varied keys."""

from __future__ import annotations

import math
from collections.abc import Sequence
from itertools import groupby
from pathlib import Path
from typing import Any

from dda.report.figures import save
from dda.study.rows import Row
from dda.study.spectrum import find_peak

#: Up to this many combinations each has its own curve and name.
_NAMED = 10
#: More curves than this are thinned out.
_MOST_CURVES = 80
_DASHES = ("-", "--", "-.", ":")


def draw_sweep(path: Path, rows: Sequence[Row], title: str) -> None:
    """Draw the extinction spectra of all combinations, and where their peaks are.

    Parameters
    ----------
    path : Path
        The PNG file; one that exists is replaced.
    rows : sequence of Row
        Those of a combination side by side.
    title : str
    """
    from matplotlib.figure import Figure

    curves = [list(same) for _, same in groupby(rows, key=lambda row: row.varied)]
    if max(len(curve) for curve in curves) < 3:
        return _draw_values(path, rows, title)
    figure = Figure(figsize=(9.2, 4.5), layout="constrained")
    left, right = figure.subplots(1, 2, width_ratios=(3, 2))
    named = len(curves) <= _NAMED
    key = _main_key(curves)
    colours = _colours(curves, key, named)
    step = -(-len(curves) // _MOST_CURVES)
    for number, curve in list(enumerate(curves))[::step]:
        wavelength = [row.wavelength_nm for row in curve]
        values = [row.c_ext_nm2 for row in curve]
        dash = _DASHES[number % len(_DASHES)] if named else "-"
        label = _name(curve[0].varied)
        left.plot(wavelength, values, dash, color=colours[number], lw=1.4, label=label)
        if named:  # more of them would hide one another
            errors = [row.c_ext_error_nm2 for row in curve]
            low = [v - e for v, e in zip(values, errors, strict=True)]
            high = [v + e for v, e in zip(values, errors, strict=True)]
            left.fill_between(wavelength, low, high, color=colours[number], alpha=0.15, lw=0)
    left.set_xlabel("vacuum wavelength (nm)")
    left.set_ylabel("extinction cross section (nm²)")
    left.set_ylim(bottom=0)
    left.grid(alpha=0.25, lw=0.6)
    left.set_title(title, loc="left", fontsize=11)
    if named:
        left.legend(frameon=False, fontsize=8)
    elif _numeric(curves[0][0].varied[key]):
        _colour_bar(figure, left, curves, key)
    _draw_peaks(right, curves, colours, key)
    save(figure, path)


def _draw_peaks(
    axes: Any, curves: Sequence[Sequence[Row]], colours: Sequence[Any], key: str
) -> None:
    """Peak wavelength of each combination over the key that takes most values."""
    for number, curve in enumerate(curves):
        answered = [row for row in curve if row.answered]
        peak = find_peak([r.wavelength_nm for r in answered], [r.c_ext_nm2 for r in answered])
        if peak is not None:
            place = _place(curve[0].varied[key], number)
            axes.plot([place], [peak.position], "o", color=colours[number], ms=5)
    axes.set_xlabel(key if _numeric(curves[0][0].varied[key]) else "combination")
    axes.set_ylabel("peak of the extinction (nm)")
    axes.grid(alpha=0.25, lw=0.6)


def _draw_values(path: Path, rows: Sequence[Row], title: str) -> None:
    """Too few wavelengths for curves: the cross section over the varied key."""
    from matplotlib.figure import Figure

    figure = Figure(figsize=(7.2, 4.5), layout="constrained")
    axes = figure.add_subplot()
    key = _main_key([[row] for row in rows])
    for number, wavelength in enumerate(sorted({row.wavelength_nm for row in rows})):
        chosen = [row for row in rows if row.wavelength_nm == wavelength]
        places = [_place(row.varied[key], i) for i, row in enumerate(chosen)]
        axes.errorbar(
            places,
            [row.c_ext_nm2 for row in chosen],
            [row.c_ext_error_nm2 if math.isfinite(row.c_ext_error_nm2) else 0 for row in chosen],
            fmt="os"[number % 2],
            ms=4,
            lw=1,
            color=("#000000", "#D55E00")[number % 2],
            label=f"{wavelength:g} nm",
        )
    axes.set_xlabel(key if _numeric(rows[0].varied[key]) else "combination")
    axes.set_ylabel("extinction cross section (nm²)")
    axes.grid(alpha=0.25, lw=0.6)
    axes.legend(frameon=False)
    axes.set_title(title, loc="left", fontsize=11)
    save(figure, path)


def _main_key(curves: Sequence[Sequence[Row]]) -> str:
    keys = curves[0][0].varied
    return max(keys, key=lambda key: len({str(curve[0].varied[key]) for curve in curves}))


def _place(value: Any, number: int) -> float:
    return float(value) if _numeric(value) else float(number)


def _numeric(value: Any) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool)


def _name(varied: dict[str, Any]) -> str:
    return ", ".join(f"{key.rpartition('.')[2]} {value}" for key, value in varied.items())


def _colours(curves: Sequence[Sequence[Row]], key: str, named: bool) -> list[Any]:
    """A colour a curve; with many curves, those of the same value of the main key share it."""
    from matplotlib import colormaps

    cividis = colormaps["cividis"]
    if named or not _numeric(curves[0][0].varied[key]):
        return [cividis(0.9 * i / max(1, len(curves) - 1)) for i in range(len(curves))]
    values = [float(curve[0].varied[key]) for curve in curves]
    low, high = min(values), max(values)
    return [cividis(0.9 * (value - low) / ((high - low) or 1)) for value in values]


def _colour_bar(figure: Any, axes: Any, curves: Sequence[Sequence[Row]], key: str) -> None:
    from matplotlib import colormaps
    from matplotlib.cm import ScalarMappable
    from matplotlib.colors import LinearSegmentedColormap, Normalize

    values = [float(curve[0].varied[key]) for curve in curves]
    shades = colormaps["cividis"]([0.9 * i / 255 for i in range(256)])
    part = LinearSegmentedColormap.from_list("part", shades)
    mappable = ScalarMappable(Normalize(min(values), max(values)), part)
    figure.colorbar(mappable, ax=axes, label=key, location="top", fraction=0.05, aspect=40)
