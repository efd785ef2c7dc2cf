"""Primitives swept by a sphere: tapered spikes and helical wires."""

from __future__ import annotations

from dataclasses import dataclass

import numba
import numpy as np

from .body import FloatArray
from .solid import EXACT, Solid, positive, require

SCAN = 24  # points a turn at which the search for the nearest point of a helix starts
NEWTON = 6


@dataclass(frozen=True, eq=False)
class Spike(Solid):
    """Hull of two spheres: radius `base` at the origin and `tip` at `length` along +z, nm."""

    length: float
    base: float
    tip: float

    exact = EXACT

    def __post_init__(self) -> None:
        positive(length=self.length, base=self.base, tip=self.tip)
        require(
            abs(self.base - self.tip) < self.length,
            f"a spike of base radius {self.base:g} and tip radius {self.tip:g} must be longer than "
            f"their difference; its length is {self.length:g} nm",
        )

    @property
    def _lean(self) -> tuple[float, float]:
        """Sine and cosine of the half angle of the cone between the spheres."""
        sine = (self.base - self.tip) / self.length
        return sine, float(np.sqrt(1 - sine**2))

    def signed_distance(self, points: FloatArray) -> FloatArray:
        sine, cosine = self._lean
        rho, z = np.hypot(points[:, 0], points[:, 1]), points[:, 2]
        along = z - rho * sine / cosine  # where the normal of the cone through the point starts
        centre = np.clip(along, 0.0, self.length)
        radius = self.base - sine * centre
        return radius - np.hypot(rho, z - centre)

    def support(self, directions: FloatArray) -> FloatArray:
        return np.maximum(self.base, self.length * directions[:, 2] + self.tip)

    def steiner(self) -> tuple[float, float, float]:
        sine, cosine = self._lean
        low, high = self.base * sine, self.length + self.tip * sine
        lower, upper = self.base * cosine, self.tip * cosine
        h = high - low
        volume = np.pi * h / 3 * (lower**2 + lower * upper + upper**2)
        for radius, height in (
            (self.base, self.base + low),
            (self.tip, self.tip - self.tip * sine),
        ):
            volume += np.pi * height**2 * (3 * radius - height) / 3
        area = np.pi * (lower + upper) * np.hypot(lower - upper, h)
        area += 2 * np.pi * self.base * (self.base + low)
        area += 2 * np.pi * self.tip * (self.tip - self.tip * sine)
        # 2 pi times the mean width: the mean of the support over all directions, doubled
        mean = np.pi * h + 2 * np.pi * (self.base + low) + 2 * np.pi * self.tip * (1 - sine)
        return float(volume), float(area), float(mean)

    @property
    def thinnest(self) -> float:
        return 2 * min(self.base, self.tip)


