"""What a spectrum says at a glance: where the peak is, how high and how wide."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray


@dataclass(frozen=True)
class Peak:
    """The highest maximum of a spectrum.

    Attributes
    ----------
    position : float
        Wavelength of the maximum, nm: the vertex of the parabola through the highest value and
        its two neighbours.
    height : float
        Value at the vertex.
    blue, red : float or None
        Wavelengths at which the spectrum has fallen to half the height on the short and on the
        long side, nm; None when it does not fall that far within the spectrum.
    """

    position: float
    height: float
    blue: float | None
    red: float | None

    @property
    def width(self) -> float | None:
        """Full width at half maximum, nm; None when a side does not fall to one half."""
        if self.blue is None or self.red is None:
            return None
        return self.red - self.blue


def find_peak(wavelength: ArrayLike, value: ArrayLike) -> Peak | None:
    """Return the highest maximum that lies inside a spectrum.

    The ends of a spectrum are no maxima, however high: the true one may lie beyond them.

    Parameters
    ----------
    wavelength : (n,) array
        nm, in any order. Points whose value is not finite are left out.
    value : (n,) array
        The spectrum, for example C_ext in nm^2.

    Returns
    -------
    Peak or None
        None when the spectrum has no maximum between its ends.

    Examples
    --------
    >>> peak = find_peak([500, 510, 520, 530], [1.0, 3.0, 3.0, 1.0])
    >>> round(peak.position, 6), round(peak.height, 6), round(peak.width, 6)
    (515.0, 3.25, 23.75)
    """
    x, y = _ordered(wavelength, value)
    inside = np.arange(1, len(x) - 1)
    tops = inside[(y[inside] >= y[inside - 1]) & (y[inside] > y[inside + 1])]
    if len(tops) == 0:
        return None
    top = int(tops[np.argmax(y[tops])])
    position, height = _vertex(x[top - 1 : top + 2], y[top - 1 : top + 2])
    half = height / 2
    return Peak(position, height, _crossing(x, y, top, -1, half), _crossing(x, y, top, +1, half))


def _ordered(wavelength: ArrayLike, value: ArrayLike) -> tuple[NDArray, NDArray]:
    x, y = np.asarray(wavelength, float), np.asarray(value, float)
    kept = np.isfinite(x) & np.isfinite(y)
    order = np.argsort(x[kept], kind="stable")
    return x[kept][order], y[kept][order]


def _vertex(x: NDArray, y: NDArray) -> tuple[float, float]:
    """Return the vertex of the parabola through three points, the middle one the highest."""
    slope_left = (y[1] - y[0]) / (x[1] - x[0])
    slope_right = (y[2] - y[1]) / (x[2] - x[1])
    curvature = (slope_right - slope_left) / (x[2] - x[0])
    slope = slope_left + curvature * (x[1] - x[0])  # the parabola's slope at the middle point
    shift = -slope / (2 * curvature)
    return float(x[1] + shift), float(y[1] + slope * shift / 2)


def _crossing(x: NDArray, y: NDArray, start: int, step: int, level: float) -> float | None:
    """Return where the spectrum first falls to ``level``, going from ``start`` in steps."""
    i = start
    while 0 <= i + step < len(x):
        if y[i + step] <= level:
            share = (y[i] - level) / (y[i] - y[i + step])
            return float(x[i] + share * (x[i + step] - x[i]))
        i += step
    return None
