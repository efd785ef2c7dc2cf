"""A map of the near field in a plane, as a figure for a paper."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import numpy as np

from dda.report.figures import save
from dda.response.near_points import Region
from dda.response.outer_distance import outer_distance
from shapes import Particle
from shapes.body import SampleGrid
from shapes.measure import occupied

#: Lengths that a scale bar may have, in units of a power of ten.
_ROUND = (1.0, 2.0, 5.0)
#: Above this ratio of the largest to the median value the colours are logarithmic.
_STEEP = 30.0


def draw_field_map(
    path: Path,
    region: Region,
    values: np.ndarray,
    *,
    particle: Particle | None = None,
    trusted: np.ndarray | None = None,
    label: str = "|E|² / |E₀|²",
    title: str = "",
    logarithmic: bool | None = None,
) -> None:
    """Draw values on a plane into a PNG file, with the particle's outline and a scale bar.

    Parameters
    ----------
    path : Path
        The PNG file; one that exists is replaced.
    region : Region
        A plane of `dda.response.near_points.plane`.
    values : ndarray, shape (n,)
        One a point, e.g. ``|E|^2``.
    particle : shapes.Particle, optional
        Its outline is drawn where the plane cuts it.
    trusted : ndarray of bool, shape (n,), optional
        Points where it is False are dotted.
    label : str
        Of the colour bar.
    title : str
    logarithmic : bool, optional
        Colours by the logarithm; by default if the values span much.
    """
    from matplotlib.colors import LogNorm, Normalize
    from matplotlib.figure import Figure

    if region.kind != "plane":
        raise ValueError(f"a field map needs a plane, not a {region.kind}")
    a, b = region.axes
    image = np.asarray(values, float).reshape(region.shape).T
    width = float(a[-1] - a[0] + region.step)
    height = float(b[-1] - b[0] + region.step)
    wide = 5.6 * min(1.0, width / height) + 1.6
    high = 5.6 * min(1.0, height / width) + 0.9
    figure = Figure(figsize=(max(3.6, wide), max(2.6, high)), layout="compressed")
    axes = figure.add_subplot()
    top = float(image.max())
    if logarithmic is None:
        logarithmic = top > _STEEP * max(float(np.median(image)), 1e-300)
    # four decades show more than enough; zeros of the field would take all of the scale
    norm: Any = Normalize(0, top)
    if logarithmic:
        norm = LogNorm(max(float(image.min()), top * 1e-4), top)
    half = region.step / 2
    extent = (a[0] - half, a[-1] + half, b[0] - half, b[-1] + half)
    shown = axes.imshow(
        image, origin="lower", extent=extent, cmap="inferno", norm=norm, interpolation="nearest"
    )
    figure.colorbar(shown, ax=axes, label=label, fraction=0.05, pad=0.02)
    if trusted is not None:
        _dot_untrusted(axes, region, ~np.asarray(trusted))
    if particle is not None:
        _outline(axes, region, particle)
    _scale_bar(axes, extent)
    axes.set_xlabel(f"{region.names[0]} (nm)")
    axes.set_ylabel(f"{region.names[1]} (nm)")
    if title:
        axes.set_title(title, loc="left", fontsize=11)
    save(figure, path)


def outline_values(region: Region, particle: Particle) -> np.ndarray:
    """A function on the plane's points that is positive inside the particle, region's shape."""
    centre = np.add(*particle.bounds) / 2
    points = region.points + centre
    distance = outer_distance(particle, points)
    if distance is not None:
        return distance.reshape(region.shape)
    across = int(np.argmin(np.ptp(points, axis=0)))
    shape = [1, 1, 1]
    for axis, count in zip((i for i in range(3) if i != across), region.shape, strict=True):
        shape[axis] = count
    grid = SampleGrid(points[0], region.step, tuple(shape))
    return occupied(particle, grid).reshape(region.shape) - 0.5


def scale_bar(width: float) -> float:
    """A round length of about a fifth of a picture `width` wide.

    >>> scale_bar(130.0), scale_bar(260.0), scale_bar(9.0)
    (20.0, 50.0, 2.0)
    """
    power = 10.0 ** math.floor(math.log10(width / 5))
    return max(r * power for r in (*_ROUND, 10.0) if r * power <= width / 4)


def _outline(axes: Any, region: Region, particle: Particle) -> None:
    inside = outline_values(region, particle)
    if inside.max() <= 0 or inside.min() >= 0:
        return
    a, b = region.axes
    # a white line on a dark one is seen on every colour
    for colour, line in (("#000000", 2.2), ("#FFFFFF", 1.1)):
        axes.contour(a, b, inside.T, levels=[0.0], colors=colour, linewidths=line)


def _dot_untrusted(axes: Any, region: Region, doubtful: np.ndarray) -> None:
    if not doubtful.any():
        return
    a, b = region.axes
    # a dot about every 1/60 of the picture, so that the colours stay visible
    every = max(1, max(region.shape) // 60)
    chosen = doubtful.reshape(region.shape)[::every, ::every]
    i, j = np.nonzero(chosen)
    axes.plot(
        a[::every][i], b[::every][j], ".", color="#9FD8FF", ms=2.0, mew=0, label="error not known"
    )
    axes.legend(loc="upper right", fontsize=7, framealpha=0.7, markerscale=5)


def _scale_bar(axes: Any, extent: tuple[float, float, float, float]) -> None:
    from matplotlib.patches import Rectangle

    left, right, bottom, top = extent
    length = scale_bar(right - left)
    x, y = left + 0.05 * (right - left), bottom + 0.05 * (top - bottom)
    thick = 0.012 * (top - bottom)
    axes.add_patch(Rectangle((x, y), length, thick, color="#FFFFFF", ec="#000000", lw=0.5))
    axes.text(
        x + length / 2, y + 2 * thick, f"{length:g} nm", color="#FFFFFF", ha="center", va="bottom",
        fontsize=8, bbox={"facecolor": "#000000", "alpha": 0.45, "lw": 0, "pad": 1.5},
    )  # fmt: skip
