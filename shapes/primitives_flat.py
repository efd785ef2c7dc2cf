"""Primitives with flat faces, edges rounded: convex polyhedra, plates on a convex polygon."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numba
import numpy as np
from scipy.spatial import ConvexHull, HalfspaceIntersection, QhullError

from .body import FloatArray
from .solid import EXACT, Solid, positive, require


@dataclass(frozen=True, eq=False)
class Polyhedron(Solid):
    """Convex hull of `vertices` (N, 3), edges and corners rounded with radius `rounding`.

    Faces stay where they are: the solid is the polyhedron with its faces moved in by the rounding,
    grown by the rounding. Its distance is exact.
    """

    vertices: FloatArray
    rounding: float = 0.0

    exact = EXACT

    def __post_init__(self) -> None:
        object.__setattr__(self, "vertices", np.asarray(self.vertices, dtype=float).reshape(-1, 3))
        require(self.rounding >= 0, f"rounding = {self.rounding:g} must not be negative (nm)")
        assert self._core is not None

    @cached_property
    def _core(self) -> ConvexHull:
        """Hull of the sharp polyhedron inside."""
        try:
            hull = ConvexHull(self.vertices)
            if self.rounding == 0:
                return hull
            inner = hull.equations.copy()
            inner[:, 3] += self.rounding
            middle = self.vertices[hull.vertices].mean(axis=0)
            depth = -float((hull.equations[:, :3] @ middle + hull.equations[:, 3]).max())
            require(
                depth > self.rounding * (1 + 1e-9),
                f"rounding = {self.rounding:g} must be less than the radius of the inscribed "
                f"sphere, {depth:g} nm",
            )
            corners = HalfspaceIntersection(_distinct(inner), middle).intersections
            return ConvexHull(_distinct(corners))
        except QhullError as error:
            raise_flat(error)
            raise

    @cached_property
    def _planes(self) -> FloatArray:
        return _distinct(self._core.equations)

    @cached_property
    def _triangles(self) -> FloatArray:
        return np.ascontiguousarray(self._core.points[self._core.simplices])

    def signed_distance(self, points: FloatArray) -> FloatArray:
        points = np.ascontiguousarray(points, dtype=float)
        return _polyhedron_distance(points, self._planes, self._triangles) + self.rounding

    def support(self, directions: FloatArray) -> FloatArray:
        corners = self._core.points[self._core.vertices]
        return (directions @ corners.T).max(axis=1) + self.rounding

    def steiner(self) -> tuple[float, float, float]:
        hull, r = self._core, self.rounding
        volume, area, mean = float(hull.volume), float(hull.area), hull_mean_curvature(hull)
        return (
            volume + area * r + mean * r**2 + 4 * np.pi / 3 * r**3,
            area + 2 * mean * r + 4 * np.pi * r**2,
            mean + 4 * np.pi * r,
        )

    @property
    def thinnest(self) -> float:
        """Least width between two parallel planes that touch faces."""
        corners, planes = self._core.points[self._core.vertices], self._planes
        across = (planes[:, :3] @ corners.T).min(axis=1) + planes[:, 3]
        return float(-across.max()) + 2 * self.rounding


def raise_flat(error: Exception) -> None:
    """Raise ShapeError for points that span no volume."""
    require(False, f"these vertices span no volume ({str(error).splitlines()[0]})")


def hull_mean_curvature(hull: ConvexHull) -> float:
    """Integrated mean curvature of a convex polyhedron, half the sum of edge times exterior angle.

    >>> corners = np.stack(np.meshgrid([0, 1], [0, 1], [0, 1]), axis=-1).reshape(-1, 3)
    >>> round(hull_mean_curvature(ConvexHull(corners)) / np.pi, 9)
    3.0
    """
    total = 0.0
    for face, neighbours in enumerate(hull.neighbors):
        for corner, other in enumerate(neighbours):
            if other <= face:
                continue
            ends = np.delete(hull.simplices[face], corner)
            length = np.linalg.norm(np.subtract(*hull.points[ends]))
            first, second = hull.equations[face, :3], hull.equations[other, :3]
            angle = np.arctan2(np.linalg.norm(np.cross(first, second)), first @ second)
            total += length * angle / 2
    return float(total)


def _distinct(rows: FloatArray, tolerance: float = 1e-9) -> FloatArray:
    """Rows without those equal to an earlier one, in the first one's place."""
    scale = max(float(np.abs(rows).max()), 1e-300)
    _, first = np.unique(np.round(rows / (scale * tolerance)), axis=0, return_index=True)
    kept: list[int] = []
    for row in np.sort(first):
        if all(np.abs(rows[row] - rows[k]).max() > 10 * scale * tolerance for k in kept):
            kept.append(int(row))
    return np.ascontiguousarray(rows[kept])


