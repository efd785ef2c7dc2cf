"""Round and box-like primitives: sphere, ellipsoid, cuboid with rounding, capsule, torus.

Centred on the origin. Sizes are full lengths in nm.
"""

from __future__ import annotations

from dataclasses import dataclass

import numba
import numpy as np
from numpy.typing import NDArray
from scipy.special import ellipeinc, ellipkinc

from .body import FloatArray, SampleGrid
from .solid import EXACT, Solid, positive, require


@dataclass(frozen=True, eq=False)
class Sphere(Solid):
    """Sphere of a diameter."""

    diameter: float

    exact = EXACT

    def __post_init__(self) -> None:
        positive(diameter=self.diameter)

    def signed_distance(self, points: FloatArray) -> FloatArray:
        return self.diameter / 2 - np.sqrt(np.einsum("ij,ij->i", points, points))

    def support(self, directions: FloatArray) -> FloatArray:
        return np.full(len(directions), self.diameter / 2)

    def steiner(self) -> tuple[float, float, float]:
        radius = self.diameter / 2
        return 4 / 3 * np.pi * radius**3, 4 * np.pi * radius**2, 4 * np.pi * radius

    @property
    def thinnest(self) -> float:
        return self.diameter


@dataclass(frozen=True, eq=False)
class Cuboid(Solid):
    """Box of full `sides` (x, y, z) whose edges and corners are rounded with radius `rounding`."""

    sides: tuple[float, float, float]
    rounding: float = 0.0

    exact = EXACT

    def __post_init__(self) -> None:
        positive(**{f"sides[{i}]": side for i, side in enumerate(self.sides)})
        require(
            0 <= self.rounding <= min(self.sides) / 2,
            f"rounding = {self.rounding:g} must lie between 0 and half the shortest side, "
            f"{min(self.sides) / 2:g} nm",
        )

    def signed_distance(self, points: FloatArray) -> FloatArray:
        inner = np.asarray(self.sides) / 2 - self.rounding
        beyond = np.abs(points) - inner
        outside = np.maximum(beyond, 0.0)
        distance = -np.sqrt(np.einsum("ij,ij->i", outside, outside))
        return distance - np.minimum(beyond.max(axis=1), 0.0) + self.rounding

    def support(self, directions: FloatArray) -> FloatArray:
        inner = np.asarray(self.sides) / 2 - self.rounding
        return np.abs(directions) @ inner + self.rounding

    def steiner(self) -> tuple[float, float, float]:
        # the inner box grown by the rounding; a box has M = pi (a + b + c)
        a, b, c = np.asarray(self.sides) - 2 * self.rounding
        r = self.rounding
        area, mean = 2 * (a * b + b * c + c * a), np.pi * (a + b + c)
        return (
            float(a * b * c + area * r + mean * r**2 + 4 * np.pi / 3 * r**3),
            float(area + 2 * mean * r + 4 * np.pi * r**2),
            float(mean + 4 * np.pi * r),
        )

    def fill(self, grid: SampleGrid) -> NDArray[np.float32]:
        if self.rounding > 0:
            return super().fill(grid)
        # a sharp box fills the product of what it fills along each axis, edges included
        parts = [
            np.clip(0.5 + (side / 2 - np.abs(axis)) / grid.step, 0.0, min(1.0, side / grid.step))
            for axis, side in zip(grid.axes, self.sides, strict=True)
        ]
        filled = parts[0][:, None, None] * parts[1][None, :, None] * parts[2]
        return filled.astype(np.float32)

    @property
    def thinnest(self) -> float:
        return min(self.sides)


@dataclass(frozen=True, eq=False)
class Capsule(Solid):
    """Rod along z with hemispherical caps; `length` is the total length, caps included."""

    length: float
    diameter: float

    exact = EXACT

    def __post_init__(self) -> None:
        positive(length=self.length, diameter=self.diameter)
        require(
            self.length >= self.diameter,
            f"length = {self.length:g} must be at least the diameter, {self.diameter:g} nm "
            "(it includes the two caps)",
        )

    @property
    def _straight(self) -> float:
        return self.length - self.diameter

    def signed_distance(self, points: FloatArray) -> FloatArray:
        along = np.maximum(np.abs(points[:, 2]) - self._straight / 2, 0.0)
        return self.diameter / 2 - np.sqrt(points[:, 0] ** 2 + points[:, 1] ** 2 + along**2)

    def support(self, directions: FloatArray) -> FloatArray:
        return np.abs(directions[:, 2]) * self._straight / 2 + self.diameter / 2

    def steiner(self) -> tuple[float, float, float]:
        r, straight = self.diameter / 2, self._straight
        return (
            np.pi * r**2 * straight + 4 / 3 * np.pi * r**3,
            2 * np.pi * r * straight + 4 * np.pi * r**2,
            np.pi * straight + 4 * np.pi * r,
        )

    @property
    def thinnest(self) -> float:
        return self.diameter


@dataclass(frozen=True, eq=False)
class Ellipsoid(Solid):
    """Ellipsoid of full `axes` (x, y, z); the distance is exact, by Newton's method."""

    axes: tuple[float, float, float]

    exact = EXACT

    def __post_init__(self) -> None:
        positive(**{f"axes[{i}]": axis for i, axis in enumerate(self.axes)})

    def signed_distance(self, points: FloatArray) -> FloatArray:
        half = np.asarray(self.axes, dtype=float) / 2
        return _ellipsoid_distance(np.ascontiguousarray(points, dtype=float), half)

    def support(self, directions: FloatArray) -> FloatArray:
        return np.linalg.norm(directions * (np.asarray(self.axes) / 2), axis=1)

    def steiner(self) -> tuple[float, float, float]:
        half = np.asarray(self.axes, dtype=float) / 2
        volume = 4 / 3 * np.pi * float(np.prod(half))
        return volume, ellipsoid_area(half), ellipsoid_mean_curvature(half)

    @property
    def thinnest(self) -> float:
        return min(self.axes)


