"""One solid changed: moved, turned or mirrored, scaled, grown, hollowed."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .body import Bounds, FloatArray, SampleGrid
from .combine import Union
from .solid import EXACT, Solid, positive, require


def rotation_matrix(angle: float, axis: ArrayLike) -> FloatArray:
    """Matrix that turns by `angle` degrees about `axis`, (3, 3); quarter turns are exact.

    >>> rotation_matrix(90, (0, 0, 1)) @ (1, 0, 0)
    array([0., 1., 0.])
    """
    vector: FloatArray = np.asarray(axis, dtype=float).reshape(3)
    length = np.linalg.norm(vector)
    require(bool(np.isfinite(length) and length > 0), f"rotation axis {axis!r} must not be zero")
    x, y, z = vector / length
    cosine, sine = np.cos(np.radians(angle)), np.sin(np.radians(angle))
    if angle % 90 == 0:
        cosine, sine = np.round(cosine), np.round(sine)
    cross = np.array([[0, -z, y], [z, 0, -x], [-y, x, 0]])
    return np.eye(3) * cosine + sine * cross + (1 - cosine) * np.outer([x, y, z], [x, y, z])


@dataclass(frozen=True, eq=False)
class Moved(Solid):
    """A solid moved by an offset, nm."""

    base: Solid
    offset: FloatArray

    def __post_init__(self) -> None:
        object.__setattr__(self, "offset", np.asarray(self.offset, dtype=float).reshape(3))
        require(bool(np.all(np.isfinite(self.offset))), f"offset {self.offset} must be finite")

    @property
    def exact(self) -> frozenset[str]:  # type: ignore[override]
        return self.base.exact

    @property
    def bounds(self) -> Bounds:
        low, high = self.base.bounds
        return low + self.offset, high + self.offset

    def signed_distance(self, points: FloatArray) -> FloatArray:
        return self.base.signed_distance(points - self.offset)

    def surface_distance(self, points: FloatArray) -> FloatArray:
        return self.base.surface_distance(points - self.offset)

    def support(self, directions: FloatArray) -> FloatArray:
        return self.base.support(directions) + directions @ self.offset

    def steiner(self) -> tuple[float, float, float] | None:
        return self.base.steiner()

    def volume(self) -> float:
        return self.base.volume()

    def area(self) -> float:
        return self.base.area()

    @property
    def thinnest(self) -> float | None:
        return self.base.thinnest

    @property
    def pivot(self) -> FloatArray:
        return self.base.pivot + self.offset

    def probes(self, number: int) -> FloatArray:
        return self.base.probes(number) + self.offset

    def fill(self, grid: SampleGrid) -> NDArray[np.float32]:
        return self.base.fill(SampleGrid(grid.origin - self.offset, grid.step, grid.shape))


@dataclass(frozen=True, eq=False)
class Turned(Solid):
    """A solid turned or mirrored about the origin by an orthogonal matrix."""

    base: Solid
    matrix: FloatArray

    @property
    def exact(self) -> frozenset[str]:  # type: ignore[override]
        return self.base.exact

    def signed_distance(self, points: FloatArray) -> FloatArray:
        return self.base.signed_distance(points @ self.matrix)

    def surface_distance(self, points: FloatArray) -> FloatArray:
        return self.base.surface_distance(points @ self.matrix)

    def support(self, directions: FloatArray) -> FloatArray:
        return self.base.support(directions @ self.matrix)

    def steiner(self) -> tuple[float, float, float] | None:
        return self.base.steiner()

    def volume(self) -> float:
        return self.base.volume()

    def area(self) -> float:
        return self.base.area()

    @property
    def thinnest(self) -> float | None:
        return self.base.thinnest

    @property
    def pivot(self) -> FloatArray:
        return self.matrix @ self.base.pivot

    def probes(self, number: int) -> FloatArray:
        return self.base.probes(number) @ self.matrix.T

    def fill(self, grid: SampleGrid) -> NDArray[np.float32]:
        if isinstance(self.base, Union):  # turn the members, so that each is sampled where it is
            turned = tuple(Turned(m, self.matrix) for m in self.base.members)
            return Union(turned, self.base.disjoint).fill(grid)
        if isinstance(self.base, Moved):
            return Moved(Turned(self.base.base, self.matrix), self.matrix @ self.base.offset).fill(
                grid
            )
        return super().fill(grid)


@dataclass(frozen=True, eq=False)
class Scaled(Solid):
    """A solid made larger by a factor about the origin."""

    base: Solid
    factor: float

    def __post_init__(self) -> None:
        positive(factor=self.factor)

    @property
    def exact(self) -> frozenset[str]:  # type: ignore[override]
        return self.base.exact

    @property
    def bounds(self) -> Bounds:
        low, high = self.base.bounds
        return low * self.factor, high * self.factor

    def signed_distance(self, points: FloatArray) -> FloatArray:
        return self.factor * self.base.signed_distance(points / self.factor)

    def surface_distance(self, points: FloatArray) -> FloatArray:
        return self.factor * self.base.surface_distance(points / self.factor)

    def support(self, directions: FloatArray) -> FloatArray:
        return self.factor * self.base.support(directions)

    def steiner(self) -> tuple[float, float, float] | None:
        known = self.base.steiner()
        if known is None:
            return None
        k = self.factor
        return known[0] * k**3, known[1] * k**2, known[2] * k

    def volume(self) -> float:
        return self.base.volume() * self.factor**3

    def area(self) -> float:
        return self.base.area() * self.factor**2

    @property
    def thinnest(self) -> float | None:
        return None if self.base.thinnest is None else self.base.thinnest * self.factor

    @property
    def pivot(self) -> FloatArray:
        return self.base.pivot * self.factor

    def probes(self, number: int) -> FloatArray:
        return self.base.probes(number) * self.factor

    def fill(self, grid: SampleGrid) -> NDArray[np.float32]:
        k = self.factor
        return self.base.fill(SampleGrid(grid.origin / k, grid.step / k, grid.shape))


@dataclass(frozen=True, eq=False)
class Grown(Solid):
    """A solid with a layer put on (distance > 0) or taken off (distance < 0), nm.

    Exact where the solid's distance is: for primitives, and outside for unions of them.
    """

    base: Solid
    distance: float

    def __post_init__(self) -> None:
        low, high = self.base.bounds
        require(
            bool(np.min(high - low) > -2 * self.distance),
            f"taking {-self.distance:g} nm off all sides leaves nothing of a solid that is "
            f"{np.min(high - low):g} nm thin",
        )

    @property
    def exact(self) -> frozenset[str]:  # type: ignore[override]
        if self.distance >= 0 and self.base.steiner() is not None:
            return EXACT
        return self.base.exact & {"bounds"} if self.distance >= 0 else frozenset()

    def signed_distance(self, points: FloatArray) -> FloatArray:
        return self.base.signed_distance(points) + self.distance

    def fill(self, grid: SampleGrid) -> NDArray[np.float32]:
        if isinstance(self.base, Union) and self.distance >= 0:
            # a layer on a union is the union of layers, each sampled where it is
            return Union(tuple(Grown(m, self.distance) for m in self.base.members)).fill(grid)
        return super().fill(grid)

    def support(self, directions: FloatArray) -> FloatArray:
        return self.base.support(directions) + self.distance

    def steiner(self) -> tuple[float, float, float] | None:
        known = self.base.steiner()
        if known is None or self.distance < 0:
            return None
        volume, area, mean = known
        t = self.distance
        return (
            volume + area * t + mean * t**2 + 4 * np.pi / 3 * t**3,
            area + 2 * mean * t + 4 * np.pi * t**2,
            mean + 4 * np.pi * t,
        )

    @property
    def thinnest(self) -> float | None:
        thin = self.base.thinnest
        return None if thin is None else max(thin + 2 * self.distance, 0.0)

    @property
    def pivot(self) -> FloatArray:
        return self.base.pivot

    def probes(self, number: int) -> FloatArray:
        return self.base.probes(number)


@dataclass(frozen=True, eq=False)
class Shell(Solid):
    """The outermost `thickness` nm of a solid."""

    base: Solid
    thickness: float

    def __post_init__(self) -> None:
        positive(thickness=self.thickness)

    @property
    def exact(self) -> frozenset[str]:  # type: ignore[override]
        return self.base.exact & {"bounds"}

    @property
    def bounds(self) -> Bounds:
        return self.base.bounds

    def signed_distance(self, points: FloatArray) -> FloatArray:
        outer = self.base.signed_distance(points)
        return np.minimum(outer, self.thickness - outer)

    def surface_distance(self, points: FloatArray) -> FloatArray:
        outer = self.base.surface_distance(points)
        return np.minimum(outer, self.thickness - self.base.signed_distance(points))

    def support(self, directions: FloatArray) -> FloatArray:
        return self.base.support(directions)

    @property
    def thinnest(self) -> float | None:
        return self.thickness

    @property
    def pivot(self) -> FloatArray:
        return self.base.pivot

    def probes(self, number: int) -> FloatArray:
        return self.base.probes(number)
