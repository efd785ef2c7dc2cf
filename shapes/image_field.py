"""Smooth surfaces from labelled voxels, and their samples on any grid.

A voxel image of a particle is a staircase. Smoothed with a Gaussian, the indicator of a flat
interface is the normal distribution function of the distance, so the inverse of that function gives
the distance back, exactly for planes. A curved surface comes out too small by sigma^2 times its
mean curvature; the same with twice the variance is off by twice as much, so a straight line through
both removes the error.
"""

from __future__ import annotations

import numpy as np
from numba import njit, prange
from numpy.typing import NDArray
from scipy.ndimage import gaussian_filter
from scipy.optimize import brentq
from scipy.special import ndtr, ndtri

REACH = 2.2  # standard deviations over which the inverse of the distribution function is used
SATURATION = 1.3  # standard deviations: larger distances are given as this
CONFLICT = 0.25  # voxels: labelled centres this far on the wrong side show a feature lost


def distance_field(inside: NDArray[np.bool_], voxel: NDArray, smooth: float) -> tuple[NDArray, int]:
    """Signed distance from the smoothed surface of a set of voxels.

    Parameters
    ----------
    inside : (nx, ny, nz) bool
        Voxels that belong to the body; the outer layers must be empty.
    voxel : (3,)
        Edges of a voxel, nm.
    smooth : float
        Standard deviation of the Gaussian in voxels, at least 0.7.

    Returns
    -------
    (nx, ny, nz) float32
        Distance at the voxel centres, positive inside, nm; limited to `SATURATION` times `smooth`.
    int
        Number of voxels in features too thin for the smoothing; their centres keep their side.

    Examples
    --------
    >>> import numpy as np
    >>> slab = np.zeros((30, 30, 30), bool)
    >>> slab[10:20, 5:25, 5:25] = True
    >>> distance, lost = distance_field(slab, np.full(3, 2.0), 1.0)
    >>> distance[9:11, 15, 15].round(1).tolist(), lost
    ([-1.100000023841858, 1.100000023841858], 0)
    """
    indicator = inside.astype(np.float32)
    once = _standard_distance(indicator, smooth)
    twice = _standard_distance(indicator, np.sqrt(2.0) * smooth)
    reduced = 2.0 * once - np.sqrt(2.0) * twice  # in standard deviations
    reduced = np.clip(reduced, -SATURATION, SATURATION)
    distance = reduced * smooth * _voxel_along_normal(once, voxel)
    limit = CONFLICT * float(voxel.min())
    lost = inside & (distance < -limit)
    filled_in = ~inside & (distance > limit)
    # half a voxel: as in the middle of a sheet or gap of one voxel
    distance[lost] = voxel.min() / 2
    distance[filled_in] = -voxel.min() / 2
    return distance.astype(np.float32), int(lost.sum() + filled_in.sum())


def _standard_distance(indicator: NDArray, spread: float) -> NDArray:
    """Distance from the surface of the smoothed indicator in standard deviations, limited."""
    smoothed = gaussian_filter(indicator, spread, truncate=4.0)
    distance = np.where(smoothed > 0.5, np.float32(REACH), np.float32(-REACH))
    near = (smoothed > ndtr(-REACH)) & (smoothed < ndtr(REACH))
    distance[near] = ndtri(smoothed[near])
    return distance


def _voxel_along_normal(values: NDArray, voxel: NDArray) -> NDArray | float:
    """Length of a voxel across the surface, nm; matters where voxels are no cubes."""
    if np.ptp(voxel) == 0:
        return float(voxel[0])
    slopes = np.gradient(values)
    # per voxel / nm: the normal is that of the gradient in nm
    square = sum((g / h) ** 2 for g, h in zip(slopes, voxel, strict=True))
    weighted = sum(g**2 for g in slopes)
    return np.sqrt(
        np.divide(weighted, square, out=np.full(values.shape, voxel.min() ** 2), where=square > 0)
    )


def matched_volume(distance: NDArray, voxel: NDArray, volume: float) -> float:
    """Shift (nm) to add to a distance field such that it encloses `volume` (nm^3)."""
    edge = float(voxel.mean())

    def excess(shift: float) -> float:
        return _enclosed(distance, shift, edge, 3) * voxel.prod() - volume

    low, high = -edge / 2, edge / 2
    if excess(low) > 0 or excess(high) < 0:
        return low if excess(low) > 0 else high
    return float(brentq(excess, low, high, xtol=1e-4 * edge))


@njit(parallel=True, cache=True, nogil=True)
def _enclosed(field, shift, edge, parts):
    """Volume in voxels where the trilinear field plus shift is positive."""
    nx, ny, nz = field.shape
    rows = np.zeros(nx - 1)
    for i in prange(nx - 1):
        total = 0.0
        for j in range(ny - 1):
            for k in range(nz - 1):
                low = high = field[i, j, k]
                for a in range(2):
                    for b in range(2):
                        for c in range(2):
                            low = min(low, field[i + a, j + b, k + c])
                            high = max(high, field[i + a, j + b, k + c])
                if high + shift <= -edge / 2:
                    continue
                if low + shift >= edge / 2:
                    total += 1.0
                    continue
                filled = 0.0
                for a in range(parts):
                    for b in range(parts):
                        for c in range(parts):
                            value = shift + _linear(
                                field,
                                i + (a + 0.5) / parts,
                                j + (b + 0.5) / parts,
                                k + (c + 0.5) / parts,
                            )
                            filled += min(1.0, max(0.0, 0.5 + value * parts / edge))
                total += filled / parts**3
        rows[i] = total
    return rows.sum()


