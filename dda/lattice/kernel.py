"""The interaction's transform: one octant serves the whole box and every mirror sector."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
import scipy.fft

from .green import COMPONENTS, RadialTable, octant


@dataclass(frozen=True, eq=False)
class Kernel:
    """Transformed Green tensor of a box of cells.

    Attributes
    ----------
    shape : (nx, ny, nz)
        Box in cells.
    padded : (Lx, Ly, Lz)
        Even lengths of the transforms, at least twice the box.
    spectrum : ndarray of complex, shape (Lx/2 + 1, 6, Ly/2 + 1, Lz/2 + 1)
        For the components xx, yy, zz, xy, xz, yz and non-negative frequencies; already divided
        by Lx Ly Lz. A component is even along an axis that does not occur in its name or occurs
        twice, odd along the others.
    """

    shape: tuple[int, int, int]
    padded: tuple[int, int, int]
    spectrum: np.ndarray = field(repr=False)

    @property
    def parts(self) -> np.ndarray:
        """The spectrum as real numbers, real and imaginary parts in turn along the last axis."""
        return self.spectrum.view(self.spectrum.real.dtype)


def kernel(shape: tuple[int, int, int], table: RadialTable, precision: str = "double") -> Kernel:
    """Transform the Green tensor of `table` for a box of `shape` cells.

    Notes
    -----
    The transform of an even (odd) sequence over a whole period is the cosine transform DCT-I
    (-i times the sine transform DST-I) of half of it; no padded grid is ever formed.
    """
    padded = padded_shape(shape)
    dtype = np.complex128 if precision == "double" else np.complex64
    half = tuple(length // 2 + 1 for length in padded)
    scale = 1.0 / np.prod(padded)
    out = np.empty((half[0], 6, half[1], half[2]), dtype)
    for component, (a, b) in enumerate(COMPONENTS):
        values = np.zeros(half, complex)
        values[tuple(slice(n) for n in shape)] = octant(table, component, shape)
        odd = {a, b} if a != b else set()
        sign = -1.0 if odd else 1.0  # (-i)^2 of the two sine transforms
        for axis in range(3):
            values = _half_transform(values, axis, axis in odd)
        out[:, component] = (sign * scale) * values
    return Kernel((int(shape[0]), int(shape[1]), int(shape[2])), padded, out)


def padded_shape(shape: tuple[int, int, int]) -> tuple[int, int, int]:
    """Even FFT lengths that keep the wrapped-around images apart."""
    x, y, z = (2 * scipy.fft.next_fast_len(max(int(n), 1)) for n in shape)
    return x, y, z


def _half_transform(values: np.ndarray, axis: int, odd: bool) -> np.ndarray:
    """DFT over the even (odd: i times the DFT of the odd) periodic extension, half of it."""
    if not odd:
        return scipy.fft.dct(values, type=1, axis=axis)
    inner = [slice(None)] * 3
    inner[axis] = slice(1, -1)
    out = np.zeros_like(values)
    if values.shape[axis] > 2:
        out[tuple(inner)] = scipy.fft.dst(values[tuple(inner)], type=1, axis=axis)
    return out
