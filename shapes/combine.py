"""Combinations of solids: joined, cut, blended, moved, turned, scaled, grown, hollow.

Sharp combinations combine the fills of their members instead of evaluating one distance everywhere,
so that each member is sampled only where it is.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .body import Bounds, FloatArray, SampleGrid
from .solid import Solid, positive, require

EXACT = frozenset({"volume", "area", "bounds"})


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


def _thinnest(members: tuple[Solid, ...]) -> float | None:
    known = [m.thinnest for m in members if m.thinnest is not None]
    return min(known) if known else None


@dataclass(frozen=True, eq=False)
class Union(Solid):
    """All of several solids. `disjoint` says they do not overlap, so volumes and areas add."""

    members: tuple[Solid, ...]
    disjoint: bool = False

    def __post_init__(self) -> None:
        require(len(self.members) > 0, "a union needs at least one solid")

    @property
    def exact(self) -> frozenset[str]:  # type: ignore[override]
        common = frozenset.intersection(*(m.exact for m in self.members))
        return common if self.disjoint or len(self.members) == 1 else common & {"bounds"}

    def signed_distance(self, points: FloatArray) -> FloatArray:
        best = self.members[0].signed_distance(points)
        for member in self.members[1:]:
            best = np.maximum(best, member.signed_distance(points))
        return best

    def support(self, directions: FloatArray) -> FloatArray:
        return np.max([m.support(directions) for m in self.members], axis=0)

    def steiner(self) -> tuple[float, float, float] | None:
        return self.members[0].steiner() if len(self.members) == 1 else None

    def volume(self) -> float:
        if self.disjoint:
            return float(sum(m.volume() for m in self.members))
        return super().volume()

    def area(self) -> float:
        if self.disjoint:
            return float(sum(m.area() for m in self.members))
        return super().area()

    @property
    def thinnest(self) -> float | None:
        return _thinnest(self.members)

    def probes(self, number: int) -> FloatArray:
        return np.concatenate([m.probes(number) for m in self.members])

    def fill(self, grid: SampleGrid) -> NDArray[np.float32]:
        out = np.zeros(grid.shape, dtype=np.float32)
        for member in self.members:
            window = grid.window(member.bounds)
            if window is None:
                continue
            filled = member.fill(grid.cut(window))
            if self.disjoint:  # two that touch share a voxel without overlapping in it
                np.minimum(out[window] + filled, 1.0, out=out[window])
            else:
                np.maximum(out[window], filled, out=out[window])
        return out


@dataclass(frozen=True, eq=False)
class Intersection(Solid):
    """What several solids share. The bounds, of the boxes' intersection, may not be tight."""

    members: tuple[Solid, ...]

    exact = frozenset()

    def __post_init__(self) -> None:
        require(len(self.members) > 0, "an intersection needs at least one solid")
        low, high = self.bounds
        require(bool(np.all(low < high)), "the solids of this intersection do not overlap")

    @property
    def bounds(self) -> Bounds:
        boxes = [m.bounds for m in self.members]
        return np.max([b[0] for b in boxes], axis=0), np.min([b[1] for b in boxes], axis=0)

    def signed_distance(self, points: FloatArray) -> FloatArray:
        return np.min([m.signed_distance(points) for m in self.members], axis=0)

    def support(self, directions: FloatArray) -> FloatArray:
        return np.min([m.support(directions) for m in self.members], axis=0)

    def probes(self, number: int) -> FloatArray:
        return np.concatenate([m.probes(number) for m in self.members])

    def fill(self, grid: SampleGrid) -> NDArray[np.float32]:
        out = self.members[0].fill(grid)
        for member in self.members[1:]:
            np.minimum(out, member.fill(grid), out=out)
        return out


@dataclass(frozen=True, eq=False)
class Difference(Solid):
    """A solid without another. The bounds are those of the first, not always tight."""

    base: Solid
    removed: Solid

    exact = frozenset()

    def signed_distance(self, points: FloatArray) -> FloatArray:
        return np.minimum(self.base.signed_distance(points), -self.removed.signed_distance(points))

    def support(self, directions: FloatArray) -> FloatArray:
        return self.base.support(directions)

    def probes(self, number: int) -> FloatArray:
        return np.concatenate([self.base.probes(number), self.removed.probes(number)])

    def fill(self, grid: SampleGrid) -> NDArray[np.float32]:
        return np.minimum(self.base.fill(grid), 1.0 - self.removed.fill(grid))


@dataclass(frozen=True, eq=False)
class Blend(Solid):
    """Solids joined by smooth fillets: the polynomial smooth maximum of their distances.

    Where two distances differ by less than `radius` their maximum a is raised by (radius -
    difference)^2/(4 radius). Members are joined one after the other, each to all before it.
    """

    members: tuple[Solid, ...]
    radius: float

    exact = frozenset()

    def __post_init__(self) -> None:
        require(len(self.members) > 0, "a blend needs at least one solid")
        positive(radius=self.radius)

    @property
    def bounds(self) -> Bounds:
        low, high = Union(self.members).bounds
        if len(self.members) == 1:
            return low, high
        # a fillet raises the distance by radius/4 at most for each joint
        return low - self._bulge, high + self._bulge

    @property
    def _bulge(self) -> float:
        return self.radius / 4 * min(len(self.members) - 1, 2)

    def signed_distance(self, points: FloatArray) -> FloatArray:
        total = self.members[0].signed_distance(points)
        for member in self.members[1:]:
            other = member.signed_distance(points)
            overlap = np.maximum(self.radius - np.abs(total - other), 0.0)
            total = np.maximum(total, other) + overlap**2 / (4 * self.radius)
        return total

    def support(self, directions: FloatArray) -> FloatArray:
        return Union(self.members).support(directions) + self._bulge

    @property
    def thinnest(self) -> float | None:
        return _thinnest(self.members)

    def probes(self, number: int) -> FloatArray:
        return np.concatenate([m.probes(number) for m in self.members])


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

    Exact where the solid's distance is: primitives, and unions outside.
    """

    base: Solid
    distance: float

    def __post_init__(self) -> None:
        low, high = self.bounds
        require(
            bool(np.all(high > low)),
            f"taking {-self.distance:g} nm off all sides leaves nothing of a solid that is "
            f"{np.min(high - low) - 2 * self.distance:g} nm thin",
        )

    @property
    def exact(self) -> frozenset[str]:  # type: ignore[override]
        if self.distance >= 0 and self.base.steiner() is not None:
            return EXACT
        return self.base.exact & {"bounds"} if self.distance >= 0 else frozenset()

    @property
    def bounds(self) -> Bounds:
        low, high = self.base.bounds
        return low - self.distance, high + self.distance

    def signed_distance(self, points: FloatArray) -> FloatArray:
        return self.base.signed_distance(points) + self.distance

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
