"""Bodies given by values on voxels, as `shapes.image` makes them."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .body import Bounds, FloatArray, Mirrors, SampleGrid, ShapeError
from .image_field import overlap_fraction, sample_distance, sample_fraction, surface_points

MIRROR_TOLERANCE = 1e-3  # voxels


@dataclass(frozen=True, eq=False)
class VoxelBody:
    """A body given by values on voxels; make one with `from_image`.

    Attributes
    ----------
    values : (nx, ny, nz) float32 array
        Signed distance (nm, positive inside) or filled fraction at the voxel centres.
    voxel : (3,) array
        Edges of a voxel, nm.
    offset : (3,) array
        Centre of voxel (0, 0, 0), nm.
    counted : float
        Volume of the voxels, nm^3.
    is_distance : bool
        What `values` are.
    turn : (3, 3) array
        Rotation or reflection of the image.
    notes : tuple of str
        What was found, for the user.
    """

    values: NDArray[np.float32]
    voxel: FloatArray
    offset: FloatArray
    counted: float
    is_distance: bool = True
    turn: FloatArray = field(default_factory=lambda: np.eye(3))
    notes: tuple[str, ...] = ()

    exact = frozenset[str]()

    @cached_property
    def bounds(self) -> Bounds:
        """Lower and upper corner of the bounding box, nm."""
        if self.is_distance:
            points = surface_points(self.values, 0.0)
        else:  # the boxes of all voxels that hold anything
            index = np.argwhere(self.values > 0)
            low, high = index.min(axis=0) - 0.5, index.max(axis=0) + 0.5
            points = np.stack(np.meshgrid(*zip(low, high, strict=True)), axis=-1).reshape(-1, 3)
        places = self.offset + (points * self.voxel) @ self.turn.T
        return places.min(axis=0), places.max(axis=0)

    def volume(self) -> float:
        """Volume of the voxels, nm^3."""
        return self.counted

    def area(self) -> float:
        """Surface area, nm^2, measured on a fine grid."""
        from .measure import measured_area

        return measured_area(self)

    def mirrors(self) -> Mirrors:
        """Whether the centre planes of the bounds are mirror planes."""
        order = np.abs(self.turn).argmax(axis=1)
        if not np.allclose(np.abs(self.turn)[np.arange(3), order], 1.0, atol=1e-9):
            return False, False, False
        tight = self._tight
        limit = MIRROR_TOLERANCE * (float(self.voxel.min()) if self.is_distance else 1.0)
        own = [bool(np.abs(tight - np.flip(tight, m)).max() <= limit) for m in range(3)]
        return own[order[0]], own[order[1]], own[order[2]]

    def fill(self, grid: SampleGrid) -> NDArray[np.float32]:
        """Filled fraction of every sample voxel, (grid.shape) float32."""
        out = np.zeros(grid.shape, np.float32)
        window = grid.window(self.bounds)
        if window is not None:
            out[window] = self._fill_all(grid.cut(window))
        return out

    def moved(self, offset: ArrayLike) -> VoxelBody:
        """The body moved by `offset`, (3,) nm."""
        return replace(self, offset=self.offset + np.asarray(offset, dtype=float).reshape(3))

    def rotated(self, angle: float, axis: ArrayLike = (0, 0, 1)) -> VoxelBody:
        """The body turned by `angle` degrees about `axis` through the origin."""
        from .transform import rotation_matrix

        return self._turned(rotation_matrix(angle, axis))

    def mirrored(self, axis: int) -> VoxelBody:
        """The mirror image in the plane through the origin across x (0), y (1) or z (2)."""
        signs = np.ones(3)
        signs[axis] = -1.0
        return self._turned(np.diag(signs))

    def scaled(self, factor: float) -> VoxelBody:
        """The body made `factor` times larger about the origin."""
        if not (np.isfinite(factor) and factor > 0):
            raise ShapeError(f"scale factor {factor!r} must be a number greater than 0")
        return replace(
            self,
            values=self.values * np.float32(factor) if self.is_distance else self.values,
            voxel=self.voxel * factor,
            offset=self.offset * factor,
            counted=self.counted * factor**3,
        )

    def _turned(self, matrix: FloatArray) -> VoxelBody:
        return replace(self, turn=matrix @ self.turn, offset=matrix @ self.offset)

    def _fill_all(self, grid: SampleGrid) -> NDArray[np.float32]:
        to_voxels = self.turn.T / self.voxel[:, None]
        start = to_voxels @ (grid.origin - self.offset)
        stride = to_voxels * grid.step
        parts = max(1, int(np.ceil(grid.step / self.voxel.min() - 1e-6)))
        if self.is_distance:
            return sample_distance(self.values, start, stride, grid.shape, grid.step, parts)
        if np.array_equal(self.turn, np.eye(3)):
            return overlap_fraction(self.values, start, np.diag(stride), grid.shape)
        return sample_fraction(self.values, start, stride, grid.shape, parts + 1)

    @cached_property
    def _tight(self) -> NDArray[np.float32]:
        """The values without the planes at its ends that hold nothing."""
        index = np.argwhere(self.values > 0)
        low, high = index.min(axis=0), index.max(axis=0) + 1
        return self.values[tuple(slice(a, b) for a, b in zip(low, high, strict=True))]


@dataclass(frozen=True, eq=False)
class LabelledBody:
    """One of several bodies of an image that meet without gap or overlap.

    Samples that several of them meet in hold no more than the whole image says: it is shared out
    in proportion. Parts of a particle are laid over each other, and what is laid over this body
    takes its share off it; so it is given as its share of what the later ones leave.

    Attributes
    ----------
    whole : VoxelBody
        All labels together.
    members : tuple of VoxelBody
        The bodies in the order in which they are laid over each other.
    rank : int
        Which of them this is.
    """

    whole: VoxelBody
    members: tuple[VoxelBody, ...]
    rank: int

    exact = frozenset[str]()

    @property
    def own(self) -> VoxelBody:
        """This body by itself."""
        return self.members[self.rank]

    @property
    def notes(self) -> tuple[str, ...]:
        """What was found, for the user."""
        return self.whole.notes

    @property
    def bounds(self) -> Bounds:
        """Lower and upper corner of the bounding box, nm."""
        return self.own.bounds

    def volume(self) -> float:
        """Volume of the voxels, nm^3."""
        return self.own.volume()

    def area(self) -> float:
        """Surface area, nm^2, measured on a fine grid."""
        return self.own.area()

    def mirrors(self) -> Mirrors:
        """Whether the centre planes of the bounds are mirror planes."""
        return self.own.mirrors()

    def fill(self, grid: SampleGrid) -> NDArray[np.float32]:
        """Filled fraction of every sample voxel that later bodies leave, (grid.shape) float32."""
        out = np.zeros(grid.shape, np.float32)
        window = grid.window(self.bounds)
        if window is None:
            return out
        part = grid.cut(window)
        fills = [member.fill(part) for member in self.members]
        total = np.sum(fills, axis=0)
        share = np.divide(self.whole.fill(part), total, out=np.zeros_like(total), where=total > 0)
        left = 1.0 - share * sum(fills[self.rank + 1 :], np.zeros_like(total))
        filled = np.divide(
            share * fills[self.rank], left, out=np.zeros_like(total), where=left > 1e-6
        )
        out[window] = np.minimum(filled, 1.0)
        return out

    def moved(self, offset: ArrayLike) -> LabelledBody:
        """The body moved by `offset`, (3,) nm."""
        return self._each(lambda body: body.moved(offset))

    def rotated(self, angle: float, axis: ArrayLike = (0, 0, 1)) -> LabelledBody:
        """The body turned by `angle` degrees about `axis` through the origin."""
        return self._each(lambda body: body.rotated(angle, axis))

    def mirrored(self, axis: int) -> LabelledBody:
        """The mirror image in the plane through the origin across x (0), y (1) or z (2)."""
        return self._each(lambda body: body.mirrored(axis))

    def scaled(self, factor: float) -> LabelledBody:
        """The body made `factor` times larger about the origin."""
        return self._each(lambda body: body.scaled(factor))

    def _each(self, change: Callable[[VoxelBody], VoxelBody]) -> LabelledBody:
        return replace(
            self, whole=change(self.whole), members=tuple(change(m) for m in self.members)
        )
