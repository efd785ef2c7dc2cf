"""The product of the block-Toeplitz interaction matrix with a vector, plane by plane.

The zero-padded grid is never stored. The vector is transformed along x for the columns of the
box only; then, one group of x-frequencies at a time, a (3, 2 ny, 2 nz) plane is padded in a
buffer that fits the cache, transformed, multiplied with the kernel, transformed back and
truncated; at last back along x. Of the kernel one octant is stored, because each of its
components is even or odd along each axis.
"""

from __future__ import annotations

import numpy as np
import scipy.fft
from numba import njit

from . import fft as fft_library
from .green import COMPONENTS, RadialTable, octant
from .workers import Workers

# A group of planes should stay in a core's second-level cache together with its transform.
_PLANE_BYTES = 2**20


class Convolution:
    """Fields of the dipoles on a box of cells, by FFT.

    Parameters
    ----------
    shape : (nx, ny, nz)
        Box in cells.
    table : RadialTable
        Green tensor, from `dda.lattice.green.radial_table`, up to the box's diagonal.
    precision : {"double", "single"}
    fft : {"auto", "scipy", "ducc0"}
    workers : Workers, optional

    Notes
    -----
    `spectrum` (one octant of the kernel's transform) has the shape
    (Lx/2 + 1, 6, Ly/2 + 1, Lz/2 + 1), L the padded lengths.
    """

    def __init__(
        self,
        shape: tuple[int, int, int],
        table: RadialTable,
        precision: str = "double",
        fft: str = "auto",
        workers: Workers | None = None,
    ):
        self.shape = tuple(int(n) for n in shape)
        self.padded = padded_shape(self.shape)
        self.dtype = np.dtype(np.complex128 if precision == "double" else np.complex64)
        self.fft = fft_library.choose(fft)
        self.workers = workers or Workers()
        self.spectrum = _spectrum(self.shape, self.padded, table, self.dtype)
        nx, ny, nz = self.shape
        lx, ly, lz = self.padded
        self._one = np.ones((), self.dtype).real[()]  # keeps signs in the working precision
        self._columns = np.empty((lx, 3, ny, nz), self.dtype)
        bytes_per_plane = 3 * ly * lz * self.dtype.itemsize
        self._group = max(1, min(8, _PLANE_BYTES // bytes_per_plane))
        self._crew = min(self.workers.threads, max(1, lx // (2 * self._group)))
        self._planes = [np.empty((self._group, 3, ly, lz), self.dtype) for _ in range(self._crew)]

    def __call__(self, index: np.ndarray, p: np.ndarray, out: np.ndarray) -> np.ndarray:
        """Fields at the cells `index` of the dipoles `p` there.

        Parameters
        ----------
        index : ndarray of int32, shape (n, 3)
        p, out : ndarray of complex, shape (n, 3)

        Returns
        -------
        ndarray
            `out`, filled with ``sum_j G_ij p_j``.
        """
        nx = self.shape[0]
        columns = self._columns
        parts = self.workers.split(len(index))
        columns[:nx] = 0
        self.workers.run(lambda a, b: _scatter(index, p, columns, a, b), parts)
        self._along_x(forward=True)
        groups = -(-self.padded[0] // self._group)
        share = -(-groups // self._crew)
        self.workers.each(lambda w: self._plane_groups(w, w * share, (w + 1) * share), self._crew)
        self._along_x(forward=False)
        self.workers.run(lambda a, b: _gather(index, columns, out, a, b), parts)
        return out

    def _along_x(self, forward: bool) -> None:
        nx = self.shape[0]
        columns, transform = self._columns, self.fft.transform
        if forward:
            columns[nx:] = 0
        rows = self.shape[1]

        def share(start: int, stop: int) -> None:
            # A few rows at a time keep the strided transform in cache.
            for y in range(start, stop):
                part = columns[:, :, y]
                transform(part, 0, forward, part)

        self.workers.run(share, self.workers.split(rows, grain=8))

    def _plane_groups(self, worker: int, start: int, stop: int) -> None:
        lx, ly, lz = self.padded
        _, ny, nz = self.shape
        transform, plane = self.fft.transform, self._planes[worker]
        for group in range(start, stop):
            first = group * self._group
            last = min(lx, first + self._group)
            if first >= last:
                return
            block = plane[: last - first]
            _pad(self._columns, first, last, block)
            rows = block[:, :, :ny]
            transform(rows, 3, True, rows)
            transform(block, 2, True, block)
            _multiply(self.spectrum, block, first, lx, self._one)
            transform(block, 2, False, block)
            transform(rows, 3, False, rows)
            self._columns[first:last] = rows[..., :nz]

    @property
    def nbytes(self) -> int:
        """Bytes held: kernel, columns and plane buffers."""
        return self.spectrum.nbytes + self._columns.nbytes + sum(b.nbytes for b in self._planes)


def padded_shape(shape: tuple[int, int, int]) -> tuple[int, int, int]:
    """Even FFT lengths that keep the wrapped-around images apart."""
    return tuple(2 * scipy.fft.next_fast_len(max(int(n), 1)) for n in shape)  # type: ignore[return-value]


def _spectrum(shape, padded, table: RadialTable, dtype) -> np.ndarray:
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
    return out


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


@njit(nogil=True, cache=True)
def _scatter(index, p, columns, start, stop):  # pragma: no cover - compiled
    for i in range(start, stop):
        x, y, z = index[i, 0], index[i, 1], index[i, 2]
        for c in range(3):
            columns[x, c, y, z] = p[i, c]


@njit(nogil=True, cache=True)
def _gather(index, columns, out, start, stop):  # pragma: no cover - compiled
    for i in range(start, stop):
        x, y, z = index[i, 0], index[i, 1], index[i, 2]
        for c in range(3):
            out[i, c] = columns[x, c, y, z]


@njit(nogil=True, cache=True)
def _pad(columns, first, last, block):  # pragma: no cover - compiled
    ny, nz = columns.shape[2], columns.shape[3]
    ly, lz = block.shape[2], block.shape[3]
    for g in range(last - first):
        for c in range(3):
            for y in range(ny):
                for z in range(nz):
                    block[g, c, y, z] = columns[first + g, c, y, z]
                for z in range(nz, lz):
                    block[g, c, y, z] = 0
            for y in range(ny, ly):
                for z in range(lz):
                    block[g, c, y, z] = 0


@njit(nogil=True, cache=True, fastmath=True)
def _multiply(spectrum, block, first, lx, one):  # pragma: no cover - compiled
    groups, _, ly, lz = block.shape
    half_z = lz // 2
    for g in range(groups):
        kx = first + g
        sx = one
        if kx > lx // 2:
            kx = lx - kx
            sx = -one
        for y in range(ly):
            ky = y
            sy = one
            if y > ly // 2:
                ky = ly - y
                sy = -one
            sxy = sx * sy
            for part in range(2):
                # frequencies up to the middle, then their mirror images
                start, stop, sz = (0, half_z + 1, one) if part == 0 else (half_z + 1, lz, -one)
                sxz, syz = sx * sz, sy * sz
                for z in range(start, stop):
                    kz = z if part == 0 else lz - z
                    xx = spectrum[kx, 0, ky, kz]
                    yy = spectrum[kx, 1, ky, kz]
                    zz = spectrum[kx, 2, ky, kz]
                    xy = sxy * spectrum[kx, 3, ky, kz]
                    xz = sxz * spectrum[kx, 4, ky, kz]
                    yz = syz * spectrum[kx, 5, ky, kz]
                    a, b, c = block[g, 0, y, z], block[g, 1, y, z], block[g, 2, y, z]
                    block[g, 0, y, z] = xx * a + xy * b + xz * c
                    block[g, 1, y, z] = xy * a + yy * b + yz * c
                    block[g, 2, y, z] = xz * a + yz * b + zz * c
