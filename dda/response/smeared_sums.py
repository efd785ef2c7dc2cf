"""Compiled sums over smeared dipoles.

The density of a ball of radius a is ``h/(4 pi a^3) (1 - r^2/a^2)^3`` with h = 315/16, so that it
integrates to one. The field of a ball is that of the point times the part of the density within r,
less the local term of the density.
"""

from __future__ import annotations

import math

import numpy as np
from numba import njit

HEIGHT = 315 / 16


def held_part(s: np.ndarray) -> np.ndarray:
    """Part of a ball's density within r = s a; 1 outside.

    >>> held_part(np.array([0.0, 1.0, 3.0])).round(12).tolist()
    [0.0, 1.0, 1.0]
    """
    s = np.clip(s, 0, 1)
    return HEIGHT * s**3 * (1 / 3 + s**2 * (-3 / 5 + s**2 * (3 / 7 - s**2 / 9)))


def phase_count(reach: float) -> int:
    """Entries of the table of exp(ix), which is continued by its series to the third order.

    A step of 0.04 leaves an error of 0.02^4/24 < 1e-8.
    """
    return 2 + math.ceil(reach / 0.04)


@njit(nogil=True, cache=True, fastmath=True, error_model="numpy", inline="always")
def _ball(r, radius):  # pragma: no cover - compiled
    """Part of the density within r over r^3, and the local term over r^2, at 0 < r."""
    s = r * r / (radius * radius)
    if s >= 1:
        return 1 / (r * r * r), 0.0
    held = HEIGHT * (1 / 3 + s * (-0.6 + s * (3 / 7 - s / 9))) / radius**3
    return held, HEIGHT * (1 - s) ** 3 / (radius**3 * r * r)


@njit(nogil=True, cache=True, fastmath=True, error_model="numpy")
def add_all(
    points, positions, p, k, radius, phases, step, magnetic, e, h, start, stop
):  # pragma: no cover - compiled
    """Add the fields of all dipoles at the points start .. stop to `e` and `h`."""
    for t in range(start, stop):
        ex = ey = ez = hx = hy = hz = 0j
        for j in range(len(positions)):
            x = points[t, 0] - positions[j, 0]
            y = points[t, 1] - positions[j, 1]
            z = points[t, 2] - positions[j, 2]
            r = max(math.sqrt(x * x + y * y + z * z), 1e-6 * radius)
            held, spread = _ball(r, radius)
            kr = k * r
            i = int(kr / step + 0.5)
            f = kr - i * step
            wave = phases[i] * complex(1 - 0.5 * f * f, f * (1 - f * f / 6)) * held
            near = complex(1, -kr)
            iso = wave * (kr * kr - near)
            dyad = wave * (3 * near - kr * kr) / (r * r) - spread
            along = dyad * (x * p[j, 0] + y * p[j, 1] + z * p[j, 2])
            ex += iso * p[j, 0] + along * x
            ey += iso * p[j, 1] + along * y
            ez += iso * p[j, 2] + along * z
            if magnetic:
                turn = wave * k * complex(kr, 1)
                hx += turn * (y * p[j, 2] - z * p[j, 1])
                hy += turn * (z * p[j, 0] - x * p[j, 2])
                hz += turn * (x * p[j, 1] - y * p[j, 0])
        e[t, 0] += ex
        e[t, 1] += ey
        e[t, 2] += ez
        if magnetic:
            h[t, 0] += hx
            h[t, 1] += hy
            h[t, 2] += hz


@njit(nogil=True, cache=True, fastmath=True, error_model="numpy")
def add_close(
    points, origin, spacing, row, p, k, radius, wide, magnetic, e, h, start, stop
):  # pragma: no cover - compiled
    """Add what narrow balls have more than wide ones, from the cells within `wide`."""
    low = np.empty(3, np.int64)
    high = np.empty(3, np.int64)
    for t in range(start, stop):
        _reach(points[t], origin, spacing, wide, row.shape, low, high)
        for i in range(low[0], high[0] + 1):
            x = points[t, 0] - origin[0] - i * spacing
            for j in range(low[1], high[1] + 1):
                y = points[t, 1] - origin[1] - j * spacing
                for l in range(low[2], high[2] + 1):
                    z = points[t, 2] - origin[2] - l * spacing
                    cell = row[i, j, l]
                    r2 = x * x + y * y + z * z
                    if cell < 0 or r2 >= wide * wide:
                        continue
                    r = max(math.sqrt(r2), 1e-6 * radius)
                    narrow, peak = _ball(r, radius)
                    broad, hill = _ball(r, wide)
                    kr = k * r
                    wave = complex(math.cos(kr), math.sin(kr)) * (narrow - broad)
                    near = complex(1, -kr)
                    iso = wave * (kr * kr - near)
                    dyad = wave * (3 * near - kr * kr) / (r * r) - (peak - hill)
                    px, py, pz = p[cell, 0], p[cell, 1], p[cell, 2]
                    along = dyad * (x * px + y * py + z * pz)
                    e[t, 0] += iso * px + along * x
                    e[t, 1] += iso * py + along * y
                    e[t, 2] += iso * pz + along * z
                    if magnetic:
                        turn = wave * k * complex(kr, 1)
                        h[t, 0] += turn * (y * pz - z * py)
                        h[t, 1] += turn * (z * px - x * pz)
                        h[t, 2] += turn * (x * py - y * px)


@njit(nogil=True, cache=True)
def add_surroundings(
    points, origin, spacing, row, p, window, tensor, radius, density, fraction, structure, start,
    stop,
):  # fmt: skip  # pragma: no cover - compiled
    """Add averages over the balls around the points start .. stop, see `Surroundings`."""
    low = np.empty(3, np.int64)
    high = np.empty(3, np.int64)
    scale = HEIGHT / radius**3
    for t in range(start, stop):
        _reach(points[t], origin, spacing, radius, row.shape, low, high)
        for i in range(low[0], high[0] + 1):
            x = points[t, 0] - origin[0] - i * spacing
            for j in range(low[1], high[1] + 1):
                y = points[t, 1] - origin[1] - j * spacing
                for l in range(low[2], high[2] + 1):
                    z = points[t, 2] - origin[2] - l * spacing
                    s = (x * x + y * y + z * z) / (radius * radius)
                    cell = row[i, j, l]
                    if cell < 0 or s >= 1:
                        continue
                    value = scale * (1 - s) ** 3  # 4 pi times the density
                    part = value * spacing**3 / (4 * math.pi)
                    for c in range(3):
                        density[t, c] += value * p[cell, c]
                    for c in range(window.shape[1]):
                        fraction[t, c] += part * window[cell, c]
                    for c in range(6):
                        structure[t, c] += part * tensor[cell, c]


@njit(nogil=True, cache=True)
def _reach(point, origin, spacing, radius, shape, low, high):  # pragma: no cover - compiled
    """Range of cells along each axis within `radius` of a point."""
    for c in range(3):
        # points far away must not overflow the integers
        place = min(max((point[c] - origin[c]) / spacing, -1e6), 1e6)
        low[c] = max(0, math.ceil(place - radius / spacing))
        high[c] = min(shape[c] - 1, math.floor(place + radius / spacing))