def surface_points(values: NDArray, level: float) -> NDArray:
    """Where the lines between neighbouring voxel centres cross the level, (n, 3) in voxels."""
    found = []
    for axis in range(3):
        front = [slice(None)] * 3
        back = [slice(None)] * 3
        front[axis], back[axis] = slice(None, -1), slice(1, None)
        a, b = values[tuple(front)] - level, values[tuple(back)] - level
        index = np.argwhere((a > 0) != (b > 0))
        at = tuple(index.T)
        points = index.astype(np.float64)
        points[:, axis] += a[at] / (a[at] - b[at])
        found.append(points)
    return np.concatenate(found)


def sample_distance(
    field: NDArray,
    start: NDArray,
    stride: NDArray,
    shape: tuple[int, ...],
    step: float,
    parts: int,
) -> NDArray:
    """Filled fraction of every sample from a distance field.

    Parameters
    ----------
    field : (nx, ny, nz) float32
        Signed distances at the voxel centres, nm, linear in between.
    start : (3,)
        Position of sample (0, 0, 0) in voxels.
    stride : (3, 3)
        Columns are the steps from sample to sample along the three axes, in voxels.
    shape : 3 ints
        Number of samples.
    step : float
        Edge of a sample, nm.
    parts : int
        Each sample is the mean of parts^3 smaller ones, where it is larger than a voxel.

    Returns
    -------
    (shape) float32
    """
    out = np.empty(shape, np.float32)
    _sample(field, start, stride, float(step), int(parts), True, out)
    return out


def sample_fraction(
    field: NDArray, start: NDArray, stride: NDArray, shape: tuple[int, ...], parts: int
) -> NDArray:
    """Like `sample_distance`, for a field of filled fractions."""
    out = np.empty(shape, np.float32)
    _sample(field, start, stride, 1.0, int(parts), False, out)
    return out


@njit(parallel=True, cache=True, nogil=True)
def _sample(field, start, stride, step, parts, is_distance, out):
    nx, ny, nz = out.shape
    weight = 1.0 / parts**3
    for i in prange(nx):
        for j in range(ny):
            for k in range(nz):
                total = 0.0
                for a in range(parts):
                    x = i + (a + 0.5) / parts - 0.5
                    for b in range(parts):
                        y = j + (b + 0.5) / parts - 0.5
                        for c in range(parts):
                            z = k + (c + 0.5) / parts - 0.5
                            value = _linear(
                                field,
                                start[0] + stride[0, 0] * x + stride[0, 1] * y + stride[0, 2] * z,
                                start[1] + stride[1, 0] * x + stride[1, 1] * y + stride[1, 2] * z,
                                start[2] + stride[2, 0] * x + stride[2, 1] * y + stride[2, 2] * z,
                            )
                            if is_distance:
                                value = min(1.0, max(0.0, 0.5 + value * parts / step))
                            total += value
                out[i, j, k] = total * weight


@njit(cache=True, nogil=True)
def _linear(field, x, y, z):
    """Trilinear interpolation; beyond the outermost centres their values go on."""
    nx, ny, nz = field.shape
    x = min(max(x, 0.0), nx - 1.0)
    y = min(max(y, 0.0), ny - 1.0)
    z = min(max(z, 0.0), nz - 1.0)
    i, j, k = min(int(x), nx - 2), min(int(y), ny - 2), min(int(z), nz - 2)
    u, v, w = x - i, y - j, z - k
    c00 = field[i, j, k] * (1 - w) + field[i, j, k + 1] * w
    c01 = field[i, j + 1, k] * (1 - w) + field[i, j + 1, k + 1] * w
    c10 = field[i + 1, j, k] * (1 - w) + field[i + 1, j, k + 1] * w
    c11 = field[i + 1, j + 1, k] * (1 - w) + field[i + 1, j + 1, k + 1] * w
    return (c00 * (1 - v) + c01 * v) * (1 - u) + (c10 * (1 - v) + c11 * v) * u


def overlap_fraction(
    field: NDArray, start: NDArray, stride: NDArray, shape: tuple[int, ...]
) -> NDArray:
    """Mean of a piecewise constant field over every sample box, axes aligned, (shape) float32.

    Parameters
    ----------
    field : (nx, ny, nz)
        Filled fraction of each voxel, 0 outside.
    start : (3,)
        Position of sample (0, 0, 0) in voxels.
    stride : (3,)
        Step from sample to sample along each axis, in voxels, positive.
    """
    values = field.astype(np.float64)
    for axis in range(3):
        values = np.moveaxis(values, axis, 0)
        number = len(values)
        integral = np.concatenate([np.zeros((1, *values.shape[1:])), np.cumsum(values, axis=0)])
        edges = start[axis] + 0.5 + stride[axis] * (np.arange(shape[axis] + 1) - 0.5)
        edges = np.clip(edges, 0.0, number)
        whole = np.minimum(edges.astype(int), number - 1)
        part = (edges - whole)[:, None, None]
        at_edges = integral[whole] + part * values[whole]
        values = np.moveaxis(np.diff(at_edges, axis=0) / stride[axis], 0, axis)
    return values.astype(np.float32)