def ellipsoid_area(half: FloatArray) -> float:
    """Area of the ellipsoid of half axes `half` (3,), nm^2 (Legendre's elliptic integrals).

    >>> round(ellipsoid_area(np.array([1.0, 1.0, 1.0])) / np.pi, 9)
    4.0
    """
    c, b, a = np.sort(half)
    if a - c < 1e-9 * a:
        return float(4 * np.pi * a * c)
    phi = np.arccos(c / a)
    m = a**2 * (b**2 - c**2) / (b**2 * (a**2 - c**2))
    sine = np.sin(phi)
    part = ellipeinc(phi, m) * sine**2 + ellipkinc(phi, m) * np.cos(phi) ** 2
    return float(2 * np.pi * c**2 + 2 * np.pi * a * b / sine * part)


def ellipsoid_mean_curvature(half: FloatArray) -> float:
    """Integrated mean curvature of an ellipsoid, nm: 2 pi times its mean width, by quadrature."""
    nodes, weights = np.polynomial.legendre.leggauss(200)
    phi = (np.arange(200) + 0.5) * (2 * np.pi / 200)
    sine = np.sqrt(1 - nodes**2)[:, None]
    reach = np.sqrt(
        (half[0] * sine * np.cos(phi)) ** 2
        + (half[1] * sine * np.sin(phi)) ** 2
        + (half[2] * nodes[:, None]) ** 2
    )
    return float(2 * np.pi * 2 * (weights @ reach.mean(axis=1)) / 2)


@numba.njit(cache=True, nogil=True)
def _ellipsoid_distance(points, half):  # type: ignore[no-untyped-def]
    """Signed distance; the closest point solves sum (a_i y_i/(t + a_i^2))^2 = 1."""
    out = np.empty(points.shape[0])
    smallest = half.min()
    for n in range(points.shape[0]):
        y0, y1, y2 = abs(points[n, 0]), abs(points[n, 1]), abs(points[n, 2])
        a0, a1, a2 = half[0] ** 2, half[1] ** 2, half[2] ** 2
        level = y0 * y0 / a0 + y1 * y1 / a1 + y2 * y2 / a2
        # f(t) falls and is convex right of -smallest^2: start left of the root and Newton climbs to
        # it
        t = -(smallest**2)
        for k in range(3):
            y = y0 if k == 0 else (y1 if k == 1 else y2)
            t = max(t, half[k] * y - half[k] ** 2)
        inside_axis = t <= -(smallest**2) * (1 - 1e-12)
        if inside_axis:
            t = -(smallest**2) * (1 - 1e-9)
        for _ in range(60):
            q0, q1, q2 = half[0] * y0 / (t + a0), half[1] * y1 / (t + a1), half[2] * y2 / (t + a2)
            value = q0 * q0 + q1 * q1 + q2 * q2 - 1.0
            if value <= 0.0:
                break
            slope = -2.0 * (q0 * q0 / (t + a0) + q1 * q1 / (t + a1) + q2 * q2 / (t + a2))
            step = value / slope
            t -= step
            if abs(step) < 1e-13 * (abs(t) + smallest**2):
                break
        x0, x1, x2 = a0 * y0 / (t + a0), a1 * y1 / (t + a1), a2 * y2 / (t + a2)
        short = 1.0 - x0 * x0 / a0 - x1 * x1 / a1 - x2 * x2 / a2
        gap = (x0 - y0) ** 2 + (x1 - y1) ** 2 + (x2 - y2) ** 2
        if short > 1e-12:
            # in the focal disc the closest point leaves the plane of the two longer axes
            gap += short * smallest**2
        out[n] = np.sqrt(gap) if level < 1.0 else -np.sqrt(gap)
    return out


@dataclass(frozen=True, eq=False)
class Torus(Solid):
    """Ring about z: `diameter` over all, `thickness` of the tube."""

    diameter: float
    thickness: float

    exact = EXACT

    def __post_init__(self) -> None:
        positive(diameter=self.diameter, thickness=self.thickness)
        require(
            self.thickness < self.diameter / 2,
            f"thickness = {self.thickness:g} must be less than half the diameter over all, "
            f"{self.diameter / 2:g} nm, or the hole closes",
        )

    @property
    def _middle(self) -> float:
        """Radius of the tube's middle line."""
        return (self.diameter - self.thickness) / 2

    def signed_distance(self, points: FloatArray) -> FloatArray:
        radial = np.hypot(points[:, 0], points[:, 1]) - self._middle
        return self.thickness / 2 - np.hypot(radial, points[:, 2])

    def support(self, directions: FloatArray) -> FloatArray:
        across = np.hypot(directions[:, 0], directions[:, 1])
        return across * self._middle + self.thickness / 2

    def volume(self) -> float:
        return 2 * np.pi**2 * self._middle * (self.thickness / 2) ** 2

    def area(self) -> float:
        return 4 * np.pi**2 * self._middle * (self.thickness / 2)

    @property
    def thinnest(self) -> float:
        return self.thickness
