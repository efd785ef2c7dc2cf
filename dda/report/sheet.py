"""The sheet around two rendered pictures of a particle: labels, scale bar, axes, legend."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

import shapes
from dda.report.colours import INK
from dda.report.figures import save

if TYPE_CHECKING:
    from dda.report.scene import View


def lay_out(
    path: Path,
    pictures: tuple[NDArray, NDArray],
    view: View,
    particle: shapes.Particle,
    cells: shapes.Cells,
    colours: dict[str, str],
    title: str,
    cut: bool,
) -> None:
    """Write a PNG file with the surface on the left and the cells on the right."""
    from matplotlib.figure import Figure

    figure = Figure(figsize=(10, 5.9))
    figure.text(0.03, 0.95, title, fontsize=13, color=INK, va="center")
    notes = (surface_notes(particle, cut), cell_notes(cells, particle))
    for i, (picture, note) in enumerate(zip(pictures, notes, strict=True)):
        axes = figure.add_axes((0.02 + 0.49 * i, 0.12, 0.47, 0.78))
        axes.imshow(picture, extent=(-1, 1, -1, 1), interpolation="antialiased")
        axes.set_axis_off()
        figure.text(0.03 + 0.49 * i, 0.035, note, fontsize=9.5, color=INK, linespacing=1.5)
        scale_bar(axes, view)
        if i == 0:
            triad(axes, view)
    _legend(figure, colours)
    save(figure, path)


def surface_notes(particle: shapes.Particle, cut: bool) -> str:
    """Return the dimensions of a particle in words."""
    low, high = particle.bounds
    x, y, z = np.asarray(high) - np.asarray(low)
    lines = f"surface: {x:.4g} × {y:.4g} × {z:.4g} nm (x, y, z)"
    details = [f"volume {particle.volume():.4g} nm³"]
    if particle.gap is not None:
        details.append(f"gap {particle.gap:.3g} nm")
    if cut:
        details.append("a quarter cut away")
    return f"{lines}\n{', '.join(details)}"


def cell_notes(cells: shapes.Cells, particle: shapes.Particle) -> str:
    """Return the number and size of the cells in words, and the thinnest part in cells."""
    nx, ny, nz = cells.shape
    thin = cells.thinnest if cells.thinnest is not None else particle.thinnest
    known = (
        f"thinnest part {thin:.3g} nm = {thin / cells.spacing:.1f} cells"
        if thin is not None
        else "thinnest part not known"
    )
    return (
        f"{cells.n} cells of {cells.spacing:.3g} nm in a box of {nx} × {ny} × {nz}\n"
        f"{known}; paler cells are partly filled"
    )


def round_length(length: float) -> float:
    """Return the largest of 1, 2, 5 times a power of ten that is no longer than a length.

    >>> round_length(37.0), round_length(0.4)
    (20.0, 0.2)
    """
    power = 10.0 ** np.floor(np.log10(length))
    factor = max(f for f in (1, 2, 5) if f * power <= length * (1 + 1e-12))
    return float(factor * power)


def scale_bar(axes: Any, view: View) -> None:
    """Draw a bar of a round length into a rendered picture from -1 to 1."""
    length = round_length(0.5 * view.half_height)
    width = length / view.half_height
    axes.plot([0.92 - width, 0.92], [-0.95, -0.95], color=INK, lw=3, solid_capstyle="butt")
    axes.text(0.92 - width / 2, -0.92, f"{length:g} nm", ha="center", va="bottom", fontsize=9)


def triad(axes: Any, view: View) -> None:
    """Draw the directions of x, y and z as seen in the picture."""
    for name, direction in zip("xyz", np.eye(3), strict=True):
        arrow = 0.16 * np.array([direction @ view.right, direction @ view.up])
        start = np.array([-0.84, -0.84])
        axes.annotate(
            "",
            start + arrow,
            start,
            arrowprops={"arrowstyle": "-|>", "color": INK, "lw": 1, "shrinkA": 0, "shrinkB": 0},
        )
        axes.text(*(start + 1.35 * arrow), name, ha="center", va="center", fontsize=9, color=INK)


def _legend(figure: Any, colours: dict[str, str]) -> None:
    from matplotlib.patches import Patch

    figure.legend(
        handles=[Patch(fc=colour, ec=INK, lw=0.6, label=name) for name, colour in colours.items()],
        loc="upper right",
        bbox_to_anchor=(0.985, 0.985),
        ncols=min(4, len(colours)),
        frameon=False,
        fontsize=10,
    )
