"""Weights that turn fine samples into the fraction, gradient and curvature of a phase in a ball window."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from .body import FloatArray, ShapeError


@dataclass(frozen=True, eq=False)
class Window:
    """Weights of the samples around a cell's centre.

    Attributes
    ----------
    offsets : (q, 3) int array
        Sample index relative to the cell's first sample.
    weights : (10, q) array
        For the fraction, its gradient (x, y, z) in 1/cell and its second derivatives
        (xx, yy, zz, xy, xz, yz) in 1/cell^2.
    halo : int
        Number of neighbouring cells that the window reaches into.
    """

    offsets: NDArray[np.int64]
    weights: FloatArray
    halo: int


@lru_cache(maxsize=16)
def ball_window(width: float = 2.2, samples: int = 4) -> Window:
    """Weights for a ball of diameter `width` cells, `samples` samples a cell edge.

    Samples are averages over a voxel and so are the weights, which widens the ball by the variance of two voxels: the
    ball is made smaller by as much, so that a plane gets the fraction it has in the ball itself.

    Raises
    ------
    ShapeError
        If the window is narrower than a cell or has too few samples.
    """
    if not 1.0 <= width <= 8.0:
        raise ShapeError(
            f"window = {width:g} must lie between 1 and 8 cells; 2.2 suits most particles"
        )
    if not 2 <= samples <= 16:
        raise ShapeError(
            f"samples = {samples} must lie between 2 and 16 per cell edge; 4 suits most"
        )
    wanted = (width * samples) ** 2 / 20 - 1 / 12  # variance left for the weights, in samples^2
    radius = width * samples / 2
    for _ in range(30):
        coordinates, ball = _ball(radius, samples)
        variance = float((ball.sum(axis=(1, 2)) * coordinates**2).sum())
        radius *= (wanted / variance) ** 0.5
    coordinates, ball = _ball(radius, samples)
    half = [
        (_shifted(radius, samples, k, 0.5) - _shifted(radius, samples, k, -0.5)) for k in range(3)
    ]
    x, y, z = np.meshgrid(coordinates, coordinates, coordinates, indexing="ij")
    rows = [ball]
    for k, position in enumerate((x, y, z)):
        slope = half[k]
        rows.append(slope / (slope * position).sum() * samples)
    for k, position in enumerate((x, y, z)):
        bend = _shifted(radius, samples, k, 1.0) - 2 * ball + _shifted(radius, samples, k, -1.0)
        bend = bend - ball * bend.sum()
        rows.append(bend / (bend * position**2).sum() * 2 * samples**2)
    for (i, first), (j, second) in (((0, x), (1, y)), ((0, x), (2, z)), ((1, y), (2, z))):
        cross = sum(
            si * sj * _shifted_two(radius, samples, i, si * 0.5, j, sj * 0.5)
            for si in (1, -1)
            for sj in (1, -1)
        )
        rows.append(cross / (cross * first * second).sum() * samples**2)
    stack = np.array(rows)
    used = np.any(np.abs(stack) > 1e-12, axis=0)
    first = int(np.round(coordinates[0] + (samples - 1) / 2))
    offsets = np.stack(np.nonzero(used), axis=1) + first
    halo = int(max(-offsets.min(), offsets.max() - samples + 1) + samples - 1) // samples
    return Window(offsets.astype(np.int64), np.ascontiguousarray(stack[:, used]), halo)


def plane_fraction(distance: FloatArray, width: float) -> FloatArray:
    """Fraction of a ball of diameter `width` on the inner side of a plane at signed `distance`.

    >>> plane_fraction(np.array([-1.1, 0.0, 1.1]), 2.2)
    array([0. , 0.5, 1. ])
    """
    t = np.clip(2 * np.asarray(distance) / width, -1.0, 1.0)
    return 0.5 + 0.75 * t - 0.25 * t**3


def _ball(radius: float, samples: int) -> tuple[FloatArray, FloatArray]:
    """Coordinates of the samples along an axis and the share of the ball in every sample voxel."""
    coordinates = _coordinates(radius, samples)
    share = _share(radius, coordinates, np.zeros(3))
    return coordinates, share / share.sum()


def _shifted(radius: float, samples: int, axis: int, shift: float) -> FloatArray:
    """The ball's weights if its centre is moved by `shift` samples along `axis`."""
    centre = np.zeros(3)
    centre[axis] = shift
    share = _share(radius, _coordinates(radius, samples), centre)
    return share / share.sum()


def _shifted_two(
    radius: float, samples: int, i: int, shift_i: float, j: int, shift_j: float
) -> FloatArray:
    centre = np.zeros(3)
    centre[i], centre[j] = shift_i, shift_j
    share = _share(radius, _coordinates(radius, samples), centre)
    return share / share.sum()


def _coordinates(radius: float, samples: int) -> FloatArray:
    """Sample centres about a cell's centre that a ball of `radius` (samples), moved by one, reaches."""
    odd = samples % 2
    count = int(np.ceil(radius + 1.5))
    return np.arange(-count, count + odd) + (0.0 if odd else 0.5)


def _share(radius: float, coordinates: FloatArray, centre: FloatArray, fine: int = 8) -> FloatArray:
    """Volume of the ball in every sample voxel, by a sum over fine^3 points with a smooth edge."""
    sub = (np.arange(fine) + 0.5) / fine - 0.5
    squares = [((coordinates - c)[:, None] + sub).ravel() ** 2 for c in centre]
    r = np.sqrt(squares[0][:, None, None] + squares[1][None, :, None] + squares[2][None, None, :])
    inside = np.clip(0.5 + (radius - r) * fine, 0.0, 1.0)
    n = len(coordinates)
    return inside.reshape(n, fine, n, fine, n, fine).mean(axis=(1, 3, 5))
