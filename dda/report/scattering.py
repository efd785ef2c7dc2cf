"""Scattered light by angle: the table ``scattering.csv`` and its picture."""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Iterable, Iterator, Mapping
from pathlib import Path
from typing import Any

import numpy as np

from dda.report.figures import save
from dda.study.rows import Row

Arrays = Mapping[str, np.ndarray]
#: Elements of the Mueller matrix that follow the first, which is normalized by itself.
_ELEMENTS = [(i, j) for i in range(4) for j in range(4) if (i, j) != (0, 0)]
#: Colour, dash pattern and marker: told apart by any one of them (Okabe & Ito 2008).
_CURVES = (
    ("#000000", "-", "o"),
    ("#D55E00", "--", "s"),
    ("#0072B2", ":", "^"),
    ("#009E73", "-.", "D"),
)


def scattering_table(points: Iterable[tuple[Row, Arrays]]) -> str:
    """Return the scattered light of points by angle as CSV.

    Parameters
    ----------
    points : iterable of (Row, mapping of ndarray)
        Each with the arrays of its file by name (`dda.study.point_file.read_point`); points
        without scattering angles are left out.

    Returns
    -------
    str
        Columns: ``wavelength_nm``, the varied keys, ``azimuth_deg``, ``angle_deg``; dC_sca/dOmega
        of the study's light with its error bar from the spacings; ``s11``, the phase function
        (unpolarized light, mean one over all directions); ``s12`` to ``s44``, the other elements
        of the Mueller matrix over S11. Empty without points.
    """
    shown = list(_with_angles(points))
    if not shown:
        return ""
    varied = list(dict.fromkeys(key for row, _ in shown for key in row.varied))
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    elements = [f"s{i + 1}{j + 1}" for i, j in _ELEMENTS]
    columns = ["azimuth_deg", "angle_deg", "dc_sca_nm2_per_sr", "dc_sca_error_nm2_per_sr", "s11"]
    writer.writerow(["wavelength_nm", *varied, *columns, *elements])
    for row, arrays in shown:
        place = [_cell(row.wavelength_nm), *(_cell(row.varied.get(key, "")) for key in varied)]
        for p, azimuth in enumerate(arrays["scattering/azimuths"]):
            for a, angle in enumerate(arrays["scattering/angles"]):
                matrix = arrays["scattering/mueller"][p, a]
                numbers = [azimuth, angle]
                numbers += [arrays[f"scattering/{n}"][p, a] for n in ("dc_sca", "dc_sca_error")]
                numbers.append(arrays["scattering/phase_function"][p, a])
                numbers += [_over(matrix[i, j], matrix[0, 0]) for i, j in _ELEMENTS]
                writer.writerow([*place, *map(_cell, numbers)])
    return text.getvalue()


