"""Regions to look at near fields in: planes, boxes, lines, points of a table."""

from __future__ import annotations

import csv
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from ..errors import InputError

_AXES = {"x": 0, "y": 1, "z": 2}
_COLUMNS = ("x_nm", "y_nm", "z_nm")
_MOST_POINTS = 100_000_000


@dataclass(frozen=True, eq=False)
class Region:
    """Points and how they are arranged.

    Attributes
    ----------
    kind : {"plane", "box", "line", "points"}
    points : ndarray, shape (n, 3)
        nm, relative to the particle's centre; C order of `shape`.
    shape : tuple of int
        Numbers of points along the region's axes: (a, b), (nx, ny, nz), (n,).
    axes : tuple of ndarray
        Coordinates along each, nm; for a line the distance from its start; empty for points.
    names : tuple of str
        Of the axes, such as ("x", "z").
    step : float
        Distance between neighbours, nm; NaN for points.
    """

    kind: str
    points: np.ndarray
    shape: tuple[int, ...]
    axes: tuple[np.ndarray, ...]
    names: tuple[str, ...]
    step: float

    @property
    def cell(self) -> float:
        """Length, area or volume that a point stands for, in nm to the power of the axes."""
        return self.step ** len(self.shape)


def plane(
    normal: str, size: tuple[float, float], step: float, centre: tuple[float, float, float]
) -> Region:
    """A rectangle across an axis.

    Parameters
    ----------
    normal : {"x", "y", "z"}
    size : (a, b)
        Edges along the two other axes, in the order x, y, z, nm.
    step : float
        nm.
    centre : (x, y, z)
        nm, relative to the particle's centre.

    Examples
    --------
    >>> region = plane("y", size=(4, 2), step=1, centre=(0, 5, 0))
    >>> region.shape, region.names, region.points[0].tolist()
    ((5, 3), ('x', 'z'), [-2.0, 5.0, -1.0])
    """
    if normal not in _AXES:
        raise InputError(f'normal = "{normal}" must be "x", "y" or "z"')
    across = _AXES[normal]
    along = [i for i in range(3) if i != across]
    a, b = (_ticks(size[n], step, centre[i]) for n, i in enumerate(along))
    _refuse_too_many(len(a) * len(b))
    grid = np.empty((len(a), len(b), 3))
    grid[..., along[0]] = a[:, None]
    grid[..., along[1]] = b[None]
    grid[..., across] = centre[across]
    names = tuple("xyz"[i] for i in along)
    return Region("plane", grid.reshape(-1, 3), (len(a), len(b)), (a, b), names, float(step))


def box(
    size: tuple[float, float, float], step: float, centre: tuple[float, float, float] = (0, 0, 0)
) -> Region:
    """A box with the edges `size` around `centre`, all in nm.

    >>> box((2, 2, 4), step=2).shape
    (2, 2, 3)
    """
    axes = tuple(_ticks(edge, step, c) for edge, c in zip(size, centre, strict=True))
    shape = tuple(len(a) for a in axes)
    _refuse_too_many(int(np.prod(shape)))
    grid = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1)
    return Region("box", grid.reshape(-1, 3), shape, axes, ("x", "y", "z"), float(step))


def line(start, end, step: float) -> Region:
    """Points from `start` to `end` (x, y, z in nm), `step` nm apart or a little closer.

    >>> line((0, 0, 10), (0, 0, 13), step=1).points[:, 2].tolist()
    [10.0, 11.0, 12.0, 13.0]
    """
    a, b = np.asarray(start, float), np.asarray(end, float)
    length = float(np.linalg.norm(b - a))
    if not (length > 0 and step > 0):
        raise InputError("a line needs two different ends and a step greater than 0 (nm)")
    count = int(np.ceil(length / step - 1e-9)) + 1
    _refuse_too_many(count)
    t = np.linspace(0, 1, count)
    distance = t * length
    return Region(
        "line", a + t[:, None] * (b - a), (count,), (distance,), ("distance",), length / (count - 1)
    )


def read_points(path: str | Path) -> Region:
    """Points of a CSV file with the columns x_nm, y_nm, z_nm, origin at the particle's centre.

    Raises
    ------
    InputError
        If the file cannot be read or a row is not three numbers; the message gives the line.
    """
    try:
        with open(path, newline="", encoding="utf-8-sig") as file:
            rows = list(csv.reader(file))
    except (OSError, UnicodeDecodeError) as error:
        raise InputError(f"points file {path} cannot be read: {error}") from error
    header = [name.strip() for name in rows[0]] if rows else []
    missing = [name for name in _COLUMNS if name not in header]
    if missing:
        raise InputError(
            f"points file {path} has no column {', '.join(missing)}: its first line must name "
            "the columns x_nm, y_nm, z_nm"
        )
    chosen = [header.index(name) for name in _COLUMNS]
    points = []
    for number, row in enumerate(rows[1:], start=2):
        if not any(cell.strip() for cell in row):
            continue
        try:
            point = [float(row[i]) for i in chosen]
        except (ValueError, IndexError) as error:
            raise InputError(f"points file {path}, line {number}: {row} is not a point") from error
        if not np.isfinite(point).all():
            raise InputError(f"points file {path}, line {number}: coordinates must be finite")
        points.append(point)
    if not points:
        raise InputError(f"points file {path} holds no points")
    return Region("points", np.array(points), (len(points),), (), (), float("nan"))


def _ticks(size: float, step: float, centre: float) -> np.ndarray:
    """Places `step` apart, symmetric about `centre`, within `size`."""
    if not (np.isfinite([size, step, centre]).all() and size > 0 and step > 0):
        raise InputError(f"size = {size} and step = {step} must be lengths greater than 0 (nm)")
    count = int(np.floor(size / step + 1e-9)) + 1
    return centre + step * (np.arange(count) - (count - 1) / 2)


def _refuse_too_many(count: int) -> None:
    if count > _MOST_POINTS:
        raise InputError(f"{count} points are too many: use a larger step or a smaller region")
