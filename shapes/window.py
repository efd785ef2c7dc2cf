"""Weights that turn fine samples into what the ball window around a cell holds."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from itertools import permutations

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from .body import FloatArray, ShapeError
from .plane import plane_in_cube

MARGIN = 0.9  # samples beyond the ball's surface that may carry weight
DIRECTIONS = 100  # of the planes that the weights are fitted to
OFFSETS_PER_SAMPLE = 3
ALIGNED = 9  # weight of planes along the lattice: facets often are, and they are the hardest
RIDGE = 1e-7
MIXED = ((0, 0), (1, 1), (2, 2), (0, 1), (0, 2), (1, 2))


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

    The weights are the least-squares solution of: every plane, in all directions and at all
    distances, sampled as exact fractions of the sample voxels, gives its closed-form fraction of
    the ball, and the derivatives of that. A ball's own weights would be wider than the ball, since
    samples are averages; fitted weights undo that.

    Raises
    ------
    ShapeError
        If the window is narrower than a cell or has too few samples.
    """
    if not 1.0 <= width <= 8.0:
        raise ShapeError(f"window = {width:g} must lie between 1 and 8 cells; 2.2 suits most")
    if not 2 <= samples <= 16:
        raise ShapeError(f"samples = {samples} must lie between 2 and 16 a cell edge; 4 suits most")
    radius = width * samples / 2
    places = _places(radius, samples)
    normals = _normals()
    reach = radius + 1
    distances = np.linspace(-reach, reach, int(2 * reach * OFFSETS_PER_SAMPLE) + 1)
    along = normals @ places.T
    rows = np.array([plane_in_cube(t + along, normals) for t in distances])  # (t, direction, q)
    t = np.clip(distances / radius, -1.0, 1.0)[:, None]
    value = plane_fraction(distances, 2 * radius)[:, None] + 0 * normals[None, :, 0]
    slope = 0.75 / radius * (1 - t**2)
    bend = -1.5 / radius**2 * t * (np.abs(t) < 1)
    fraction = _fit(rows, value, places, ())
    fraction /= fraction.sum()
    rows_of_weights = [fraction]
    for k in range(3):
        rows_of_weights.append(_fit(rows, slope * normals[:, k], places, (k,)) * samples)
    for i, j in MIXED:
        second = _fit(rows, bend * normals[:, i] * normals[:, j], places, (i, j)) * samples**2
        rows_of_weights.append(second - fraction * second.sum())
    fitted = _symmetric(np.array(rows_of_weights), places)
    offsets = np.round(places + (samples - 1) / 2).astype(np.int64)
    beyond = max(int(-offsets.min()), int(offsets.max()) - samples + 1)
    return Window(offsets, fitted, -(-beyond // samples))


def _symmetric(weights: FloatArray, places: FloatArray) -> FloatArray:
    """Mean over the six orders of the axes: the planes fitted to would tell x from z."""
    labels = [(), (0,), (1,), (2,), *MIXED]
    row = {label: i for i, label in enumerate(labels)}
    at = {tuple(place): i for i, place in enumerate(places)}
    out = np.zeros_like(weights)
    for order in permutations(range(3)):
        image = [at[tuple(place)] for place in places[:, order]]
        for i, label in enumerate(labels):
            moved = tuple(sorted(order.index(axis) for axis in label))
            out[row[moved], image] += weights[i] / 6
    return out


def plane_fraction(distance: FloatArray, width: float) -> FloatArray:
    """Fraction of a ball of diameter `width` on the inner side of a plane at signed `distance`.

    >>> plane_fraction(np.array([-1.1, 0.0, 1.1]), 2.2)
    array([0. , 0.5, 1. ])
    """
    t = np.clip(2 * np.asarray(distance) / width, -1.0, 1.0)
    return 0.5 + 0.75 * t - 0.25 * t**3


def _places(radius: float, samples: int) -> FloatArray:
    """Sample centres that may carry weight, relative to a cell's centre, (q, 3) samples."""
    odd = samples % 2
    count = int(np.ceil(radius + MARGIN))
    line = np.arange(-count, count + odd, dtype=float) + (0.0 if odd else 0.5)
    grid = np.stack(np.meshgrid(line, line, line, indexing="ij"), axis=-1).reshape(-1, 3)
    return grid[np.linalg.norm(grid, axis=1) < radius + MARGIN]


def _normals() -> FloatArray:
    """Directions over an octant (the weights have the cube's symmetry), (n, 3)."""
    k = np.arange(DIRECTIONS) + 0.5
    z = 1 - k / DIRECTIONS
    turn = k * np.pi * (3 - np.sqrt(5))
    across = np.sqrt(1 - z**2)
    spread = np.abs(np.stack([across * np.cos(turn), across * np.sin(turn), z], axis=1))
    diagonal = (np.ones((3, 3)) - np.eye(3)) / np.sqrt(2)
    return np.concatenate([spread, *([np.eye(3)] * ALIGNED), *([diagonal] * 3)])


def _fit(
    rows: FloatArray, target: FloatArray, places: FloatArray, odd: tuple[int, ...]
) -> FloatArray:
    """Least-squares weights, odd in the axes that `odd` lists once, equal in equivalent places."""
    signed = [k for k in odd if odd.count(k) == 1]
    alone = sorted(set(odd)) if len(set(odd)) == 1 else []
    paired = sorted(set(odd)) if len(set(odd)) == 2 else []
    rest = [k for k in range(3) if k not in odd]
    size = np.abs(places)
    key = np.concatenate(
        [np.sort(size[:, group], axis=1) for group in (alone, paired, rest)], axis=1
    )
    _, orbit = np.unique(key, axis=0, return_inverse=True)
    sign = np.prod(np.sign(places[:, signed]), axis=1)
    length = np.sqrt(np.bincount(orbit.ravel(), sign**2))[orbit.ravel()]
    used = np.nonzero(sign)[0]
    _, column = np.unique(orbit.ravel()[used], return_inverse=True)
    basis = csr_array((sign[used] / length[used], (used, column)), (len(places), column.max() + 1))
    matrix = (basis.T @ rows.reshape(-1, len(places)).T).T
    normal = matrix.T @ matrix + RIDGE * len(matrix) * np.eye(matrix.shape[1])
    return basis @ np.linalg.solve(normal, matrix.T @ target.ravel())