def draw_scattering(path: Path, points: Iterable[tuple[Row, Arrays]], title: str) -> bool:
    """Draw scattering by angle for unpolarized light, and its degree of linear polarization.

    With one azimuth the curves are the shortest and longest wavelength and that of the largest
    extinction; with several they are the azimuths at the latter. Of varied keys, the combination
    with the largest extinction is drawn.

    Parameters
    ----------
    path : Path
        The PNG file; one that exists is replaced.
    points : iterable of (Row, mapping of ndarray)
        As of `scattering_table`.
    title : str

    Returns
    -------
    bool
        Whether there was anything to draw.
    """
    from matplotlib.figure import Figure
    from matplotlib.ticker import FuncFormatter

    shown = list(_with_angles(points))
    if not shown:
        return False
    curves, remark = _curves(shown)
    figure = Figure(figsize=(7.2, 6.0), layout="constrained")
    upper, lower = figure.subplots(2, 1, sharex=True, height_ratios=(3, 2))
    for (label, arrays, p), (colour, dash, marker) in zip(curves, _CURVES, strict=False):
        angles = arrays["scattering/angles"]
        order = np.argsort(angles)
        matrix = arrays["scattering/mueller"][p][order]
        every = max(1, len(angles) // 12)
        look: dict[str, Any] = {"color": colour, "ls": dash, "marker": marker, "ms": 4, "lw": 1.6}
        look |= {"markevery": every, "label": label}
        upper.plot(angles[order], _differential(arrays)[p][order], **look)
        lower.plot(angles[order], [_over(-m[0, 1], m[0, 0]) for m in matrix], **look)
    upper.set_yscale("log")
    plain = FuncFormatter(lambda value, _: f"{value:g}")
    upper.yaxis.set_major_formatter(plain)
    if _open_up(upper) < 100:  # with few decades the ticks between them help
        upper.yaxis.set_minor_formatter(FuncFormatter(_few))
    upper.set_ylabel("dC$_{sca}$/dΩ, unpolarized (nm²/sr)")
    upper.legend(frameon=False, fontsize=9)
    lower.axhline(0, color="#000000", lw=0.7)
    lower.set_ylim(-1.05, 1.05)
    lower.set_ylabel("degree of linear\npolarization −S$_{12}$/S$_{11}$")
    lower.set_xlabel("scattering angle (degrees)")
    lower.set_xlim(0, 180)
    lower.set_xticks(range(0, 181, 30))
    for axes in (upper, lower):
        axes.grid(alpha=0.25, lw=0.6)
    upper.set_title(f"{title}{remark}", loc="left", fontsize=11)
    save(figure, path)
    return True


def _with_angles(points: Iterable[tuple[Row, Arrays]]) -> Iterator[tuple[Row, Arrays]]:
    return ((row, arrays) for row, arrays in points if "scattering/mueller" in arrays)


def _curves(shown: list[tuple[Row, Arrays]]) -> tuple[list[tuple[str, Arrays, int]], str]:
    """What to draw, as (label, arrays, number of the azimuth), and what the title says more."""
    top, strongest = max(shown, key=lambda point: point[0].c_ext_nm2)
    same = [point for point in shown if point[0].varied == top.varied]
    remark = "".join(f", {key} = {_cell(value)}" for key, value in top.varied.items())
    azimuths = strongest["scattering/azimuths"]
    if len(azimuths) > 1:
        chosen = list(range(len(azimuths)))[: len(_CURVES)]
        labels = [(f"azimuth {azimuths[p]:g}°", strongest, p) for p in chosen]
        return labels, f"{remark}, {top.wavelength_nm:g} nm"
    by_wavelength = sorted(same, key=lambda point: point[0].wavelength_nm)
    numbers = {0, by_wavelength.index((top, strongest)), len(by_wavelength) - 1}
    picked = [by_wavelength[i] for i in sorted(numbers)]
    return [(f"{row.wavelength_nm:g} nm", arrays, 0) for row, arrays in picked], remark


def _differential(arrays: Arrays) -> np.ndarray:
    """dC_sca/dOmega for unpolarized light, nm^2 per steradian."""
    return arrays["scattering/mueller"][..., 0, 0] / float(arrays["scattering/k"]) ** 2


def _open_up(axes: Any) -> float:
    """Show at least a factor of ten, so that a nearly constant curve looks it; return the span."""
    low, high = axes.get_ylim()
    if high < 10 * low:
        middle = math.sqrt(low * high)
        low, high = middle / math.sqrt(10), middle * math.sqrt(10)
        axes.set_ylim(low, high)
    return high / low


def _few(value: float, _: object) -> str:
    """Label of 2 and 5 times a power of ten, none of the others.

    >>> _few(20.0, None), _few(30.0, None)
    ('20', '')
    """
    digit = round(value / 10.0 ** math.floor(math.log10(value) + 1e-9))
    return f"{value:g}" if digit in (2, 5) else ""


def _over(value: float, whole: float) -> float:
    """A ratio, zero where it is zero to rounding."""
    if not whole > 0:
        return math.nan
    return float(value / whole) if abs(value) > 1e-12 * whole else 0.0


def _cell(value: object) -> str:
    if isinstance(value, float):
        return f"{value:.9g}" if math.isfinite(value) else ""
    return str(value)