@numba.njit(cache=True, nogil=True)
def _to_triangle(p, a, b, c):  # type: ignore[no-untyped-def]
    """Square of the distance from p to the triangle a b c (Ericson 2005, closest-point regions)."""
    ab0, ab1, ab2 = b[0] - a[0], b[1] - a[1], b[2] - a[2]
    ac0, ac1, ac2 = c[0] - a[0], c[1] - a[1], c[2] - a[2]
    ap0, ap1, ap2 = p[0] - a[0], p[1] - a[1], p[2] - a[2]
    d1 = ab0 * ap0 + ab1 * ap1 + ab2 * ap2
    d2 = ac0 * ap0 + ac1 * ap1 + ac2 * ap2
    aa = ab0 * ab0 + ab1 * ab1 + ab2 * ab2
    cc = ac0 * ac0 + ac1 * ac1 + ac2 * ac2
    bc = ab0 * ac0 + ab1 * ac1 + ab2 * ac2
    d3, d4 = d1 - aa, d2 - bc  # the same with p - b
    d5, d6 = d1 - bc, d2 - cc  # and with p - c
    va, vb, vc = d3 * d6 - d5 * d4, d5 * d2 - d1 * d6, d1 * d4 - d3 * d2
    if d1 <= 0 and d2 <= 0:
        v, w = 0.0, 0.0
    elif d3 >= 0 and d4 <= d3:
        v, w = 1.0, 0.0
    elif vc <= 0 and d1 >= 0 and d3 <= 0:
        v, w = d1 / (d1 - d3), 0.0
    elif d6 >= 0 and d5 <= d6:
        v, w = 0.0, 1.0
    elif vb <= 0 and d2 >= 0 and d6 <= 0:
        v, w = 0.0, d2 / (d2 - d6)
    elif va <= 0 and d4 - d3 >= 0 and d5 - d6 >= 0:
        w = (d4 - d3) / ((d4 - d3) + (d5 - d6))
        v = 1.0 - w
    else:
        v, w = vb / (va + vb + vc), vc / (va + vb + vc)
    x = ap0 - v * ab0 - w * ac0
    y = ap1 - v * ab1 - w * ac1
    z = ap2 - v * ab2 - w * ac2
    return x * x + y * y + z * z


@numba.njit(cache=True, nogil=True)
def _polyhedron_distance(points, planes, triangles):  # type: ignore[no-untyped-def]
    """Signed distance, inside positive; planes (k, 4) as normal and offset, outside positive."""
    out = np.empty(points.shape[0])
    for n in range(points.shape[0]):
        p = points[n]
        beyond = -np.inf
        for k in range(planes.shape[0]):
            level = planes[k, 0] * p[0] + planes[k, 1] * p[1] + planes[k, 2] * p[2] + planes[k, 3]
            beyond = max(beyond, level)
        if beyond <= 0.0:
            out[n] = -beyond
            continue
        nearest = np.inf
        for k in range(triangles.shape[0]):
            square = _to_triangle(p, triangles[k, 0], triangles[k, 1], triangles[k, 2])
            nearest = min(nearest, square)
        out[n] = -np.sqrt(nearest)
    return out


