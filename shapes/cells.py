"""The cells of a particle: what the physics sees of its shape."""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from .body import FloatArray, Mirrors

MIRROR_TOLERANCE = 1e-9  # of a fraction: voxelization makes symmetric data equal to the last bits


@dataclass(frozen=True, eq=False)
class Cells:
    """Occupied cells of a cubic lattice and what fills them.

    Attributes
    ----------
    spacing : float
        Edge of a cell, nm.
    origin : (3,) array
        Centre of cell (0, 0, 0), nm.
    shape : tuple of 3 ints
        Tight box of the occupied cells.
    index : (n, 3) int32 array
        Position of every occupied cell in the box, C order.
    materials : tuple of m str
        Names of the materials.
    fraction : (n, m) array
        Filled fraction of each material in the cell.
    window : (n, m) array
        The same in the ball of diameter window_width * spacing around the cell's centre.
    normal : (n, 3) array
        Unit normal of the dominant interface in the window, out of the particle; zero where there
        is no interface.
    centre_material : (n,) int16 array
        Material at the cell's centre, -1 for the host.
    window_width : float
        Diameter of the ball window in cells.
    volume : float
        Volume of the particle, nm^3, exact where it is known.
    gradient : (n, m, 3) array
        Gradient of `window`, 1/nm.
    thinnest : float or None
        Thickness of the particle's thinnest part, nm, None if it is not known.
    gap : float or None
        Narrowest gap between members of an assembly, nm.
    """

    spacing: float
    origin: FloatArray
    shape: tuple[int, int, int]
    index: NDArray[np.int32]
    materials: tuple[str, ...]
    fraction: FloatArray
    window: FloatArray
    normal: FloatArray
    centre_material: NDArray[np.int16]
    window_width: float
    volume: float
    gradient: FloatArray = field(default_factory=lambda: np.zeros((0, 0, 3)))
    thinnest: float | None = None
    gap: float | None = None

    @property
    def n(self) -> int:
        """Number of occupied cells."""
        return len(self.index)

    @property
    def m(self) -> int:
        """Number of materials."""
        return len(self.materials)

    @property
    def positions(self) -> FloatArray:
        """Centres of the cells, (n, 3) nm."""
        return self.origin + self.spacing * self.index

    @property
    def r_eff(self) -> float:
        """Radius of the sphere of the particle's volume, nm."""
        return float((3 * self.volume / (4 * np.pi)) ** (1 / 3))

    @property
    def extent(self) -> FloatArray:
        """Edges of the box of cells, (3,) nm."""
        return self.spacing * np.asarray(self.shape, dtype=float)

    @property
    def cells_across_thinnest(self) -> float | None:
        """Thickness of the thinnest part in cells, None if it is not known."""
        return None if self.thinnest is None else self.thinnest / self.spacing

    @cached_property
    def mirrors(self) -> Mirrors:
        """Whether the centre planes of the box across x, y, z are mirror planes of the cells."""
        row = self.rows()
        x, y, z = (self._mirrored(row, axis) for axis in range(3))
        return x, y, z

    def rows(self) -> NDArray[np.int64]:
        """Row of the cell at every place of the box, -1 where it is empty, (nx, ny, nz)."""
        row = np.full(self.shape, -1, dtype=np.int64)
        row[tuple(self.index.T)] = np.arange(self.n)
        return row

    def dense(self, values: NDArray, empty: float = 0.0) -> NDArray:
        """Values of the cells laid out on the box, (nx, ny, nz, ...)."""
        box = np.full((*self.shape, *values.shape[1:]), empty, dtype=values.dtype)
        box[tuple(self.index.T)] = values
        return box

    def _mirrored(self, row: NDArray[np.int64], axis: int) -> bool:
        image = self.index.copy()
        image[:, axis] = self.shape[axis] - 1 - image[:, axis]
        other = row[tuple(image.T)]
        if np.any(other < 0):
            return False
        for values in (self.fraction, self.window):
            if np.max(np.abs(values - values[other]), initial=0.0) > MIRROR_TOLERANCE:
                return False
        if np.any(self.centre_material != self.centre_material[other]):
            return False
        flipped = self.normal[other].copy()
        flipped[:, axis] *= -1
        # a normal's sign means nothing to the optics
        same = np.minimum(
            np.abs(self.normal - flipped).max(axis=1), np.abs(self.normal + flipped).max(axis=1)
        )
        return bool(np.max(same, initial=0.0) < 1e-6)
