"""Solids: bodies given by a signed distance, which combine.

The distance is positive inside, in nm, and never changes by more than the step one takes
(1-Lipschitz), so its value is a safe lower bound on the way to the surface: whole blocks of samples
are settled by one evaluation.
"""

from __future__ import annotations

import os
from concurrent.futures import ThreadPoolExecutor
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .body import Bounds, FloatArray, Mirrors, SampleGrid, ShapeError
from .plane import blocks_filled

if TYPE_CHECKING:
    from . import combine, transform

EXACT = frozenset({"volume", "area", "bounds"})
BLOCK = 8  # edge in samples of the blocks that `fill` settles at once
CHUNK = 256  # blocks evaluated together, which bounds the memory


class Solid:
    """A body with a signed distance.

    A subclass defines `signed_distance` and `support`, and where there is a closed form `steiner`,
    or `volume` and `area` with `exact`.
    """

    exact: frozenset[str] = frozenset({"bounds"})

    def signed_distance(self, points: FloatArray) -> FloatArray:
        """Distance from the surface, positive inside, (N,) nm, at `points` (N, 3) nm."""
        raise NotImplementedError

    def support(self, directions: FloatArray) -> FloatArray:
        """How far the solid reaches from the origin along unit `directions` (N, 3), (N,) nm."""
        raise NotImplementedError

    def steiner(self) -> tuple[float, float, float] | None:
        """Volume, area and integrated mean curvature of a convex solid, None if not known.

        They give the solid grown by t exactly (Steiner 1840): V + A t + M t^2 + (4 pi/3) t^3.
        """
        return None

    @property
    def thinnest(self) -> float | None:
        """Thickness of the thinnest part, nm, None if not known."""
        return None

    @property
    def pivot(self) -> FloatArray:
        """Point that the solid's rotation axes go through, (3,) nm."""
        return np.zeros(3)

    def surface_distance(self, points: FloatArray) -> FloatArray:
        """Signed distance that is accurate near the surface, even if not 1-Lipschitz elsewhere."""
        return self.signed_distance(points)

    @property
    def bounds(self) -> Bounds:
        """Lower and upper corner of the bounding box, nm; measured unless `exact` says so."""
        loose = -self.support(-np.eye(3)), self.support(np.eye(3))
        if "bounds" in self.exact:
            return loose
        from .measure import measured_bounds

        return measured_bounds(self, loose)

    def volume(self) -> float:
        """Volume, nm^3."""
        known = self.steiner()
        if known is not None:
            return known[0]
        from .measure import measured_volume

        return measured_volume(self)

    def area(self) -> float:
        """Surface area, nm^2."""
        known = self.steiner()
        if known is not None:
            return known[1]
        from .measure import measured_area

        return measured_area(self)

    def mirrors(self) -> Mirrors:
        """Whether the planes x, y, z = centre of the bounds are mirror planes."""
        from .symmetry import solid_mirrors

        return solid_mirrors(self)

    def rotations(self) -> tuple[float, float, float]:
        """Order of the rotation axis along x, y, z through `pivot`; inf for any angle."""
        from .symmetry import solid_rotations

        return solid_rotations(self)

    def probes(self, number: int) -> FloatArray:
        """About `number` points for each primitive of the solid, in and around it, (N, 3) nm."""
        low, high = self.bounds
        rng = np.random.default_rng(7)
        margin = 0.05 * (high - low)
        return rng.uniform(low - margin, high + margin, (number, 3))

    def fill(self, grid: SampleGrid) -> NDArray[np.float32]:
        """Filled fraction of every sample voxel of `grid`, exact where the surface is flat."""
        window = grid.window(self.bounds)
        out = np.zeros(grid.shape, dtype=np.float32)
        if window is not None:
            out[window] = self._fill_box(grid.cut(window))
        return out

    def _fill_box(self, grid: SampleGrid) -> NDArray[np.float32]:
        blocks = tuple(-(-n // BLOCK) for n in grid.shape)
        padded = np.zeros(tuple(b * BLOCK for b in blocks), dtype=np.float32)
        by_block = padded.reshape(blocks[0], BLOCK, blocks[1], BLOCK, blocks[2], BLOCK)
        middle = grid.origin + grid.step * (BLOCK - 1) / 2
        coarse = SampleGrid(middle, grid.step * BLOCK, blocks)
        distance = self.signed_distance(coarse.points())
        reach = grid.step * BLOCK / 2 * np.sqrt(3)
        inner = np.nonzero((distance >= reach).reshape(blocks))
        by_block[inner[0], :, inner[1], :, inner[2], :] = 1.0
        near = np.stack(np.nonzero((np.abs(distance) < reach).reshape(blocks)), axis=1)
        # with a layer around, so that it does not matter where blocks begin
        wide = BLOCK + 2
        offsets = SampleGrid(np.full(3, -grid.step), grid.step, (wide, wide, wide)).points()

        def sample(start: int) -> None:
            some = near[start : start + CHUNK]
            corners = grid.origin + grid.step * BLOCK * some
            points = (corners[:, None, :] + offsets[None]).reshape(-1, 3)
            distance = self.surface_distance(points).reshape(len(some), wide, wide, wide)
            filled = blocks_filled(distance, grid.step)
            by_block[some[:, 0], :, some[:, 1], :, some[:, 2], :] = filled

        starts = range(0, len(near), CHUNK)
        if len(starts) > 1:
            # distances release the interpreter's lock, so plain threads share them out
            with ThreadPoolExecutor(os.cpu_count()) as workers:
                list(workers.map(sample, starts))
        else:
            for start in starts:
                sample(start)
        nx, ny, nz = grid.shape
        return padded[:nx, :ny, :nz]

    def union(self, *others: Solid) -> combine.Union:
        """This solid and the others."""
        from .combine import Union

        return Union((self, *others))

    def intersection(self, *others: Solid) -> combine.Intersection:
        """What this solid and the others share."""
        from .combine import Intersection

        return Intersection((self, *others))

    def difference(self, other: Solid) -> combine.Difference:
        """This solid without the other."""
        from .combine import Difference

        return Difference(self, other)

    def blend(self, *others: Solid, radius: float) -> combine.Blend:
        """This solid and the others, joined by fillets that reach about `radius` nm."""
        from .combine import Blend

        return Blend((self, *others), radius)

    def moved(self, offset: ArrayLike) -> transform.Moved:
        """The solid moved by `offset`, (3,) nm."""
        from .transform import Moved

        return Moved(self, np.asarray(offset, dtype=float))

    def rotated(self, angle: float, axis: ArrayLike = (0, 0, 1)) -> transform.Turned:
        """The solid turned by `angle` degrees about `axis` through the origin."""
        from .transform import Turned, rotation_matrix

        return Turned(self, rotation_matrix(angle, axis))

    def mirrored(self, axis: int) -> transform.Turned:
        """The mirror image in the plane through the origin across x (0), y (1) or z (2)."""
        from .transform import Turned

        signs = np.ones(3)
        signs[axis] = -1.0
        return Turned(self, np.diag(signs))

    def scaled(self, factor: float) -> transform.Scaled:
        """The solid made `factor` times larger about the origin."""
        from .transform import Scaled

        return Scaled(self, float(factor))

    def grown(self, distance: float) -> transform.Grown:
        """The solid with a layer of `distance` nm put on (taken off if negative)."""
        from .transform import Grown

        return Grown(self, float(distance))

    def shell(self, thickness: float) -> transform.Shell:
        """The outermost `thickness` nm of the solid: a hollow one."""
        from .transform import Shell

        return Shell(self, float(thickness))

    def __or__(self, other: Solid) -> combine.Union:
        return self.union(other)

    def __and__(self, other: Solid) -> combine.Intersection:
        return self.intersection(other)

    def __sub__(self, other: Solid) -> combine.Difference:
        return self.difference(other)


def require(condition: bool, message: str, where: tuple[str, ...] = ()) -> None:
    """Raise ShapeError with `message` unless `condition` holds."""
    if not condition:
        raise ShapeError(message, where)


def positive(**values: float) -> None:
    """Raise ShapeError unless every named value is a finite number greater than zero."""
    for name, value in values.items():
        if not (np.isfinite(value) and value > 0):
            raise ShapeError(f"{name} = {value:g} must be a number greater than 0 (nm)")