@dataclass(frozen=True, eq=False)
class Plate(Solid):
    """Plate along z on a convex polygon with rounded tips and rims.

    Attributes
    ----------
    corners : (N, 2) array
        Corners of the sharp polygon in the x, y plane, nm, counter-clockwise.
    thickness : float
        Height along z, nm.
    tip : float
        Radius of the polygon's rounded corners seen from above, nm; at least `rounding`.
    rounding : float
        Radius of the rims where the faces meet the sides, nm.
    """

    corners: FloatArray
    thickness: float
    tip: float = 0.0
    rounding: float = 0.0

    exact = EXACT

    def __post_init__(self) -> None:
        object.__setattr__(self, "corners", np.asarray(self.corners, dtype=float).reshape(-1, 2))
        positive(thickness=self.thickness)
        require(
            0 <= self.rounding <= self.thickness / 2,
            f"rounding = {self.rounding:g} must lie between 0 and half the thickness, "
            f"{self.thickness / 2:g} nm",
        )
        depth = polygon_inradius(self.corners)
        require(
            0 <= self.tip < depth and self.rounding < depth,
            f"tip = {self.tip:g} and rounding = {self.rounding:g} must lie between 0 and the "
            f"radius of the polygon's inscribed circle, {depth:g} nm",
        )

    @cached_property
    def _inner(self) -> FloatArray:
        """Corners of the polygon moved in by the radius of the tips."""
        return polygon_moved_in(self.corners, self._radius)

    @property
    def _radius(self) -> float:
        return max(self.tip, self.rounding)

    def signed_distance(self, points: FloatArray) -> FloatArray:
        points = np.ascontiguousarray(points, dtype=float)
        r = self.rounding
        # positive outside, of the plate that is smaller by the rounding
        across = -(_polygon_distance(points, self._inner) + self._radius - r)
        above = np.abs(points[:, 2]) - (self.thickness / 2 - r)
        outside = np.hypot(np.maximum(across, 0.0), np.maximum(above, 0.0))
        return r - outside - np.minimum(np.maximum(across, above), 0.0)

    def support(self, directions: FloatArray) -> FloatArray:
        r = self.rounding
        flat = (directions[:, :2] @ self._inner.T).max(axis=1)
        across = np.hypot(directions[:, 0], directions[:, 1]) * (self._radius - r)
        return flat + across + np.abs(directions[:, 2]) * (self.thickness / 2 - r) + r

    def steiner(self) -> tuple[float, float, float]:
        r, ring = self.rounding, self._radius - self.rounding
        edges = np.roll(self._inner, -1, axis=0) - self._inner
        around = float(np.linalg.norm(edges, axis=1).sum())
        x, y = self._inner.T
        flat = float(abs(x @ np.roll(y, -1) - y @ np.roll(x, -1))) / 2
        # the flat region grown by `ring` in the plane, then the plate on it (M of a prism over a
        # convex region is pi h + pi P/2), then grown by the rounding in space
        flat += around * ring + np.pi * ring**2
        around += 2 * np.pi * ring
        h = self.thickness - 2 * r
        volume, area, mean = flat * h, 2 * flat + around * h, np.pi * h + np.pi / 2 * around
        return (
            volume + area * r + mean * r**2 + 4 * np.pi / 3 * r**3,
            area + 2 * mean * r + 4 * np.pi * r**2,
            mean + 4 * np.pi * r,
        )

    @property
    def thinnest(self) -> float:
        return min(self.thickness, 2 * polygon_inradius(self.corners))


def regular_polygon(sides: int, edge: float) -> FloatArray:
    """Corners of a regular polygon about the origin, the first one up along y, (sides, 2) nm."""
    angle = np.pi / 2 + 2 * np.pi * np.arange(sides) / sides
    radius = edge / (2 * np.sin(np.pi / sides))
    return radius * np.stack([np.cos(angle), np.sin(angle)], axis=1)


def polygon_inradius(corners: FloatArray) -> float:
    """Distance from the mean of the corners to the nearest side, nm."""
    middle = corners.mean(axis=0)
    normals, offsets = _sides(corners)
    return float((offsets - normals @ middle).min())


def polygon_moved_in(corners: FloatArray, distance: float) -> FloatArray:
    """Corners after every side has moved in by `distance`, (N, 2) nm."""
    normals, offsets = _sides(corners)
    inner = offsets - distance
    before, before_offset = np.roll(normals, 1, axis=0), np.roll(inner, 1)
    pairs = np.stack([before, normals], axis=1)
    levels = np.stack([before_offset, inner], axis=1)
    return np.asarray(np.linalg.solve(pairs, levels[..., None])[..., 0], dtype=float)


def _sides(corners: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Outward unit normals and offsets of the sides, side i from corner i to i + 1."""
    along = np.roll(corners, -1, axis=0) - corners
    normals = np.stack([along[:, 1], -along[:, 0]], axis=1)
    normals /= np.linalg.norm(normals, axis=1, keepdims=True)
    return normals, np.einsum("ij,ij->i", normals, corners)


@numba.njit(cache=True, nogil=True)
def _polygon_distance(points, corners):  # type: ignore[no-untyped-def]
    """Signed distance in the plane from a convex polygon, inside positive."""
    out = np.empty(points.shape[0])
    count = corners.shape[0]
    for n in range(points.shape[0]):
        x, y = points[n, 0], points[n, 1]
        nearest, inside = np.inf, True
        for i in range(count):
            ax, ay = corners[i, 0], corners[i, 1]
            bx, by = corners[(i + 1) % count, 0] - ax, corners[(i + 1) % count, 1] - ay
            px, py = x - ax, y - ay
            share = min(max((px * bx + py * by) / (bx * bx + by * by), 0.0), 1.0)
            square = (px - share * bx) ** 2 + (py - share * by) ** 2
            nearest = min(nearest, square)
            if bx * py - by * px < 0:
                inside = False
        out[n] = np.sqrt(nearest) if inside else -np.sqrt(nearest)
    return out
