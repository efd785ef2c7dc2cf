"""Mirror sectors: a symmetric particle solved on its octant.

A field on a particle with mirror planes is a sum of fields that are even or odd under each
mirror, and the system never mixes them. Each is known from the cells on one side of every plane.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass, field, replace
from functools import cached_property

import numpy as np

from .convolution import Convolution, folded_axes
from .linear_system import System
from .polarizability import CellTensor


@dataclass(frozen=True, eq=False)
class Sector:
    """The system restricted to fields of one parity, on the cells of one octant.

    Its matrix is complex symmetric like the whole one: vectors are scaled by the square root of
    the number of mirror images of a cell.

    Attributes
    ----------
    system : System
    signs : three of {0, 1, -1}
        How ``R E(R r)`` answers to the mirrors across x, y, z; 0 where none is used.
    images : ndarray of int, shape (2^m, n)
        Rows in the whole system of the mirror images of each cell of the octant; row 0 the cell
        itself.
    """

    system: System = field(repr=False)
    signs: tuple[int, int, int]
    images: np.ndarray = field(repr=False)
    alpha_inverse: CellTensor = field(repr=False)
    alpha: CellTensor = field(repr=False)
    convolution: Convolution = field(repr=False)

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns of the restricted matrix."""
        return (3 * self.images.shape[1],) * 2

    @property
    def dtype(self) -> np.dtype:
        """Complex number type of the products."""
        return self.convolution.dtype

    @cached_property
    def exact(self) -> Exact | None:
        """The same operator in double precision where this one is in single; see `System.mixed`."""
        return Exact(self) if self.system.mixed else None

    @cached_property
    def index(self) -> np.ndarray:
        """Cells of the octant counted from the mirror planes, shape (n, 3)."""
        half = np.array(
            [n // 2 if s else 0 for n, s in zip(self.system.cells.shape, self.signs, strict=True)]
        )
        index = self.system.index[self.images[0]] - half
        return np.ascontiguousarray(index, np.int32)

    @cached_property
    def _parity(self) -> np.ndarray:
        """Sign of each component in each image, shape (2^m, 1, 3)."""
        planes = [a for a in range(3) if self.signs[a]]
        rows = []
        for flips in itertools.product((False, True), repeat=len(planes)):
            row = np.ones(3)
            for axis, flipped in zip(planes, flips, strict=True):
                if flipped:
                    row *= self.signs[axis]
                    row[axis] *= -1
            rows.append(row)
        return np.array(rows)[:, None, :]

    @cached_property
    def _scale(self) -> np.ndarray:
        """Square root of the number of distinct images, shape (n, 1)."""
        copies = (self.images == self.images[0]).sum(axis=0)
        return np.sqrt(len(self.images) / copies)[:, None].astype(self.dtype.type(0).real.dtype)

    def fold(self, values: np.ndarray) -> np.ndarray:
        """This sector's part of a field (n_all, 3) on the whole system, as a scaled vector."""
        part = (self._parity * values[self.images]).mean(axis=0)
        return (part * self._scale).astype(self.dtype).ravel()

    def unfold(self, vector: np.ndarray) -> np.ndarray:
        """The field (n_all, 3) on the whole system of a scaled vector of this sector."""
        part = vector.reshape(-1, 3) / self._scale
        out = np.empty((self.system.n, 3), self.dtype)
        for rows, parity in zip(self.images, self._parity, strict=True):
            out[rows] = parity * part
        return out

    def matvec(self, vector: np.ndarray) -> np.ndarray:
        """``(alpha^-1 - G)`` within the sector."""
        v = np.ascontiguousarray(vector, self.dtype).reshape(-1, 3)
        out = self.convolution(self.index, v / self._scale, np.empty_like(v))
        out *= self._scale
        self.alpha_inverse.minus(v, out, self.convolution.workers)
        return out.reshape(vector.shape)

    def precondition(self, vector: np.ndarray) -> np.ndarray:
        """``alpha r``: the block-diagonal preconditioner."""
        v = np.ascontiguousarray(vector, self.dtype).reshape(-1, 3)
        return self.alpha.apply(v, np.empty_like(v)).reshape(vector.shape)


class Exact:
    """A sector in double precision, for residuals; it holds no buffers between products.

    Parameters
    ----------
    sector : Sector
        With products in single precision.
    """

    def __init__(self, sector: Sector):
        single = sector.convolution
        double = Convolution(
            single.kernel, single.axes, single.fft.name, single.workers, np.complex128
        )
        self._single = single
        self._sector = replace(sector, convolution=double)
        self.system, self.signs = sector.system, sector.signs
        self.shape, self.dtype = sector.shape, double.dtype
        self.fold, self.unfold = self._sector.fold, self._sector.unfold

    def matvec(self, vector: np.ndarray) -> np.ndarray:
        """``(alpha^-1 - G)`` within the sector."""
        self._single.release()
        out = self._sector.matvec(vector)
        self._sector.convolution.release()
        return out


def sectors(system: System, mirrors: tuple[bool, bool, bool] | None = None) -> list[Sector]:
    """The sectors of a system: two for one mirror plane, eight for three, one for none.

    Parameters
    ----------
    system : System
    mirrors : three bool, optional
        Planes to use; by default all that the cells and their materials have.

    Returns
    -------
    list of Sector
        They share the kernel; buffers are made when first used.
    """
    there = system.mirrors
    used = there if mirrors is None else mirrors
    if any(asked and not has for asked, has in zip(used, there, strict=True)):
        raise ValueError(
            f"the cells are not symmetric under the mirrors asked for, {tuple(used)}: "
            f"they have {there}"
        )
    planes = [a for a in range(3) if used[a]]
    if not planes:
        rows = np.arange(system.n)[None]
        return [
            Sector(system, (0, 0, 0), rows, system.alpha_inverse, system.alpha, system.convolution)
        ]
    images = _images(system, planes)
    own = _restrict(system.alpha_inverse, images[0])
    inverse = _restrict(system.alpha, images[0])
    out = []
    for choice in itertools.product((1, -1), repeat=len(planes)):
        signs = [0, 0, 0]
        for axis, sign in zip(planes, choice, strict=True):
            signs[axis] = sign
        three = (signs[0], signs[1], signs[2])
        convolution = Convolution(
            system.convolution.kernel,
            folded_axes(system.convolution.kernel, three),
            system.convolution.fft.name,
            system.convolution.workers,
        )
        out.append(Sector(system, three, images, own, inverse, convolution))
    return out


def _images(system: System, planes: list[int]) -> np.ndarray:
    shape = np.array(system.cells.shape)
    index = system.index
    row_of = np.full(system.cells.shape, -1, np.int64)
    row_of[tuple(index.T)] = np.arange(system.n)
    octant = np.ones(system.n, bool)
    for a in planes:
        octant &= index[:, a] >= shape[a] // 2
    first = index[octant]
    rows = []
    for flips in itertools.product((False, True), repeat=len(planes)):
        image = first.copy()
        for axis, flipped in zip(planes, flips, strict=True):
            if flipped:
                image[:, axis] = shape[axis] - 1 - image[:, axis]
        rows.append(row_of[tuple(image.T)])
    return np.array(rows)


def _restrict(tensor: CellTensor, rows: np.ndarray) -> CellTensor:
    place = np.full(len(tensor.scalar), -1, np.int64)
    place[tensor.where] = np.arange(len(tensor.where))
    chosen = place[rows]
    where = np.flatnonzero(chosen >= 0)
    return CellTensor(tensor.scalar[rows], where, tensor.full[chosen[where]])
