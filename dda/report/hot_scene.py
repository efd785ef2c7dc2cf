"""Hot spots in three dimensions: a surface coloured by |E|^2, seen from two sides."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np

from dda.errors import InputError
from dda.report.colours import INK
from dda.report.figures import save
from dda.report.near_folder import SURFACE
from dda.report.near_hdf5 import StoredSurface, read_surfaces
from dda.report.scene import EYE, UP, View, drawing, render
from dda.report.sheet import scale_bar, triad

#: Perceptually uniform, and readable in grey.
COLOURS = "inferno"
#: Above this ratio of the largest to the median value the colours are logarithmic.
_STEEP = 30.0


def draw_hot_spots(folder: Path, out: Path | None = None) -> list[Path]:
    """Draw the surfaces of a run's near field, a PNG file each.

    Parameters
    ----------
    folder : Path
        Of a run with ``[near_field]``.
    out : Path, optional
        The file; the wavelength is added to its name where there are several. By default
        ``hot_spots_WAVELENGTH.png`` in the folder.

    Returns
    -------
    list of Path
        What has been written.

    Raises
    ------
    InputError
        The folder holds no near field.
    ComputationError
        This machine cannot draw three-dimensional pictures.
    """
    stored = folder / SURFACE
    if not stored.exists():
        inside = sorted(path.parent for path in folder.glob(f"near/*/{SURFACE}"))
        if inside:
            raise InputError(
                f"{folder}: holds near fields of {len(inside)} combinations; give one of them, "
                f'such as "{inside[0]}"'
            )
        raise InputError(
            f"{folder}: holds no near field ({SURFACE}); run a study with a [near_field] table, "
            "or give a study file to look at its particle"
        )
    written = []
    surfaces = read_surfaces(stored)
    for surface in surfaces:
        path = folder / f"hot_spots_{surface.wavelength:g}.png"
        if out is not None:
            several = f"_{surface.wavelength:g}" if len(surfaces) > 1 else ""
            path = out.with_name(f"{out.stem}{several}{out.suffix or '.png'}")
        _draw(path, surface)
        written.append(path)
    return written


def _draw(path: Path, surface: StoredSurface) -> None:
    from matplotlib.cm import ScalarMappable
    from matplotlib.colors import LogNorm, Normalize
    from matplotlib.figure import Figure

    low, high = float(surface.e2.min()), float(surface.e2.max())
    steep = high > _STEEP * max(float(np.median(surface.e2)), 1e-300)
    norm: Any = LogNorm(max(low, high * 1e-4), high) if steep else Normalize(0, high)
    shades = ScalarMappable(norm, COLOURS)
    front, back = (_view(surface, eye) for eye in (EYE, EYE * (-1, -1, 1)))
    with drawing() as pyvista:
        mesh = _mesh(pyvista, surface)
        mesh.cell_data["shade"] = shades.to_rgba(surface.e2, bytes=True)[:, :3]

        def fill(plotter: Any) -> None:
            # Without lights: shading would change the colours that the bar explains.
            plotter.add_mesh(mesh, scalars="shade", rgb=True, lighting=False)

        pictures = [render(pyvista, view, fill) for view in (front, back)]
    figure = Figure(figsize=(10.8, 5.6))
    figure.text(0.02, 0.955, surface.title, fontsize=13, color=INK, va="center")
    note = f"{surface.wavelength:g} nm; {surface.height:.3g} nm over the particle's surface"
    figure.text(0.02, 0.04, note, fontsize=10, color=INK)
    for n, (picture, view) in enumerate(zip(pictures, (front, back), strict=True)):
        axes = figure.add_axes((0.01 + 0.45 * n, 0.08, 0.44, 0.83))
        axes.imshow(picture, extent=(-1, 1, -1, 1), interpolation="antialiased")
        axes.set_axis_off()
        scale_bar(axes, view)
        triad(axes, view)
    bar = figure.add_axes((0.925, 0.16, 0.018, 0.68))
    figure.colorbar(shades, cax=bar)
    bar.set_title("|E|² / |E₀|²", fontsize=10, pad=10)
    save(figure, path)


def _mesh(pyvista: Any, surface: StoredSurface) -> Any:
    count = len(surface.corners)
    faces = np.column_stack([np.full(count, 4), np.arange(4 * count).reshape(count, 4)])
    return pyvista.PolyData(surface.corners.reshape(-1, 3), faces.ravel())


def _view(surface: StoredSurface, eye: np.ndarray) -> View:
    """A view from `eye` that holds the whole surface; the same scale from all sides."""
    corners = surface.corners.reshape(-1, 3)
    centre = (corners.min(axis=0) + corners.max(axis=0)) / 2
    right = np.cross(UP, eye)
    right /= np.linalg.norm(right)
    radius = float(np.linalg.norm(corners - centre, axis=1).max())
    return View(centre, 1.18 * radius, right, np.cross(eye, right))
