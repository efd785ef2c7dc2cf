"""Combinations of solids: joined, cut, blended.

Sharp combinations combine the fills of their members instead of evaluating one distance everywhere,
so that each member is sampled only where it is.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from .body import FloatArray, SampleGrid
from .solid import Solid, positive, require


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
    """What several solids share."""

    members: tuple[Solid, ...]

    exact = frozenset()

    def __post_init__(self) -> None:
        require(len(self.members) > 0, "an intersection needs at least one solid")

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
    """A solid without another."""

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
    def _bulge(self) -> float:
        # a joint raises the distance by radius/4 at most
        return self.radius / 4 * (len(self.members) - 1)

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
