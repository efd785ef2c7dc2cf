"""Signed distance of scattered points from a closed triangle mesh, through a tree of boxes.

A regular grid of samples is the business of `shapes.mesh_fill`, which needs no tree.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit, prange
from numpy.typing import NDArray

from shapes.mesh_fill import cut_by_plane, nearest_offset

LEAF_SIZE = 8


class TriangleTree(NamedTuple):
    """Boxes around ever smaller sets of triangles; node n has the children 2n + 1 and 2n + 2."""

    triangles: NDArray  # (n, 3, 3) sorted so that the triangles of a node are neighbours
    first: NDArray  # (nodes,) first triangle of a node
    last: NDArray  # (nodes,) one past its last
    low: NDArray  # (nodes, 3) lower corner of its box
    high: NDArray  # (nodes, 3)


def triangle_tree(triangles: NDArray) -> TriangleTree:
    """Tree for `signed_distance` and `winding_at`.

    Parameters
    ----------
    triangles : (n, 3, 3) float64
        Corners, in nm or any other unit of length.
    """
    triangles = np.ascontiguousarray(triangles, dtype=np.float64)
    levels = max(0, int(np.ceil(np.log2(max(1, len(triangles) / LEAF_SIZE)))))
    nodes = 2 ** (levels + 1) - 1
    order, first, last, low, high = _build(triangles, nodes)
    return TriangleTree(np.ascontiguousarray(triangles[order]), first, last, low, high)


def signed_distance(tree: TriangleTree, points: NDArray) -> NDArray:
    """Distance of each point from the surface, positive inside, in the unit of the triangles.

    Parameters
    ----------
    tree : TriangleTree
        Of an outward-oriented closed mesh.
    points : (n, 3)

    Returns
    -------
    (n,) float64

    Examples
    --------
    >>> import numpy as np
    >>> corners = np.array([[0.0, 0, 0], [3, 0, 0], [0, 3, 0], [0, 0, 3]])
    >>> faces = np.array([[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]])
    >>> tree = triangle_tree(corners[faces])
    >>> signed_distance(tree, np.array([[0.5, 0.5, 0.25], [0.5, 0.5, -1.0]])).tolist()
    [0.25, -1.0]
    """
    points = np.ascontiguousarray(points, dtype=np.float64).reshape(-1, 3)
    squared = _nearest(tree, points)
    inside = _windings(tree, points) > 0
    return np.where(inside, 1.0, -1.0) * np.sqrt(squared)


def winding_at(tree: TriangleTree, points: NDArray) -> NDArray:
    """Winding number of the closed mesh about each point, int64 (n,): 1 inside, 0 outside."""
    return _windings(tree, np.ascontiguousarray(points, dtype=np.float64).reshape(-1, 3))


@njit(cache=True)
def _build(triangles, nodes):
    number = triangles.shape[0]
    order = np.arange(number)
    first = np.zeros(nodes, np.int64)
    last = np.zeros(nodes, np.int64)
    low = np.zeros((nodes, 3))
    high = np.zeros((nodes, 3))
    last[0] = number
    for node in range(nodes):
        start, stop = first[node], last[node]
        for axis in range(3):
            low[node, axis] = np.inf
            high[node, axis] = -np.inf
            for n in range(start, stop):
                for corner in range(3):
                    low[node, axis] = min(low[node, axis], triangles[order[n], corner, axis])
                    high[node, axis] = max(high[node, axis], triangles[order[n], corner, axis])
        if 2 * node + 2 >= nodes:
            continue
        # halve at the median of the centroids along the longest side of the box
        longest = np.argmax(high[node] - low[node])
        centre = np.empty(stop - start)
        for n in range(start, stop):
            centre[n - start] = triangles[order[n], :, longest].sum()
        order[start:stop] = order[start:stop][np.argsort(centre)]
        middle = (start + stop) // 2
        first[2 * node + 1], last[2 * node + 1] = start, middle
        first[2 * node + 2], last[2 * node + 2] = middle, stop
    return order, first, last, low, high


@njit(parallel=True, cache=True)
def _nearest(tree, points):
    out = np.empty(points.shape[0])
    for p in prange(points.shape[0]):
        best = np.inf
        stack = np.empty(64, np.int64)
        stack[0] = 0
        size = 1
        while size > 0:
            size -= 1
            node = stack[size]
            if _squared_to_box(tree, node, points[p]) >= best:
                continue
            left = 2 * node + 1
            if left >= tree.first.size:
                for n in range(tree.first[node], tree.last[node]):
                    dx, dy, dz = nearest_offset(
                        tree.triangles[n], points[p, 0], points[p, 1], points[p, 2]
                    )
                    best = min(best, dx * dx + dy * dy + dz * dz)
                continue
            # the nearer child last, so that it is looked at first
            nearer_left = _squared_to_box(tree, left, points[p]) < _squared_to_box(
                tree, left + 1, points[p]
            )
            stack[size] = left + 1 if nearer_left else left
            stack[size + 1] = left if nearer_left else left + 1
            size += 2
        out[p] = best
    return out


@njit(cache=True)
def _squared_to_box(tree, node, point):
    total = 0.0
    for axis in range(3):
        gap = max(tree.low[node, axis] - point[axis], point[axis] - tree.high[node, axis], 0.0)
        total += gap * gap
    return total


@njit(parallel=True, cache=True)
def _windings(tree, points):
    out = np.zeros(points.shape[0], np.int64)
    for p in prange(points.shape[0]):
        x, y, z = points[p, 0], points[p, 1], points[p, 2]
        total = 0
        stack = np.empty(64, np.int64)
        stack[0] = 0
        size = 1
        while size > 0:
            size -= 1
            node = stack[size]
            # only triangles that the line from below up to the point can meet
            if (
                x < tree.low[node, 0]
                or x > tree.high[node, 0]
                or y < tree.low[node, 1]
                or y > tree.high[node, 1]
                or z < tree.low[node, 2]
            ):
                continue
            left = 2 * node + 1
            if left < tree.first.size:
                stack[size] = left
                stack[size + 1] = left + 1
                size += 2
                continue
            for n in range(tree.first[node], tree.last[node]):
                total += crossing_below(tree.triangles[n], x, y, z)
        out[p] = total
    return out


@njit(cache=True)
def crossing_below(triangle, x, y, z):
    """+1 or -1 if the line from below up to the point enters or leaves through the triangle."""
    hit, y1, z1, y2, z2 = cut_by_plane(triangle, x)
    if not hit or (y1 < y) == (y2 < y):
        return 0
    height = z1 + (y - y1) * ((z2 - z1) / (y2 - y1))
    if height > z:
        return 0
    return 1 if y1 > y2 else -1
