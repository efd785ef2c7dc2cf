"""Pictures of a particle: its surface and its cells side by side."""

from __future__ import annotations

import contextlib
import ctypes
import os
import sys
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

import shapes
from dda.errors import ComputationError, InputError
from dda.report.colours import BACKGROUND, INK, material_colours, rgb

#: Samples across the largest extent from which the surface is drawn.
SURFACE_SAMPLES = 140
#: Standard deviation of the smoothing of the drawn surface, in samples.
SMOOTHING = 0.9
#: Edges of cells are drawn up to this many cells across.
MOST_EDGES = 48
#: Where the eye is, seen from the particle.
EYE = np.array([1.0, -1.35, 0.8]) / np.linalg.norm([1.0, -1.35, 0.8])
UP = np.array([0.0, 0.0, 1.0])
_PIXELS = 1000


@dataclass(frozen=True)
class View:
    """What maps nm to the pixels of a rendered picture (parallel projection).

    ``half_height`` is half the height of the picture in nm, ``right`` and ``up`` the unit vectors
    of its axes.
    """

    centre: NDArray
    half_height: float
    right: NDArray
    up: NDArray


def draw_particle(
    path: Path, particle: shapes.Particle, cells: shapes.Cells, title: str, cut: bool | None = None
) -> None:
    """Draw a particle's surface and its cells side by side into a PNG file.

    Cells are the paler, the less of them is filled. A particle of several materials is drawn with
    the quarter that faces the eye cut away.

    Parameters
    ----------
    path : Path
        The PNG file; one that exists is replaced.
    particle : shapes.Particle
    cells : shapes.Cells
        From ``shapes.voxelize(particle, ...)``.
    title : str
    cut : bool, optional
        Whether to cut the quarter away; by default when there are several materials.

    Raises
    ------
    ComputationError
        This machine cannot draw three-dimensional pictures; the message says what is missing.
    """
    from dda.report.sheet import lay_out

    cut = len(particle.materials) > 1 if cut is None else cut
    colours = material_colours(particle.materials)
    view = view_of(cells)
    with drawing() as pyvista:
        surface = surface_picture(pyvista, particle, colours, view, cut)
        blocks = render(pyvista, view, lambda p: _add_cells(p, cells, colours, cut))
    lay_out(path, (surface, blocks), view, particle, cells, colours, title, cut)


def show_particle(particle: shapes.Particle, cells: shapes.Cells, title: str) -> None:
    """Open a window with the particle's surface and its cells, to be turned with the mouse.

    Raises
    ------
    InputError
        There is no display to open a window on.
    """
    if sys.platform == "linux" and not os.environ.get("DISPLAY"):
        raise InputError(
            "there is no display to open a window on; without --window a file is drawn"
        )
    cut = len(particle.materials) > 1
    colours = material_colours(particle.materials)
    with drawing() as pyvista:
        plotter = pyvista.Plotter(shape=(1, 2), title=title, window_size=(1400, 750))
        plotter.subplot(0, 0)
        _add_surface(plotter, particle, colours, cut)
        plotter.show_bounds(xtitle="x (nm)", ytitle="y (nm)", ztitle="z (nm)", font_size=9)
        plotter.subplot(0, 1)
        _add_cells(plotter, cells, colours, cut)
        plotter.add_legend([[name, colour] for name, colour in colours.items()], bcolor=None)
        plotter.add_text(f"{cells.n} cells of {cells.spacing:.3g} nm", font_size=10)
        plotter.link_views()
        plotter.show()


def surface_picture(
    pyvista: Any, particle: shapes.Particle, colours: dict[str, str], view: View, cut: bool
) -> NDArray[np.uint8]:
    """Return a square picture of a particle's surface, (pixels, pixels, 3)."""
    return render(pyvista, view, lambda p: _add_surface(p, particle, colours, cut))


