"""Rough sphere: a sphere whose radius is a Gaussian random field over its surface."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numba
import numpy as np

from .body import FloatArray
from .solid import EXACT, Solid, positive, require

ROWS = 361  # of the table over the polar angle; the columns over the azimuth are twice as many
STRONGEST = 3.5  # degrees beyond this number over the correlation angle carry nothing


@dataclass(frozen=True, eq=False)
class RoughSphere(Solid):
    """Sphere with random bumps, about the origin, of the volume of a smooth one.

    The heights have the covariance exp(-(angle/correlation angle)^2/2) and come from spherical
    harmonics of degree 2 and up, so bumps neither grow nor move the sphere. Volume and area are
    quadratures of the harmonics, exact to about 1e-6; the bounding box is good to 1e-4.

    Attributes
    ----------
    diameter : float
        Of the sphere of the same volume, nm.
    roughness : float
        Root mean square of the heights, nm.
    correlation : float
        Distance along the surface over which heights are alike, nm.
    seed : int
    """

    diameter: float
    roughness: float
    correlation: float
    seed: int = 0

    exact = EXACT

    def __post_init__(self) -> None:
        positive(diameter=self.diameter, correlation=self.correlation)
        require(self.roughness >= 0, f"roughness = {self.roughness:g} must not be negative (nm)")
        require(
            self.correlation >= self.diameter / 30,
            f"correlation = {self.correlation:g} must be at least {self.diameter / 30:.3g} nm, "
            "a thirtieth of the diameter",
        )
        lowest = float(self._table[0].min())
        require(
            lowest > self.diameter / 8,
            f"roughness = {self.roughness:g} nm is too much for this sphere: its surface comes "
            f"within {lowest:.3g} nm of the centre",
        )

    @cached_property
    def _harmonics(self) -> FloatArray:
        """Amplitudes (degree, order, 2) of the unit-variance heights; cosine and sine terms."""
        angle = self.correlation / (self.diameter / 2)
        top = max(3, int(np.ceil(STRONGEST / angle)))
        degree = np.arange(top + 1)
        power = (2 * degree + 1) * np.exp(-degree * (degree + 1) * angle**2 / 2)
        power[:2] = 0
        rng = np.random.default_rng(self.seed)
        amplitudes = rng.standard_normal((top + 1, top + 1, 2))
        amplitudes *= np.tri(top + 1)[:, :, None]  # orders up to the degree
        amplitudes[:, 0, 1] = 0
        amplitudes *= np.sqrt(power / (2 * degree + 1))[:, None, None]
        return amplitudes / np.sqrt((amplitudes**2).sum())

    def _radius(self, polar: FloatArray, count: int) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Unscaled radius, and its slopes along and across the meridian, (rows, count) nm."""
        heights, slopes, across = _synthesis(self._harmonics, polar, count)
        base = self.diameter / 2
        r = self.roughness
        return base + r * heights, r * slopes, r * across

    @cached_property
    def _integrals(self) -> tuple[float, float, float]:
        """Scale that gives the smooth sphere's volume; volume and area after it."""
        count = 2 * max(64, 3 * len(self._harmonics))
        nodes, weights = np.polynomial.legendre.leggauss(count // 2)
        radius, slope, across = self._radius(np.arccos(nodes), count)
        cell = 2 * np.pi / count
        volume = float((weights @ radius**3).sum() * cell / 3)
        area = float((weights @ (radius * np.sqrt(radius**2 + slope**2 + across**2))).sum() * cell)
        scale = self.diameter / 2 * (4 * np.pi / 3 / volume) ** (1 / 3)
        return scale, volume * scale**3, area * scale**2

    @cached_property
    def _table(self) -> tuple[FloatArray, FloatArray]:
        """Radius, and cosine of the surface's tilt, on polar x azimuthal angles, poles included."""
        polar = np.linspace(0, np.pi, ROWS)
        inner = np.clip(polar, 1e-4, np.pi - 1e-4)  # the slopes divide by the sine
        radius, slope, across = self._radius(inner, 2 * (ROWS - 1))
        scale = self._integrals[0]
        upright = radius / np.sqrt(radius**2 + slope**2 + across**2)
        return np.ascontiguousarray(radius * scale), np.ascontiguousarray(upright)

    @cached_property
    def _steepness(self) -> float:
        """Bound on the gradient of radius minus distance, outside half of the least radius."""
        polar = np.linspace(1e-4, np.pi - 1e-4, ROWS)
        radius, slope, across = self._radius(polar, 2 * (ROWS - 1))
        tangential = np.sqrt(slope**2 + across**2).max() / (radius.min() / 2)
        return float(np.sqrt(1 + (1.05 * tangential) ** 2))

    def signed_distance(self, points: FloatArray) -> FloatArray:
        radius = self._table[0]
        height = _looked_up(np.ascontiguousarray(points, dtype=float), radius, radius)[:, 0]
        # flat near the centre, where directions change fast
        return np.minimum(height, radius.min() / 2) / self._steepness

    def surface_distance(self, points: FloatArray) -> FloatArray:
        values = _looked_up(np.ascontiguousarray(points, dtype=float), *self._table)
        return values[:, 0] * values[:, 1]

    def support(self, directions: FloatArray) -> FloatArray:
        radius = self._table[0]
        polar = np.linspace(0, np.pi, ROWS)[:, None]
        azimuth = np.arange(radius.shape[1]) * (2 * np.pi / radius.shape[1])
        sine, cosine = np.sin(polar), np.cos(polar)
        out = [
            (radius * (sine * (x * np.cos(azimuth) + y * np.sin(azimuth)) + cosine * z)).max()
            for x, y, z in directions
        ]
        return np.array(out)

    def volume(self) -> float:
        return self._integrals[1]

    def area(self) -> float:
        return self._integrals[2]

    @property
    def thinnest(self) -> float:
        return min(2 * float(self._table[0].min()), self.correlation)


def _synthesis(
    amplitudes: FloatArray, polar: FloatArray, count: int
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Sum of real harmonics and its slopes along and across the meridian, (rows, count).

    The Legendre functions are normalized so that each harmonic has unit mean square.
    """
    top = len(amplitudes) - 1
    cosine, sine = np.cos(polar), np.sin(polar)
    azimuth = np.arange(count) * (2 * np.pi / count)
    value = np.zeros((len(polar), count))
    slope, across = np.zeros_like(value), np.zeros_like(value)
    diagonal = np.ones_like(polar)
    for m in range(top + 1):
        if m > 0:
            diagonal = diagonal * sine * np.sqrt((2 * m + 1) / (2 * m))
        before, now = np.zeros_like(polar), diagonal
        rows = np.zeros((4, len(polar)))  # cosine, sine amplitudes, and their slopes
        for degree in range(m, top + 1):
            if degree > m:
                a = np.sqrt((4 * degree**2 - 1) / (degree**2 - m**2))
                b = np.sqrt(((degree - 1) ** 2 - m**2) / (4 * (degree - 1) ** 2 - 1))
                before, now = now, a * (cosine * now - b * before)
            c = np.sqrt((2 * degree + 1) / max(2 * degree - 1, 1) * (degree**2 - m**2))
            turned = (degree * cosine * now - c * before) / sine
            two = 1.0 if m == 0 else np.sqrt(2.0)
            for k in range(2):
                rows[k] += two * amplitudes[degree, m, k] * now
                rows[2 + k] += two * amplitudes[degree, m, k] * turned
        c, s = np.cos(m * azimuth), np.sin(m * azimuth)
        value += np.outer(rows[0], c) + np.outer(rows[1], s)
        slope += np.outer(rows[2], c) + np.outer(rows[3], s)
        across += m * (np.outer(rows[1], c) - np.outer(rows[0], s))
    return value, slope, across / sine[:, None]


@numba.njit(cache=True, nogil=True)
def _looked_up(points, radius, upright):  # type: ignore[no-untyped-def]
    """Radius less distance from the centre, and tilt, by bilinear interpolation, (N, 2)."""
    rows, columns = radius.shape
    out = np.empty((points.shape[0], 2))
    for n in range(points.shape[0]):
        x, y, z = points[n, 0], points[n, 1], points[n, 2]
        across = np.hypot(x, y)
        u = np.arctan2(across, z) / np.pi * (rows - 1)
        v = np.arctan2(y, x) / (2 * np.pi) * columns
        i = min(int(u), rows - 2)
        j = int(np.floor(v))
        du, dv = u - i, v - j
        j, k = j % columns, (j + 1) % columns
        r = (1 - du) * ((1 - dv) * radius[i, j] + dv * radius[i, k])
        r += du * ((1 - dv) * radius[i + 1, j] + dv * radius[i + 1, k])
        t = (1 - du) * ((1 - dv) * upright[i, j] + dv * upright[i, k])
        t += du * ((1 - dv) * upright[i + 1, j] + dv * upright[i + 1, k])
        out[n, 0] = r - np.hypot(across, z)
        out[n, 1] = t
    return out
