"""Hollow cube frame."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .body import FloatArray
from .primitives import Cuboid
from .solid import Solid, positive, require


@dataclass(frozen=True, eq=False)
class Frame(Solid):
    """Twelve square bars of width `bar` along the edges of a cube, their edges rounded."""

    edge: float
    bar: float
    rounding: float = 0.0

    def __post_init__(self) -> None:
        positive(edge=self.edge, bar=self.bar)
        require(
            self.bar < self.edge / 2,
            f"bar = {self.bar:g} must be less than half the edge, {self.edge / 2:g} nm",
        )
        assert self._one is not None

    @property
    def _one(self) -> Cuboid:
        return Cuboid((self.edge, self.bar, self.bar), self.rounding)

    @property
    def exact(self) -> frozenset[str]:  # type: ignore[override]
        return frozenset({"bounds"} if self.rounding else {"volume", "area", "bounds"})

    def signed_distance(self, points: FloatArray) -> FloatArray:
        folded = np.abs(points)  # the nearest bars are those of the same octant
        centre = np.array([0.0, 1.0, 1.0]) * (self.edge - self.bar) / 2
        bars = [self._one.signed_distance(np.roll(folded, k, axis=1) - centre) for k in range(3)]
        return np.max(bars, axis=0)

    def support(self, directions: FloatArray) -> FloatArray:
        return Cuboid((self.edge,) * 3, self.rounding).support(directions)

    def volume(self) -> float:
        if self.rounding:
            return super().volume()
        return 12 * self.bar**2 * (self.edge - 2 * self.bar) + 8 * self.bar**3

    def area(self) -> float:
        if self.rounding:
            return super().area()
        hole = self.edge - 2 * self.bar
        return 6 * (self.edge**2 - hole**2) + 24 * self.bar * hole

    @property
    def thinnest(self) -> float:
        return self.bar