def view_of(cells: shapes.Cells) -> View:
    """Return a view from the standard side that holds all cells and fills the picture."""
    right = np.cross(UP, EYE)
    right /= np.linalg.norm(right)
    up = np.cross(EYE, right)
    places = cells.positions @ np.stack([right, up], axis=1)
    low, high = places.min(axis=0) - cells.spacing, places.max(axis=0) + cells.spacing
    depth = EYE * float((cells.positions @ EYE).mean())
    centre = depth + np.stack([right, up], axis=1) @ ((low + high) / 2)
    return View(centre, 0.5 * 1.18 * float((high - low).max()), right, up)


@contextlib.contextmanager
def drawing() -> Iterator[Any]:
    """Give pyvista, and turn what goes wrong in the graphics libraries into a clear message."""
    if sys.platform == "linux" and not os.environ.get("DISPLAY"):
        # Otherwise VTK tries the X server first and complains about it.
        os.environ.setdefault("VTK_DEFAULT_OPENGL_WINDOW", "vtkEGLRenderWindow")
    try:
        import pyvista

        _require_opengl()
        yield pyvista
    except (ImportError, RuntimeError, OSError) as error:
        raise ComputationError(
            f"three-dimensional pictures cannot be drawn here: {error}. They need the OpenGL "
            "libraries of the system (Debian, Ubuntu: apt-get install libgl1 libegl1 "
            "libegl-mesa0 libgl1-mesa-dri libxrender1)"
        ) from error


def _require_opengl() -> None:
    """Raise OSError where VTK would crash: it found no OpenGL and its last resort is missing."""
    import vtkmodules.vtkRenderingOpenGL2  # noqa: F401  (registers the kinds of window)
    from vtkmodules.vtkCommonCore import vtkLogger
    from vtkmodules.vtkRenderingCore import vtkRenderWindow

    vtkLogger.SetStderrVerbosity(vtkLogger.VERBOSITY_OFF)
    if vtkRenderWindow().GetClassName() != "vtkOSOpenGLRenderWindow":
        return
    for name in ("libOSMesa.so.8", "libOSMesa.so.6", "libOSMesa.so"):
        with contextlib.suppress(OSError):
            ctypes.CDLL(name)
            return
    raise OSError("no OpenGL was found")


def surface_meshes(
    particle: shapes.Particle, cut: bool = False, samples: int = SURFACE_SAMPLES
) -> dict[str, Any]:
    """Return the surface of every material as a pyvista mesh, in nm.

    With ``cut`` the quarter x > centre, y < centre is taken away and the sections are closed.
    """
    import pyvista
    from scipy.ndimage import gaussian_filter

    low, high = (np.asarray(b, float) for b in particle.bounds)
    step = float((high - low).max()) / samples
    counts = np.ceil((high - low) / step).astype(int) + 8
    origin = (low + high) / 2 - step * (counts - 1) / 2
    grid = shapes.SampleGrid(origin=origin, step=step, shape=tuple(int(c) for c in counts))
    filled = {name: np.zeros(grid.shape, np.float32) for name in particle.materials}
    for part in particle.parts:
        new = part.body.fill(grid)
        for field in filled.values():
            field *= 1 - new
        if part.material is not None:
            filled[part.material] += new
    if cut:
        kept = 1 - _quarter(origin, step, grid.shape, (low + high) / 2)
        for field in filled.values():
            field *= kept
    image = pyvista.ImageData(dimensions=grid.shape, spacing=(step,) * 3, origin=tuple(origin))
    meshes = {}
    for name, field in filled.items():
        # Filled fractions change within a sample; spread over more, the contour has no ripple.
        image.point_data["filled"] = gaussian_filter(field, SMOOTHING).ravel(order="F")
        mesh = image.contour([0.5], scalars="filled")
        if mesh.n_points:
            meshes[name] = mesh
    return meshes


