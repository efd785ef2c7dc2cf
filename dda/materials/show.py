"""A material as text and as a figure, for the command ``dda material``."""

import textwrap
from pathlib import Path

import numpy as np
from numpy.typing import ArrayLike, NDArray

from dda.errors import InputError
from dda.materials.interpolation import TabulatedPermittivity
from dda.materials.material import Material
from dda.materials.names import SHORT_NAMES
from dda.materials.resolve import find

_DEFAULT_NM = (400.0, 800.0)
_BLUE, _ORANGE = "#0072B2", "#D55E00"  # told apart without colour vision (Okabe & Ito 2008)


def listing() -> str:
    """Table of the short names with their range, page, aliases and remark, a line each.

    >>> print(listing().splitlines()[1].split()[:4])
    ['gold', '187.9', '-', '1937']
    """
    lines = [f"{'name':<20}{'range (nm)':>17}  {'page':<42}also called; remark"]
    for entry in SHORT_NAMES.values():
        low, high = find(entry.name).range_nm or (0.0, np.inf)
        remark = "; ".join(filter(None, [", ".join(entry.aliases), entry.note]))
        span = f"{low:,.4g} - {high:,.0f}".replace(",", "")
        lines.append(f"{entry.name:<20}{span:>17}  {entry.page:<42}{remark}".rstrip())
    lines.append(f"{'vacuum':<20}{'any':>17}")
    return "\n".join(lines)


def describe(material: Material, wavelengths: ArrayLike | None = None) -> str:
    """Name, source, range, remarks and a table of n, k and eps.

    Parameters
    ----------
    material : what to describe.
    wavelengths : vacuum wavelengths in nm; by default `default_wavelengths`, nine of them.

    Examples
    --------
    >>> from dda.materials import find
    >>> print(describe(find(1.5), [500.0]))
    n = 1.5
      source  a constant of the user
      range   any wavelength
    <BLANKLINE>
      wavelength (nm)           n           k      Re eps      Im eps
                500.0      1.5000           0       2.250           0
    """
    chosen = default_wavelengths(material, 9) if wavelengths is None else wavelengths
    wavelength = np.atleast_1d(np.asarray(chosen, dtype=float))
    eps, index = material.permittivity(wavelength), material.index(wavelength)
    low, high = material.range_nm or (0.0, np.inf)
    span = f"{low:.6g} to {high:.6g} nm" if material.range_nm else "any wavelength"
    lines = [material.name, *_wrapped("source", material.source), *_wrapped("range", span)]
    for note in material.notes:
        lines += _wrapped("note", note)
    lines += ["", f"  {'wavelength (nm)':>15}{'n':>12}{'k':>12}{'Re eps':>12}{'Im eps':>12}"]
    lines += [
        f"  {w:>15.1f}{i.real:>12.4f}{_small(i.imag):>12}{e.real:>12.3f}{_small(e.imag):>12}"
        for w, i, e in zip(wavelength, index, eps, strict=True)
    ]
    return "\n".join(lines)


def plot(material: Material, path: str | Path, wavelengths: ArrayLike | None = None) -> Path:
    """Draw n, k and eps over wavelength into a file.

    Parameters
    ----------
    material : what to draw; rows of its table, if it has one, are drawn as dots.
    path : the file; its suffix (.png, .pdf, .svg) decides the format.
    wavelengths : vacuum wavelengths in nm to draw at, or just the two ends; by default
        `default_wavelengths`.

    Returns
    -------
    Path
        The file written.
    """
    from matplotlib.figure import Figure

    wavelength = _drawn_at(material, wavelengths)
    index, eps = material.index(wavelength), material.permittivity(wavelength)
    figure = Figure(figsize=(8.0, 3.9), layout="constrained")
    panels = figure.subplots(1, 2)
    figure.suptitle(material.name, fontweight="bold")
    left = _panel(panels[0], "refractive index", wavelength, index, ("n", "k"))
    right = _panel(panels[1], "permittivity", wavelength, eps, ("Re ε", "Im ε"))
    rows = _rows_between(material, wavelength[0], wavelength[-1])
    if len(rows):
        _dots(left, rows, material.index(rows))
        _dots(right, rows, material.permittivity(rows))
    caption = textwrap.fill(f"Source: {material.source}", 150, max_lines=3, placeholder=" ...")
    figure.supxlabel(caption, fontsize=7, color="0.35", x=0.01, ha="left")
    try:
        figure.savefig(path, dpi=150)
    except (OSError, ValueError) as error:
        raise InputError(f"cannot write the figure '{path}': {error}") from None
    return Path(path)


