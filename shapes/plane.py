"""The part of a small cube that lies on one side of a plane, and what it makes of distances."""

from __future__ import annotations

import numba
import numpy as np
from numpy.typing import NDArray

from .body import FloatArray

FLAT = 1e-9  # share of a normal's component below which the plane counts as along that axis
MOST = 0.05  # voxels: bound on the correction for curvature, reached at edges only
FAR = 0.92  # voxels: half the diagonal, and room for the correction
KINK = 0.3  # of a distance's slope: less means a ridge, where no one plane stands for the surface


@numba.njit(cache=True, nogil=True)
def _cut(distance, n0, n1, n2):  # type: ignore[no-untyped-def]
    """Filled part of a unit cube whose centre is `distance` inside a plane of unit normal n."""
    n0, n1, n2 = abs(n0), abs(n1), abs(n2)
    if n0 > n1:
        n0, n1 = n1, n0
    if n1 > n2:
        n1, n2 = n2, n1
    if n0 > n1:
        n0, n1 = n1, n0
    total = n0 + n1 + n2
    level = 0.5 + distance / total
    if level <= 0.0:
        return 0.0
    if level >= 1.0:
        return 1.0
    a = level if level <= 0.5 else 1.0 - level
    m1, m2 = max(n0 / total, FLAT), max(n1 / total, FLAT)
    m3 = 1.0 - m1 - m2
    if a < m1:
        part = a**3 / (6 * m1 * m2 * m3)
    elif a < m2:
        part = a * (a - m1) / (2 * m2 * m3) + m1 * m1 / (6 * m2 * m3)
    elif a < min(m1 + m2, m3):
        part = a * a * (3 * (m1 + m2) - a) + m1 * m1 * (m1 - 3 * a) + m2 * m2 * (m2 - 3 * a)
        part /= 6 * m1 * m2 * m3
    elif m3 < m1 + m2:
        part = a * a * (3 - 2 * a) + m1 * m1 * (m1 - 3 * a) + m2 * m2 * (m2 - 3 * a)
        part = (part + m3 * m3 * (m3 - 3 * a)) / (6 * m1 * m2 * m3)
    else:
        part = (2 * a - m1 - m2) / (2 * m3)
    return part if level <= 0.5 else 1.0 - part


@numba.njit(cache=True, nogil=True)
def plane_in_cube(distance: FloatArray, normal: FloatArray) -> FloatArray:
    """Filled part of unit cubes cut by planes (Scardovelli & Zaleski 2000).

    Parameters
    ----------
    distance : (n, q) array
        How far the centres of q cubes lie inside plane n, in cube edges.
    normal : (n, 3) array
        Unit normals of the planes.

    Returns
    -------
    (n, q) array

    Examples
    --------
    >>> plane_in_cube(np.array([[0.0, 0.25, 0.5]]), np.array([[0.0, 0.0, 1.0]]))[0].round(3)
    array([0.5 , 0.75, 1.  ])
    """
    out = np.empty(distance.shape)
    for i in range(distance.shape[0]):
        for q in range(distance.shape[1]):
            out[i, q] = _cut(distance[i, q], normal[i, 0], normal[i, 1], normal[i, 2])
    return out


@numba.njit(cache=True, nogil=True)
def blocks_filled(distance: FloatArray, step: float) -> NDArray[np.float32]:
    """Filled part of the voxels of small blocks, from the signed distances of their centres.

    The surface within a voxel is taken as a plane whose normal is the gradient of the distances
    in the block, at the distance averaged over the voxel, d + h^2/24 (its Laplacian): with the
    centre's distance alone curved bodies would come out too large by h^2/24 times the curvature.

    Parameters
    ----------
    distance : (blocks, b + 2, b + 2, b + 2) array
        Signed distance at the centres of the voxels and of one more layer around them, inside
        positive, nm.
    step : float
        Edge of a voxel, nm.

    Returns
    -------
    (blocks, b, b, b) float32 array
    """
    count, b = distance.shape[0], distance.shape[1] - 2
    out = np.empty((count, b, b, b), dtype=np.float32)
    for n in range(count):
        d = distance[n]
        for i in range(1, b + 1):
            for j in range(1, b + 1):
                for k in range(1, b + 1):
                    here = d[i, j, k] / step
                    if here >= FAR:
                        out[n, i - 1, j - 1, k - 1] = 1.0
                        continue
                    if here <= -FAR:
                        out[n, i - 1, j - 1, k - 1] = 0.0
                        continue
                    gx = (d[i + 1, j, k] - d[i - 1, j, k]) / (2 * step)
                    gy = (d[i, j + 1, k] - d[i, j - 1, k]) / (2 * step)
                    gz = (d[i, j, k + 1] - d[i, j, k - 1]) / (2 * step)
                    slope = np.sqrt(gx * gx + gy * gy + gz * gz)
                    bend = d[i + 1, j, k] + d[i - 1, j, k] + d[i, j + 1, k] + d[i, j - 1, k]
                    bend += d[i, j, k + 1] + d[i, j, k - 1] - 6 * d[i, j, k]
                    here += min(max(bend / (24 * step), -MOST), MOST)
                    if slope > KINK:
                        filled = _cut(here, gx / slope, gy / slope, gz / slope)
                    else:
                        filled = min(max(0.5 + here, 0.0), 1.0)
                    out[n, i - 1, j - 1, k - 1] = filled
    return out
