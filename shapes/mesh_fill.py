"""Filled fractions of a regular grid of samples inside a closed triangle mesh.

Inside or outside is decided along columns (lines parallel to z): each triangle adds the sign of its
crossing to the first sample above it, and a running sum over the column is the winding number.
Columns through an edge or a vertex need no special case: a triangle is first cut by the plane of
constant x, then the cut by the line of constant y, and both cuts use a half-open rule on numbers
that the neighbouring triangles share bit for bit. So the crossings of a closed mesh always add up
to zero. Near the surface the exact distance to the triangles, and its direction, give the part of
the sample that is filled.

All coordinates in this file are in samples: sample (i, j, k) sits at x = i, y = j, z = k.
"""

from __future__ import annotations

import numpy as np
from numba import njit, prange
from numpy.typing import NDArray

from .plane import _cut

BAND = 0.87  # half the diagonal of a sample: further from the surface it is full or empty


def fill_mesh(triangles: NDArray, shape: tuple[int, ...]) -> NDArray:
    """Filled fraction of every sample.

    Parameters
    ----------
    triangles : (n, 3, 3) float64
        Corners of an outward-oriented closed mesh, in samples. Triangles that come nowhere within
        a sample of the planes x = 0 .. shape[0] - 1 may be left out.
    shape : (nx, ny, nz)
        Number of samples.

    Returns
    -------
    (nx, ny, nz) float32
        The part of the sample inside the plane that touches the surface at its nearest point.

    Examples
    --------
    A tetrahedron wider than the grid fills it entirely:

    >>> import numpy as np
    >>> corners = 40.0 * np.array([[1, 1, 1], [1, -1, -1], [-1, 1, -1], [-1, -1, 1]])
    >>> faces = np.array([[0, 1, 2], [0, 3, 1], [0, 2, 3], [1, 3, 2]])
    >>> float(fill_mesh(corners[faces], (3, 3, 3)).min())
    1.0
    """
    out = np.empty(shape, np.float32)
    start, items = _triangles_by_plane(triangles, shape[0])
    _fill_planes(triangles, start, items, out)
    return out


def winding_numbers(triangles: NDArray, shape: tuple[int, ...]) -> NDArray:
    """Winding number of the mesh about every sample, int16 (shape); see `fill_mesh`."""
    out = np.empty(shape, np.int16)
    start, items = _triangles_by_plane(triangles, shape[0])
    _winding_planes(triangles, start, items, out)
    return out


def _triangles_by_plane(triangles: NDArray, planes: int) -> tuple[NDArray, NDArray]:
    """Which triangles come within the band of each plane x = i, as (start, items) lists."""
    x = triangles[:, :, 0]
    low = np.clip(np.ceil(x.min(axis=1) - BAND), 0, planes).astype(np.int64)
    high = np.clip(np.floor(x.max(axis=1) + BAND), -1, planes - 1).astype(np.int64)
    return _bucket(low, high, planes)


@njit(cache=True)
def _bucket(low, high, planes):
    start = np.zeros(planes + 1, np.int64)
    for t in range(low.size):
        for i in range(low[t], high[t] + 1):
            start[i + 1] += 1
    for i in range(planes):
        start[i + 1] += start[i]
    items = np.empty(start[planes], np.int32)
    place = start[:-1].copy()
    for t in range(low.size):
        for i in range(low[t], high[t] + 1):
            items[place[i]] = t
            place[i] += 1
    return start, items


@njit(parallel=True, cache=True, nogil=True)
def _fill_planes(triangles, start, items, out):
    planes, ny, nz = out.shape
    for i in prange(planes):
        steps = np.zeros((ny, nz + 1), np.int16)
        squared = np.full((ny, nz), np.float32(BAND * BAND))
        normal = np.zeros((ny, nz, 3), np.float32)
        polygon = np.empty((9, 3))
        row = np.empty((9, 3))
        spare = np.empty((9, 3))
        for n in range(start[i], start[i + 1]):
            triangle = triangles[items[n]]
            _add_crossings(triangle, i, steps)
            _lower_distances(triangle, i, squared, normal, polygon, row, spare)
        for j in range(ny):
            winding = 0
            for k in range(nz):
                winding += steps[j, k]
                if squared[j, k] >= np.float32(BAND * BAND):
                    out[i, j, k] = 1.0 if winding > 0 else 0.0
                    continue
                distance = np.sqrt(squared[j, k])
                if winding <= 0:
                    distance = -distance
                out[i, j, k] = _cut(distance, normal[j, k, 0], normal[j, k, 1], normal[j, k, 2])


