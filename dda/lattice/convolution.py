"""The product of the block-Toeplitz interaction matrix with a vector, plane by plane.

The zero-padded grid is never stored. The vector is transformed along x for the columns of the
box only; then, one group of x-frequencies at a time, a plane is padded in a buffer that fits the
cache, transformed, multiplied with the kernel, transformed back and truncated; at last back
along x. Axes folded at mirror planes use cosine and sine transforms in the same places.
"""

from __future__ import annotations

import numpy as np

from . import fft as fft_library
from . import planes
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
    dtype : optional
        Complex type of the dipoles and fields, that of the kernel by default. Double precision on
        a kernel in single is what residuals are computed with: the kernel's rounding moves cross
        sections by less than 1e-7, that of the transforms by a hundred times as much.
    """

    def __init__(
        self,
        kernel: Kernel,
        axes: tuple[Axis, Axis, Axis] | None = None,
        fft: str = "auto",
        workers: Workers | None = None,
        dtype=None,
    ):
        self.kernel = kernel
        self.axes = axes or whole_axes(kernel)
        self.dtype = np.dtype(dtype or kernel.spectrum.dtype)
        self.fft = fft_library.choose(fft)
        self.workers = workers or Workers()
        x, y, z = self.axes
        self._shifts = np.array([[axis.shift(c) for c in range(3)] for axis in self.axes])
        self._folded = np.array([axis.folded for axis in self.axes])
        self._signs, self._turned = _symmetric_factors(self.axes)
        self._signs = self._signs.astype(self.dtype.type(0).real.dtype)
        plane_bytes = 3 * y.places * z.places * self.dtype.itemsize
        share = -(-x.places // self.workers.threads)
        self._group = int(np.clip(_PLANE_BYTES // plane_bytes, 1, share))
        self._order = _plane_order(x)
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
        shifts, workers = self._shifts, self.workers
        parts = workers.split(len(index))
        slabs = workers.split(self.axes[0].stored, grain=8)
        workers.run(lambda a, b: columns[a:b].fill(0), slabs)
        workers.run(lambda a, b: planes.scatter(index, p, shifts, columns, a, b), parts)
        self._along_x(forward=True)
        crew = len(self._blocks)
        share = -(-len(columns) // crew)
        workers.each(lambda w: self._planes(w, w * share, (w + 1) * share), crew)
        self._along_x(forward=False)
        workers.run(lambda a, b: planes.gather(index, columns, shifts, out, a, b), parts)
        return out

    def _buffers(self) -> np.ndarray:
        # Made at the first product, so that an unused sector costs no memory.
        if self._columns is None:
            x, y, z = self.axes
            self._columns = _spread_rows((x.places, 3, y.stored, z.stored), self.dtype)
            shape = (self._group, 3, y.places, z.places)
            crew = min(self.workers.threads, -(-x.places // self._group))
            self._blocks = [_spread_rows(shape, self.dtype) for _ in range(crew)]
        return self._columns

    def _along_x(self, forward: bool) -> None:
        x, y, z = self.axes
        columns = self._buffers()

        def share(start: int, stop: int) -> None:
            # A few rows at a time keep the strided transform in cache.
            rows = max(1, _PLANE_BYTES // (columns[:, :, :1].nbytes or 1))
            for first in range(start, stop, rows):
                part = columns[:, :, first : min(stop, first + rows), : z.stored]
                if forward:
                    part[x.stored :] = 0
                x.transform(self.fft, part, 0, 1, forward)

        self.workers.run(share, self.workers.split(y.stored, grain=8))

    def _planes(self, worker: int, start: int, stop: int) -> None:
        _, y, z = self.axes
        columns, fft = self._buffers(), self.fft
        for places in self._groups(start, stop):
            block = self._blocks[worker][: len(places)]
            plane, filled = block[..., : z.places], block[:, :, : y.stored, : z.places]
            planes.pad(columns, y.stored, z.stored, places, block)
            z.transform(fft, filled, 3, 1, True)
            y.transform(fft, plane, 2, 1, True)
            self.multiply(block, places)
            y.transform(fft, plane, 2, 1, False)
            z.transform(fft, filled, 3, 1, False)
            planes.truncate(block, y.stored, z.stored, places, columns)

    def multiply(self, block: np.ndarray, places: np.ndarray) -> None:
        """Multiply transformed planes of dipoles (g, 3, y, z) with the transformed interaction."""
        x, y, z = self.axes
        planes.multiply(
            self.kernel.parts, block.view(self._signs.dtype), places,
            (x.places, y.places, z.places), self._folded, self._signs, self._turned,
        )  # fmt: skip

    def _groups(self, start: int, stop: int) -> list[np.ndarray]:
        order = self._order[start:stop]
        return [order[i : i + self._group] for i in range(0, len(order), self._group)]

    def release(self) -> None:
        """Give the buffers back until the next product."""
        self._columns, self._blocks = None, []

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


def _symmetric_factors(axes: tuple[Axis, Axis, Axis]) -> tuple[np.ndarray, np.ndarray]:
    """Signs of xy, xz, yz, and the components to turn by i so that signs are all it takes.

    Between a folded and a whole axis the factors are imaginary and antisymmetric.
    """
    folded = np.array([axis.folded for axis in axes])
    turned = folded & (not folded.all())
    turn = np.where(turned, 1j, 1)
    signs = factors(axes) * turn[:, None] / turn[None]
    return signs.real[[0, 0, 1], [1, 2, 2]], turned


def _plane_order(x: Axis) -> np.ndarray:
    """Places along x, those of opposite frequencies together: they share a plane of the kernel."""
    places = np.arange(x.places)
    return places if x.folded else np.argsort(np.minimum(places, x.places - places), kind="stable")


def _spread_rows(shape: tuple[int, ...], dtype: np.dtype) -> np.ndarray:
    """An array whose rows are an odd number of items long.

    At distances of a power of two a transform along another axis finds all its data in the same
    few places of the cache.
    """
    return np.empty((*shape[:-1], shape[-1] | 1), dtype)