@dataclass(frozen=True, eq=False)
class Helix(Solid):
    """Wire of diameter `thickness` wound about z, hemispherical ends, centred on the origin.

    Attributes
    ----------
    diameter : float
        Of the cylinder on which the wire's middle line lies, nm.
    pitch : float
        Rise in one turn, nm.
    turns : float
        Number of turns.
    thickness : float
        Diameter of the wire, nm.
    hand : int
        +1 for a right-handed helix (it turns counter-clockwise as it rises), -1 for a left-handed.
    """

    diameter: float
    pitch: float
    turns: float
    thickness: float
    hand: int = 1

    exact = EXACT

    def __post_init__(self) -> None:
        positive(
            diameter=self.diameter, pitch=self.pitch, turns=self.turns, thickness=self.thickness
        )
        require(self.hand in (1, -1), f"hand = {self.hand} must be 1 (right) or -1 (left)")
        slope = np.hypot(self.diameter / 2, self.pitch / (2 * np.pi))
        clearance = self.pitch * (self.diameter / 2) / slope
        require(
            self.turns <= 1 or self.thickness < clearance,
            f"thickness = {self.thickness:g} must be less than {clearance:.4g} nm, or neighbouring "
            f"turns of pitch {self.pitch:g} nm touch",
        )
        curvature = (self.diameter / 2) / slope**2
        require(
            self.thickness / 2 < 1 / curvature,
            f"thickness = {self.thickness:g} must be less than {2 / curvature:.4g} nm, twice the "
            "radius of curvature of the wire",
        )

    @property
    def _end(self) -> float:
        """Half of the angle that the wire winds through, radians."""
        return np.pi * self.turns

    def signed_distance(self, points: FloatArray) -> FloatArray:
        rise = self.hand * self.pitch / (2 * np.pi)
        middle = _helix_distance(
            np.ascontiguousarray(points, dtype=float), self.diameter / 2, rise, self._end
        )
        return self.thickness / 2 - middle

    def support(self, directions: FloatArray) -> FloatArray:
        radius, rise = self.diameter / 2, self.hand * self.pitch / (2 * np.pi)
        out = np.empty(len(directions))
        for row, (x, y, z) in enumerate(directions):
            # radius (x cos t + y sin t) + rise z t is largest at an end or where its slope is zero
            candidates = [-self._end, self._end]
            size, phase = np.hypot(x, y), np.arctan2(y, x)
            if size > 0 and abs(rise * z) <= radius * size:
                lag = np.arcsin(rise * z / (radius * size))
                for first in (phase + lag, phase + np.pi - lag):
                    turns = np.arange(-np.ceil(self.turns) - 2, np.ceil(self.turns) + 3)
                    candidates += [t for t in first + 2 * np.pi * turns if abs(t) <= self._end]
            t = np.asarray(candidates)
            reach = radius * (x * np.cos(t) + y * np.sin(t)) + rise * z * t
            out[row] = reach.max() + self.thickness / 2
        return out

    @property
    def wire(self) -> float:
        """Length of the wire's middle line, nm."""
        return float(2 * self._end * np.hypot(self.diameter / 2, self.pitch / (2 * np.pi)))

    def volume(self) -> float:
        # a tube has the volume of a straight one of its middle line's length (Pappus)
        r = self.thickness / 2
        return float(np.pi * r**2 * self.wire + 4 / 3 * np.pi * r**3)

    def area(self) -> float:
        r = self.thickness / 2
        return float(2 * np.pi * r * self.wire + 4 * np.pi * r**2)

    @property
    def thinnest(self) -> float:
        return self.thickness


@numba.njit(cache=True, nogil=True)
def _helix_distance(points, radius, rise, end):  # type: ignore[no-untyped-def]
    """Distance from the curve (radius cos t, radius sin t, rise t), |t| <= end."""
    out = np.empty(points.shape[0])
    count = max(int(np.ceil(2 * end / (2 * np.pi) * SCAN)), 2)
    step = 2 * end / count
    for n in range(points.shape[0]):
        x, y, z = points[n, 0], points[n, 1], points[n, 2]
        best, start = np.inf, 0.0
        for i in range(count + 1):
            t = -end + i * step
            gap = z - rise * t
            square = (x - radius * np.cos(t)) ** 2 + (y - radius * np.sin(t)) ** 2 + gap * gap
            if square < best:
                best, start = square, t
        low, high = max(start - step, -end), min(start + step, end)
        t = start
        for _ in range(NEWTON):
            cosine, sine = np.cos(t), np.sin(t)
            # half of the square's slope, and the slope's slope
            slope = radius * (x * sine - y * cosine) - rise * (z - rise * t)
            bend = radius * (x * cosine + y * sine) + rise * rise
            if bend <= 0:
                break
            t = min(max(t - slope / bend, low), high)
        gap = z - rise * t
        square = (x - radius * np.cos(t)) ** 2 + (y - radius * np.sin(t)) ** 2 + gap * gap
        out[n] = np.sqrt(min(square, best))
    return out