def default_wavelengths(material: Material, count: int = 401) -> NDArray[np.float64]:
    """Wavelengths over the part of 400 to 800 nm the material is known in, or all of its range.

    >>> from dda.materials import find
    >>> default_wavelengths(find("titania-rutile"), 3).tolist()
    [430.0, 615.0, 800.0]
    """
    low, high = material.range_nm or _DEFAULT_NM
    start, stop = max(low, _DEFAULT_NM[0]), min(high, _DEFAULT_NM[1])
    if start > stop:
        start, stop = low, high
    return np.linspace(start, stop, count)


def _drawn_at(material: Material, wavelengths: ArrayLike | None) -> NDArray[np.float64]:
    if wavelengths is None:
        return default_wavelengths(material)
    given = np.sort(np.atleast_1d(np.asarray(wavelengths, dtype=float)))
    return np.linspace(given[0], given[-1], 401) if len(given) == 2 else given


def _rows_between(material: Material, low: float, high: float) -> NDArray[np.float64]:
    if not isinstance(material.model, TabulatedPermittivity):
        return np.empty(0)
    rows = np.asarray(material.model.wavelength_nm)
    rows = rows[(rows >= low) & (rows <= high)]
    return rows if len(rows) <= 80 else np.empty(0)  # a dense table needs no dots


def _panel(axes, title, wavelength, values, names):
    """Draw real and imaginary part; return the axes of either.

    A nearly lossless material gets a second axis for its tiny imaginary part, and no zero line:
    on one axis both curves would be flat. A lossless one is drawn by its real part alone.
    """
    tiny = bool(np.all(values.imag < 0.01 * values.real))
    lossless = not values.imag.any()
    second = axes.twinx() if tiny and not lossless else axes
    curves = axes.plot(wavelength, values.real, color=_BLUE)
    if lossless:
        title = f"{title} ({names[1]} = 0)"
    else:
        curves += second.plot(wavelength, values.imag, color=_ORANGE, linestyle="--")
    axes.set(xlabel="wavelength in vacuum (nm)", title=title, xlim=(wavelength[0], wavelength[-1]))
    axes.spines["top"].set_visible(False)
    if tiny or lossless:
        axes.set_ylabel(names[0], color=_BLUE)
    if lossless:
        axes.spines["right"].set_visible(False)
    elif tiny:
        second.spines["top"].set_visible(False)
        second.set_ylabel(names[1], color=_ORANGE)
        if np.all(values.imag > 0):
            second.set_yscale("log")
    else:
        axes.axhline(0.0, color="0.8", linewidth=0.8, zorder=0)
        axes.spines["right"].set_visible(False)
        axes.legend(curves, names, frameon=False)
    return axes, second


def _dots(pair, wavelength, values) -> None:
    pair[0].plot(wavelength, values.real, "o", color=_BLUE, markersize=3.5)
    pair[1].plot(wavelength, values.imag, "o", color=_ORANGE, markersize=3.5)


def _small(value: float) -> str:
    if value == 0:
        return "0"
    return f"{value:.4f}" if value >= 0.01 else f"{value:.2e}"


def _wrapped(label: str, text: str) -> list[str]:
    return textwrap.wrap(text, 96, initial_indent=f"  {label:<8}", subsequent_indent=" " * 10)
