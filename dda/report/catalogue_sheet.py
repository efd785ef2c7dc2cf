"""One picture with every shape of the catalogue and its name."""

from __future__ import annotations

import math
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from numpy.typing import NDArray

import shapes
from dda.report.colours import INK, material_colours
from dda.report.figures import save
from dda.report.scene import View, drawing, surface_picture, view_of
from dda.report.sheet import round_length
from shapes import catalogue

#: Shapes in a row.
COLUMNS = 7
#: Cells across from which the place of the eye is found.
_CELLS = 12
#: Edge of a picture on the sheet, inches.
_EDGE = 1.45


def draw_sheet(path: Path, names: Sequence[str] | None = None) -> None:
    """Draw the examples of the whole catalogue into a PNG file.

    Parameters
    ----------
    path : Path
        The PNG file; one that exists is replaced.
    names : sequence of str, optional
        The shapes to draw; all by default.

    Raises
    ------
    ComputationError
        This machine cannot draw three-dimensional pictures; the message says what is missing.
    """
    from matplotlib.figure import Figure

    particles = {name: catalogue.example(name) for name in names or catalogue.entries}
    materials = dict.fromkeys(m for particle in particles.values() for m in particle.materials)
    colours = material_colours(list(materials))
    rows = math.ceil(len(particles) / COLUMNS)
    figure = Figure(figsize=(COLUMNS * _EDGE, rows * (_EDGE + 0.3) + 0.4))
    grid = figure.subplots(rows, COLUMNS, squeeze=False)
    for axes in grid.flat:
        axes.set_axis_off()
    for axes, (name, particle) in zip(grid.flat, particles.items(), strict=False):
        view = view_of(shapes.voxelize(particle, cells=_CELLS))
        cut = len(particle.materials) > 1 or name == "hollow"
        with drawing() as pyvista:
            _place(axes, name, surface_picture(pyvista, particle, colours, view, cut), view)
    _legend(figure, colours)
    figure.subplots_adjust(0.01, 0.01, 0.99, 1 - 0.6 / figure.get_figheight(), 0.04, 0.18)
    save(figure, path)


def _place(axes: Any, name: str, picture: NDArray, view: View) -> None:
    axes.imshow(picture, extent=(-1, 1, -1, 1), interpolation="antialiased")
    axes.set_title(name.replace("_", " "), fontsize=10, color=INK, pad=2)
    length = round_length(0.5 * view.half_height)
    width = length / view.half_height
    axes.plot([0.97 - width, 0.97], [-0.97, -0.97], color=INK, lw=1.5, solid_capstyle="butt")
    axes.text(0.97 - width / 2, -0.94, f"{length:g} nm", ha="center", va="bottom", fontsize=6)


def _legend(figure: Any, colours: dict[str, str]) -> None:
    from matplotlib.patches import Patch

    figure.legend(
        handles=[Patch(fc=colour, ec=INK, lw=0.6, label=name) for name, colour in colours.items()],
        loc="upper right",
        ncols=len(colours),
        frameon=False,
        fontsize=9,
    )
    top = 1 - 0.2 / figure.get_figheight()
    figure.text(0.01, top, "the catalogue of shapes", color=INK, fontsize=11)