def _quarter(origin: NDArray, step: float, shape: tuple[int, ...], centre: NDArray) -> NDArray:
    """Return the share of each sample in the quarter that faces the eye, softened by a step."""
    x = np.clip(0.5 + (origin[0] + step * np.arange(shape[0]) - centre[0]) / step, 0, 1)
    y = np.clip(0.5 - (origin[1] + step * np.arange(shape[1]) - centre[1]) / step, 0, 1)
    return (x[:, None] * y[None, :])[:, :, None].astype(np.float32)


def _add_surface(
    plotter: Any, particle: shapes.Particle, colours: dict[str, str], cut: bool
) -> None:
    for name, mesh in surface_meshes(particle, cut).items():
        plotter.add_mesh(
            mesh,
            color=colours[name],
            smooth_shading=True,
            split_sharp_edges=True,
            feature_angle=35,
            specular=0.25,
            specular_power=20,
            ambient=0.18,
        )


def _add_cells(plotter: Any, cells: shapes.Cells, colours: dict[str, str], cut: bool) -> None:
    plotter.add_mesh(
        cell_mesh(cells, colours, cut),
        scalars="colour",
        rgb=True,
        show_edges=max(cells.shape) <= MOST_EDGES,
        edge_color=INK,
        line_width=0.6,
        ambient=0.25,
    )


def cell_mesh(cells: shapes.Cells, colours: dict[str, str], cut: bool = False) -> Any:
    """Return the outside of the occupied cells as a pyvista mesh, in nm, with colours.

    A cell has the colour of the material that fills most of its window, the paler the less of the
    cell is filled.
    """
    import pyvista

    index = np.asarray(cells.index)
    share = np.asarray(cells.fraction)
    # The window tells the material of cells that hold none of it themselves, too.
    most = np.asarray(cells.window).argmax(axis=1)
    hues = np.array([rgb(colours[name]) for name in cells.materials])[most]
    tone = (0.5 + 0.5 * np.clip(share.sum(axis=1), 0, 1))[:, None]
    tint = np.zeros((*cells.shape, 3))
    tint[tuple(index.T)] = tone * hues + (1 - tone)
    occupied = np.zeros(cells.shape, np.uint8)
    occupied[tuple(index.T)] = 1
    origin = np.asarray(cells.origin, float)
    if cut:
        x, y, _ = (origin[i] + cells.spacing * np.arange(cells.shape[i]) for i in range(3))
        middle = origin + cells.spacing * (np.array(cells.shape) - 1) / 2
        occupied[np.ix_(x > middle[0] + 1e-9, y < middle[1] - 1e-9)] = 0
    image = pyvista.ImageData(
        dimensions=tuple(n + 1 for n in cells.shape),
        spacing=(cells.spacing,) * 3,
        origin=tuple(origin - cells.spacing / 2),
    )
    image.cell_data["occupied"] = occupied.ravel(order="F")
    colour = (255 * tint).round().astype(np.uint8)
    image.cell_data["colour"] = colour.reshape(-1, 3, order="F")
    return image.threshold(0.5, scalars="occupied").extract_surface(algorithm=None)


def render(pyvista: Any, view: View, fill: Any) -> NDArray[np.uint8]:
    """Return a square picture, (pixels, pixels, 3), of what ``fill`` puts on a plotter."""
    plotter = pyvista.Plotter(off_screen=True, window_size=(_PIXELS, _PIXELS))
    with contextlib.closing(plotter):
        plotter.set_background(BACKGROUND)
        fill(plotter)
        plotter.enable_parallel_projection()
        distance = 10 * view.half_height
        eye = np.cross(view.right, view.up)
        plotter.camera_position = (view.centre + distance * eye, view.centre, UP)
        plotter.camera.parallel_scale = view.half_height
        plotter.reset_camera_clipping_range()
        plotter.enable_anti_aliasing("ssaa")
        return np.asarray(plotter.screenshot(return_img=True))[:, :, :3]