@njit(parallel=True, cache=True, nogil=True)
def _winding_planes(triangles, start, items, out):
    planes, ny, nz = out.shape
    for i in prange(planes):
        steps = np.zeros((ny, nz + 1), np.int16)
        for n in range(start[i], start[i + 1]):
            _add_crossings(triangles[items[n]], i, steps)
        for j in range(ny):
            winding = 0
            for k in range(nz):
                winding += steps[j, k]
                out[i, j, k] = winding


@njit(cache=True, nogil=True)
def cut_by_plane(triangle, x):
    """Cut of a triangle by the plane of constant x: (hit, y1, z1, y2, z2).

    The cut runs from the edge that rises through the plane to the one that falls, so the cuts of
    neighbouring triangles join to closed, directed polygons. A corner on the plane counts as above.
    """
    y1 = z1 = y2 = z2 = 0.0
    rising = falling = False
    for corner in range(3):
        following = (corner + 1) % 3
        above = triangle[corner, 0] >= x
        above_next = triangle[following, 0] >= x
        if above == above_next:
            continue
        # always from the lower end to the upper: the neighbour gets the same bits
        low, high = (following, corner) if above else (corner, following)
        span = triangle[high, 0] - triangle[low, 0]
        part = (x - triangle[low, 0]) / span
        y = triangle[low, 1] + part * (triangle[high, 1] - triangle[low, 1])
        z = triangle[low, 2] + part * (triangle[high, 2] - triangle[low, 2])
        if above:
            y2, z2, falling = y, z, True
        else:
            y1, z1, rising = y, z, True
    return rising and falling, y1, z1, y2, z2


@njit(cache=True, nogil=True)
def _add_crossings(triangle, x, steps):
    """Add +1 (entering the solid going up in z) or -1 where the columns cross the triangle."""
    hit, y1, z1, y2, z2 = cut_by_plane(triangle, x)
    if not hit or y1 == y2:
        return
    ny, nz = steps.shape[0], steps.shape[1] - 1
    sign = -1  # a cut that runs towards +y bounds the solid from above
    if y1 > y2:
        y1, z1, y2, z2 = y2, z2, y1, z1
        sign = 1
    slope = (z2 - z1) / (y2 - y1)
    # half-open: columns with y1 < j <= y2
    for j in range(max(0, int(np.floor(y1)) + 1), min(ny - 1, int(np.floor(y2))) + 1):
        z = z1 + (j - y1) * slope
        if z <= 0.0:
            k = 0
        elif z > nz - 1:
            k = nz
        else:
            k = int(np.ceil(z))
        steps[j, k] += sign


@njit(cache=True, nogil=True)
def _lower_distances(triangle, i, squared, normal, polygon, row, spare):
    """Lower the squared distances of the samples of plane i within the band, and set normals."""
    ny, nz = squared.shape
    for corner in range(3):
        for axis in range(3):
            polygon[corner, axis] = triangle[corner, axis]
    size = _clip(polygon, 3, spare, 0, i - BAND, i + BAND)
    if size == 0:
        return
    y_low, y_high = _range(polygon, size, 1)
    z_low, z_high = _range(polygon, size, 2)
    first, last = _samples(y_low, y_high, ny)
    k_first, k_last = _samples(z_low, z_high, nz)
    if last < first or k_last < k_first:
        return
    # clipping again a row at a time pays only where the box is much larger than the triangle
    by_rows = (last - first + 1) * (k_last - k_first + 1) > 24
    for j in range(first, last + 1):
        if by_rows:
            for corner in range(size):
                for axis in range(3):
                    row[corner, axis] = polygon[corner, axis]
            left = _clip(row, size, spare, 1, j - BAND, j + BAND)
            if left == 0:
                continue
            z_low, z_high = _range(row, left, 2)
            k_first, k_last = _samples(z_low, z_high, nz)
        for k in range(k_first, k_last + 1):
            dx, dy, dz = nearest_offset(triangle, i, j, k)
            distance = dx * dx + dy * dy + dz * dz
            if distance < squared[j, k]:
                squared[j, k] = distance
                if distance < 1e-12:
                    dx, dy, dz = _face_normal(triangle)
                length = np.sqrt(dx * dx + dy * dy + dz * dz)
                if length > 0.0:
                    normal[j, k, 0], normal[j, k, 1] = dx / length, dy / length
                    normal[j, k, 2] = dz / length


