"""The product of the block-Toeplitz interaction matrix with a vector, plane by plane.

The zero-padded grid is never stored. The vector is transformed along x for the columns of the
box only; then, one group of x-frequencies at a time, a plane is padded in a buffer that fits the
cache, transformed, multiplied with the kernel, transformed back and truncated; at last back
along x. Axes folded at mirror planes use cosine and sine transforms in the same places.
"""

from __future__ import annotations

import numpy as np
from numba import njit

from . import fft as fft_library
from .axes import Axis, factors
from .kernel import Kernel
from .workers import Workers

# A group of planes should stay in a core's second-level cache together with its transform.
_PLANE_BYTES = 2**20


class Convolution:
    """Fields of the dipoles on a box of cells, by FFT.

    Parameters
    ----------
    kernel : Kernel
    axes : three Axis, optional
        Folded axes make it the product within one mirror sector; whole axes by default.
    fft : {"auto", "scipy", "ducc0"}
    workers : Workers, optional
    """

    def __init__(
        self,
        kernel: Kernel,
        axes: tuple[Axis, Axis, Axis] | None = None,
        fft: str = "auto",
        workers: Workers | None = None,
    ):
        self.kernel = kernel
        self.axes = axes or whole_axes(kernel)
        self.dtype = kernel.spectrum.dtype
        self.fft = fft_library.choose(fft)
        self.workers = workers or Workers()
        x, y, z = self.axes
        one = np.ones((), self.dtype).real
        self._one = one[()]  # keeps signs in the working precision
        table = factors(self.axes)
        self._factors = table.astype(one.dtype if table.dtype.kind == "f" else self.dtype)
        self._shifts = np.array([[axis.shift(c) for c in range(3)] for axis in self.axes])
        self._folded = np.array([axis.folded for axis in self.axes])
        self._block_bytes = 3 * y.places * z.places * self.dtype.itemsize
        share = -(-x.places // self.workers.threads)
        self._group = int(np.clip(_PLANE_BYTES // self._block_bytes, 1, share))
        self._columns: np.ndarray | None = None
        self._blocks: list[np.ndarray] = []

    def __call__(self, index: np.ndarray, p: np.ndarray, out: np.ndarray) -> np.ndarray:
        """Fields at the cells `index` of the dipoles `p` there.

        Parameters
        ----------
        index : ndarray of int32, shape (n, 3)
            Along a folded axis counted from the mirror plane.
        p, out : ndarray of complex, shape (n, 3)

        Returns
        -------
        ndarray
            `out`, filled with ``sum_j G_ij p_j``.
        """
        columns = self._buffers()
        shifts = self._shifts
        parts = self.workers.split(len(index))
        columns[: self.axes[0].stored] = 0
        self.workers.run(lambda a, b: _scatter(index, p, shifts, columns, a, b), parts)
        self._along_x(forward=True)
        groups = -(-self.axes[0].places // self._group)
        share = -(-groups // len(self._blocks))
        self.workers.each(
            lambda w: self._plane_groups(w, w * share, min(groups, (w + 1) * share)),
            len(self._blocks),
        )
        self._along_x(forward=False)
        self.workers.run(lambda a, b: _gather(index, columns, shifts, out, a, b), parts)
        return out

    def _buffers(self) -> np.ndarray:
        # Made at the first product, so that an unused sector costs no memory.
        if self._columns is None:
            x, y, z = self.axes
            self._columns = np.empty((x.places, 3, y.stored, z.stored), self.dtype)
            shape = (self._group, 3, y.places, z.places)
            crew = min(self.workers.threads, -(-x.places // self._group))
            self._blocks = [np.empty(shape, self.dtype) for _ in range(crew)]
        return self._columns

    def _along_x(self, forward: bool) -> None:
        x, y, _ = self.axes
        columns = self._buffers()
        if forward:
            columns[x.stored :] = 0

        def share(start: int, stop: int) -> None:
            # A few rows at a time keep the strided transform in cache.
            rows = max(1, _PLANE_BYTES // (columns[:, :, :1].nbytes or 1))
            for first in range(start, stop, rows):
                part = columns[:, :, first : min(stop, first + rows)]
                x.transform(self.fft, part, 0, 1, forward)

        self.workers.run(share, self.workers.split(y.stored, grain=8))

    def _plane_groups(self, worker: int, start: int, stop: int) -> None:
        x, y, z = self.axes
        columns, fft = self._buffers(), self.fft
        for group in range(start, stop):
            first = group * self._group
            last = min(x.places, first + self._group)
            block = self._blocks[worker][: last - first]
            _pad(columns, first, last, block)
            rows = block[:, :, : y.stored]
            z.transform(fft, rows, 3, 1, True)
            y.transform(fft, block, 2, 1, True)
            _multiply(
                self.kernel.spectrum, block, first, x.places, self._folded, self._factors, self._one
            )
            y.transform(fft, block, 2, 1, False)
            z.transform(fft, rows, 3, 1, False)
            columns[first:last] = rows[..., : z.stored]

    @property
    def nbytes(self) -> int:
        """Bytes held, the kernel's included."""
        columns = self._buffers()
        return self.kernel.spectrum.nbytes + columns.nbytes + sum(b.nbytes for b in self._blocks)


def whole_axes(kernel: Kernel) -> tuple[Axis, Axis, Axis]:
    """The axes of the box without mirrors."""
    x, y, z = (Axis(a, kernel.shape[a], kernel.padded[a]) for a in range(3))
    return x, y, z


def folded_axes(kernel: Kernel, signs: tuple[int, int, int]) -> tuple[Axis, Axis, Axis]:
    """The axes of a mirror sector; sign 0 leaves an axis whole."""
    x, y, z = (
        Axis(a, -(-n // 2) if sign else n, kernel.padded[a], sign, bool(sign and n % 2))
        for a, (n, sign) in enumerate(zip(kernel.shape, signs, strict=True))
    )
    return x, y, z


@njit(nogil=True, cache=True)
def _scatter(index, p, shifts, columns, start, stop):  # pragma: no cover - compiled
    for i in range(start, stop):
        x, y, z = index[i, 0], index[i, 1], index[i, 2]
        for c in range(3):
            columns[x + shifts[0, c], c, y + shifts[1, c], z + shifts[2, c]] = p[i, c]


@njit(nogil=True, cache=True)
def _gather(index, columns, shifts, out, start, stop):  # pragma: no cover - compiled
    for i in range(start, stop):
        x, y, z = index[i, 0], index[i, 1], index[i, 2]
        for c in range(3):
            out[i, c] = columns[x + shifts[0, c], c, y + shifts[1, c], z + shifts[2, c]]


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
def _multiply(spectrum, block, first, lx, folded, factors, one):  # pragma: no cover - compiled
    groups, _, ly, lz = block.shape
    # A folded axis holds only the frequencies up to the middle; of a whole axis the others
    # mirror them, with the sign of the odd components.
    half_z = lz - 1 if folded[2] else lz // 2
    symmetric = (
        factors[0, 1] == factors[1, 0]
        and factors[0, 2] == factors[2, 0]
        and factors[1, 2] == factors[2, 1]
    )
    for g in range(groups):
        kx = first + g
        sx = one
        if not folded[0] and kx > lx // 2:
            kx = lx - kx
            sx = -one
        for y in range(ly):
            ky = y
            sy = one
            if not folded[1] and y > ly // 2:
                ky = ly - y
                sy = -one
            xy_x, xy_y = sx * sy * factors[0, 1], sx * sy * factors[1, 0]
            for part in range(2):
                start, stop, sz = (0, half_z + 1, one) if part == 0 else (half_z + 1, lz, -one)
                xz_x, xz_z = sx * sz * factors[0, 2], sx * sz * factors[2, 0]
                yz_y, yz_z = sy * sz * factors[1, 2], sy * sz * factors[2, 1]
                if symmetric:  # all axes whole or all folded: three signs serve both triangles
                    for z in range(start, stop):
                        kz = z if part == 0 else lz - z
                        xy = xy_x * spectrum[kx, 3, ky, kz]
                        xz = xz_x * spectrum[kx, 4, ky, kz]
                        yz = yz_y * spectrum[kx, 5, ky, kz]
                        a, b, c = block[g, 0, y, z], block[g, 1, y, z], block[g, 2, y, z]
                        block[g, 0, y, z] = spectrum[kx, 0, ky, kz] * a + xy * b + xz * c
                        block[g, 1, y, z] = xy * a + spectrum[kx, 1, ky, kz] * b + yz * c
                        block[g, 2, y, z] = xz * a + yz * b + spectrum[kx, 2, ky, kz] * c
                    continue
                for z in range(start, stop):
                    kz = z if part == 0 else lz - z
                    xy = spectrum[kx, 3, ky, kz]
                    xz = spectrum[kx, 4, ky, kz]
                    yz = spectrum[kx, 5, ky, kz]
                    a, b, c = block[g, 0, y, z], block[g, 1, y, z], block[g, 2, y, z]
                    ax, bx, cx = xy_y * a, xy_x * b, xz_x * c
                    block[g, 0, y, z] = spectrum[kx, 0, ky, kz] * a + xy * bx + xz * cx
                    block[g, 1, y, z] = xy * ax + spectrum[kx, 1, ky, kz] * b + yz * (yz_y * c)
                    block[g, 2, y, z] = (
                        xz * (xz_z * a) + yz * (yz_z * b) + spectrum[kx, 2, ky, kz] * c
                    )
