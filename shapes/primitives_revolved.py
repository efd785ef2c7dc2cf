"""Primitives of revolution about z with straight outlines: cylinder, disk, cone, frustum.

Centred on the origin: half of the height lies above it.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from .body import FloatArray
from .solid import EXACT, Solid, positive, require


@dataclass(frozen=True, eq=False)
class Frustum(Solid):
    """Frustum about z with rounded rims: `bottom` and `top` diameter, `height`, `rounding` radius.

    Diameters and height are those of the sharp frustum; equal diameters make a cylinder, a top of
    zero a cone. The solid is a smaller sharp frustum grown by the rounding, so the distance is
    exact.
    """

    bottom: float
    top: float
    height: float
    rounding: float = 0.0

    exact = EXACT

    def __post_init__(self) -> None:
        positive(height=self.height, width=max(self.bottom, self.top))
        require(
            min(self.bottom, self.top) >= 0,
            f"the diameters {self.bottom:g} and {self.top:g} nm must not be negative",
        )
        require(self.rounding >= 0, f"rounding = {self.rounding:g} must not be negative (nm)")
        lower, upper, low, high = self._core
        require(
            high >= low and lower >= 0 and upper >= 0,
            f"rounding = {self.rounding:g} is too large for a frustum of diameters "
            f"{self.bottom:g} and {self.top:g} and height {self.height:g} nm",
        )

    @cached_property
    def _core(self) -> tuple[float, float, float, float]:
        """Bottom and top radius, bottom and top z of the sharp frustum inside."""
        r = self.rounding
        b, t, h = self.bottom / 2, self.top / 2, self.height
        low, high = -h / 2 + r, h / 2 - r
        slope = (t - b) / h  # of the radius with z
        # the slanted side moves in by r along its normal, that is r sqrt(1 + slope^2) radially
        inward = r * np.sqrt(1 + slope**2)
        lower, upper = b + slope * r - inward, t - slope * r - inward
        if upper < 0 < lower and slope < 0:  # the apex of the inner cone lies below the inner top
            high, upper = low - lower / slope, 0.0
        elif lower < 0 < upper and slope > 0:
            low, lower = high - upper / slope, 0.0
        return float(lower), float(upper), float(low), float(high)

    def signed_distance(self, points: FloatArray) -> FloatArray:
        lower, upper, low, high = self._core
        rho, z = np.hypot(points[:, 0], points[:, 1]), points[:, 2]
        # to the two discs
        above = np.hypot(np.maximum(rho - upper, 0.0), z - high)
        below = np.hypot(np.maximum(rho - lower, 0.0), z - low)
        # to the slanted side
        dr, dz = upper - lower, high - low
        square = dr**2 + dz**2
        share = np.clip(((rho - lower) * dr + (z - low) * dz) / max(square, 1e-300), 0.0, 1.0)
        side = np.hypot(rho - lower - share * dr, z - low - share * dz)
        distance = np.minimum(np.minimum(above, below), side)
        inside = (z > low) & (z < high) & ((rho - lower) * dz < (z - low) * dr)
        return np.where(inside, distance, -distance) + self.rounding

    def support(self, directions: FloatArray) -> FloatArray:
        lower, upper, low, high = self._core
        across, up = np.hypot(directions[:, 0], directions[:, 1]), directions[:, 2]
        return np.maximum(lower * across + low * up, upper * across + high * up) + self.rounding

    def steiner(self) -> tuple[float, float, float]:
        lower, upper, low, high = self._core
        h = high - low
        slant = np.hypot(upper - lower, h)
        volume = np.pi * h / 3 * (lower**2 + lower * upper + upper**2)
        area = np.pi * (lower**2 + upper**2 + (lower + upper) * slant)
        # exterior angles at the rims, from the direction of the side's normal
        tilt = np.arctan2(lower - upper, h)
        mean = np.pi * h
        mean += np.pi * lower * (np.pi / 2 + tilt) + np.pi * upper * (np.pi / 2 - tilt)
        r = self.rounding
        return (
            float(volume + area * r + mean * r**2 + 4 * np.pi / 3 * r**3),
            float(area + 2 * mean * r + 4 * np.pi * r**2),
            float(mean + 4 * np.pi * r),
        )

    @property
    def thinnest(self) -> float | None:
        if min(self.bottom, self.top) > 0:
            return min(self.height, self.bottom, self.top)
        # a sharp tip has no thickness that cells could resolve
        return min(self.height, 2 * self.rounding) if self.rounding > 0 else None