@njit(cache=True, nogil=True)
def _samples(low, high, number):
    """First and last sample within the band of the interval."""
    first = max(0, int(np.ceil(max(low - BAND, -1.0))))
    last = min(number - 1, int(np.floor(min(high + BAND, float(number)))))
    return first, last


@njit(cache=True, nogil=True)
def _range(polygon, size, axis):
    low = high = polygon[0, axis]
    for corner in range(1, size):
        low = min(low, polygon[corner, axis])
        high = max(high, polygon[corner, axis])
    return low, high


@njit(cache=True, nogil=True)
def _clip(polygon, size, spare, axis, low, high):
    """Clip a convex polygon to low <= coordinate <= high in place; its new number of corners."""
    for side in range(2):
        sign = 1.0 if side == 0 else -1.0
        limit = low if side == 0 else high
        number = 0
        for corner in range(size):
            following = (corner + 1) % size
            here = sign * (polygon[corner, axis] - limit)
            there = sign * (polygon[following, axis] - limit)
            if here >= 0.0:
                for m in range(3):
                    spare[number, m] = polygon[corner, m]
                number += 1
            if (here >= 0.0) != (there >= 0.0):
                part = here / (here - there)
                for m in range(3):
                    spare[number, m] = polygon[corner, m] + part * (
                        polygon[following, m] - polygon[corner, m]
                    )
                number += 1
        size = number
        for corner in range(size):
            for m in range(3):
                polygon[corner, m] = spare[corner, m]
        if size == 0:
            return 0
    return size


@njit(cache=True, nogil=True)
def nearest_offset(triangle, x, y, z):
    """Vector from the nearest point of a triangle to the point (x, y, z)."""
    ax, ay, az = triangle[0, 0], triangle[0, 1], triangle[0, 2]
    abx, aby, abz = triangle[1, 0] - ax, triangle[1, 1] - ay, triangle[1, 2] - az
    acx, acy, acz = triangle[2, 0] - ax, triangle[2, 1] - ay, triangle[2, 2] - az
    px, py, pz = x - ax, y - ay, z - az
    nx, ny, nz = _face_normal(triangle)
    norm = nx * nx + ny * ny + nz * nz
    if norm > 0.0:
        # barycentric weights of the foot of the perpendicular
        wc = (aby * pz - abz * py) * nx + (abz * px - abx * pz) * ny + (abx * py - aby * px) * nz
        wb = (py * acz - pz * acy) * nx + (pz * acx - px * acz) * ny + (px * acy - py * acx) * nz
        if wc >= 0.0 and wb >= 0.0 and wb + wc <= norm:
            height = (px * nx + py * ny + pz * nz) / norm
            return height * nx, height * ny, height * nz
    best = _offset_from_edge(px, py, pz, abx, aby, abz)
    other = _offset_from_edge(px, py, pz, acx, acy, acz)
    if _square(other) < _square(best):
        best = other
    other = _offset_from_edge(px - abx, py - aby, pz - abz, acx - abx, acy - aby, acz - abz)
    if _square(other) < _square(best):
        best = other
    return best


@njit(cache=True, nogil=True)
def _face_normal(triangle):
    """Normal of a triangle, twice its area long."""
    ax, ay, az = triangle[0, 0], triangle[0, 1], triangle[0, 2]
    abx, aby, abz = triangle[1, 0] - ax, triangle[1, 1] - ay, triangle[1, 2] - az
    acx, acy, acz = triangle[2, 0] - ax, triangle[2, 1] - ay, triangle[2, 2] - az
    return aby * acz - abz * acy, abz * acx - abx * acz, abx * acy - aby * acx


@njit(cache=True, nogil=True)
def _offset_from_edge(px, py, pz, ex, ey, ez):
    length = ex * ex + ey * ey + ez * ez
    part = 0.0
    if length > 0.0:
        part = min(1.0, max(0.0, (px * ex + py * ey + pz * ez) / length))
    return px - part * ex, py - part * ey, pz - part * ez


@njit(cache=True, nogil=True)
def _square(vector):
    return vector[0] * vector[0] + vector[1] * vector[1] + vector[2] * vector[2]
