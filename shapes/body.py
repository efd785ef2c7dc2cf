"""What a particle is made of: bodies that can be sampled, parts with a material, particles.

Lengths are in nm. A body is anything that says how much of a small sample voxel it fills; solids,
meshes and voxel images are bodies. A particle is a sequence of parts, later parts overwriting
earlier ones where they overlap.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any, Protocol, runtime_checkable

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.float64]
Bounds = tuple[FloatArray, FloatArray]
Mirrors = tuple[bool, bool, bool]


class ShapeError(ValueError):
    """A shape that cannot be built or sampled; the message says what would be right.

    `where` names the parameter at fault, outermost first, such as ("of", "diameter").
    """

    def __init__(self, message: str, where: tuple[str, ...] = ()) -> None:
        super().__init__(message)
        self.where = where


@dataclass(frozen=True, eq=False)
class SampleGrid:
    """A box of cubic sample voxels.

    Attributes
    ----------
    origin : (3,) array
        Centre of sample (0, 0, 0), nm.
    step : float
        Edge of a sample voxel, nm.
    shape : tuple of 3 ints
        Number of samples along x, y, z.

    Examples
    --------
    >>> grid = SampleGrid((0.0, 0.0, 0.0), 0.5, (4, 2, 2))
    >>> grid.axes[0]
    array([0. , 0.5, 1. , 1.5])
    """

    origin: FloatArray
    step: float
    shape: tuple[int, ...]

    def __post_init__(self) -> None:
        object.__setattr__(self, "origin", np.asarray(self.origin, dtype=float).reshape(3))
        object.__setattr__(self, "shape", tuple(int(n) for n in self.shape))

    @property
    def axes(self) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Coordinates of the sample centres along x, y, z, nm."""
        x, y, z = (
            o + self.step * np.arange(n) for o, n in zip(self.origin, self.shape, strict=True)
        )
        return x, y, z

    @property
    def bounds(self) -> Bounds:
        """Lower and upper corner of the box the voxels fill, nm."""
        low = self.origin - self.step / 2
        return low, low + self.step * np.asarray(self.shape)

    def points(self) -> FloatArray:
        """Centres of all samples, (N, 3) nm, C order."""
        x, y, z = np.meshgrid(*self.axes, indexing="ij")
        return np.stack([x.ravel(), y.ravel(), z.ravel()], axis=1)

    def window(self, bounds: Bounds, margin: float = 0.0) -> tuple[slice, slice, slice] | None:
        """Slices of the samples whose voxels touch the box `bounds`, None if there are none.

        `margin` (nm) widens the box; the default catches every voxel the box cuts.
        """
        reach = margin + self.step / 2
        slices = []
        for axis in range(3):
            low = (bounds[0][axis] - reach - self.origin[axis]) / self.step
            high = (bounds[1][axis] + reach - self.origin[axis]) / self.step
            first = max(0, int(np.ceil(low - 1e-9)))
            stop = min(self.shape[axis], int(np.floor(high + 1e-9)) + 1)
            if stop <= first:
                return None
            slices.append(slice(first, stop))
        return slices[0], slices[1], slices[2]

    def cut(self, window: tuple[slice, slice, slice]) -> SampleGrid:
        """The part of the grid that `window` (slices with explicit ends) selects."""
        starts = np.array([s.start for s in window])
        shape = tuple(s.stop - s.start for s in window)
        return SampleGrid(self.origin + self.step * starts, self.step, shape)


@runtime_checkable
class Body(Protocol):
    """Anything that can be voxelized."""

    @property
    def bounds(self) -> Bounds:
        """Lower and upper corner of the bounding box, nm."""

    def fill(self, grid: SampleGrid) -> NDArray[np.float32]:
        """Filled fraction of every sample voxel, anti-aliased, shape `grid.shape`."""

    def volume(self) -> float:
        """Volume, nm^3."""

    def area(self) -> float:
        """Surface area, nm^2."""

    def mirrors(self) -> Mirrors:
        """Whether the planes x, y, z = centre of the bounds are mirror planes."""


@dataclass(frozen=True, eq=False)
class Part:
    """A body and what it is made of; material None removes what earlier parts put there."""

    body: Body
    material: str | None

    def __post_init__(self) -> None:
        if self.material is not None and not isinstance(self.material, str):
            raise ShapeError(
                f"a part's material is a name or None, not {type(self.material).__name__} "
                f"{self.material!r}"
            )


@dataclass(frozen=True, eq=False)
class Particle:
    """Parts in order; later parts overwrite earlier ones where they overlap.

    Attributes
    ----------
    parts : tuple of Part
    name : str
        What it is, for figures and tables.
    outline : Body or None
        Body whose surface is the particle's outer surface, where one is known: it gives volume and
        area exactly.
    thin : float or None
        Thickness of the thinnest part, nm, where the parts themselves do not tell.
    gap : float or None
        Narrowest gap between members of an assembly, nm.

    Examples
    --------
    >>> import shapes
    >>> particle = shapes.sphere(diameter=20, material="gold")
    >>> particle.materials, round(particle.volume(), 1)
    (('gold',), 4188.8)
    """

    parts: tuple[Part, ...]
    name: str = "particle"
    outline: Body | None = None
    thin: float | None = None
    gap: float | None = None

    def __post_init__(self) -> None:
        object.__setattr__(self, "parts", tuple(self.parts))
        if not self.materials:
            raise ShapeError("a particle needs at least one part with a material")

    @property
    def materials(self) -> tuple[str, ...]:
        """Names of the materials, in the order in which they first appear."""
        return tuple(dict.fromkeys(p.material for p in self.parts if p.material is not None))

    @property
    def bounds(self) -> Bounds:
        """Lower and upper corner of the bounding box, nm (parts that remove are not counted)."""
        if self.outline is not None:
            return self.outline.bounds
        boxes = [p.body.bounds for p in self.parts if p.material is not None]
        low = np.min([box[0] for box in boxes], axis=0)
        high = np.max([box[1] for box in boxes], axis=0)
        return low, high

    @property
    def extent(self) -> FloatArray:
        """Edges of the bounding box, (3,) nm."""
        low, high = self.bounds
        return high - low

    @property
    def whole(self) -> Body | None:
        """The body that volume and area are taken from, None if they must be measured."""
        if self.outline is not None:
            return self.outline
        if len(self.parts) == 1:
            return self.parts[0].body
        return None

    def volume(self) -> float:
        """Volume of all that is not host, nm^3; see `exact`."""
        if self.whole is not None:
            return self.whole.volume()
        if parts_apart(self):
            return float(sum(p.body.volume() for p in self.parts))
        from .measure import measured_volume

        return measured_volume(self)

    def area(self) -> float:
        """Area of the surface towards the host, nm^2; see `exact`."""
        if self.whole is not None:
            return self.whole.area()
        if parts_apart(self):
            return float(sum(p.body.area() for p in self.parts))
        from .measure import measured_area

        return measured_area(self)

    @property
    def exact(self) -> frozenset[str]:
        """Which of "volume", "area", "bounds" are exact; the others are measured on a fine grid."""
        whole = self.whole
        if whole is not None:
            return frozenset(getattr(whole, "exact", ()))
        each = [frozenset(getattr(p.body, "exact", ())) for p in self.parts]
        common = frozenset.intersection(*each)
        return common if parts_apart(self) else common & {"bounds"}

    @property
    def thinnest(self) -> float | None:
        """Thickness of the thinnest part, nm, None if it is not known."""
        if self.thin is not None:
            return self.thin
        known = [getattr(p.body, "thinnest", None) for p in self.parts if p.material is not None]
        values = [t for t in known if t is not None]
        return min(values) if values else None

    def mirrors(self) -> Mirrors:
        """Whether the centre planes of the bounds are mirror planes, materials included."""
        from .symmetry import particle_mirrors

        return particle_mirrors(self)

    def rotations(self) -> tuple[float, float, float]:
        """Order of the rotation axis along x, y, z; 1 for none, inf for any angle."""
        from .symmetry import particle_rotations

        return particle_rotations(self)

    def moved(self, offset: ArrayLike) -> Particle:
        """The particle moved by `offset`, (3,) nm."""
        return self._each(lambda body: body.moved(offset))

    def rotated(self, angle: float, axis: ArrayLike = (0, 0, 1)) -> Particle:
        """The particle turned by `angle` degrees about `axis` through the origin."""
        return self._each(lambda body: body.rotated(angle, axis))

    def mirrored(self, axis: int) -> Particle:
        """The mirror image in the plane through the origin across x (0), y (1) or z (2)."""
        return self._each(lambda body: body.mirrored(axis))

    def scaled(self, factor: float) -> Particle:
        """The particle made `factor` times larger about the origin."""
        bigger = self._each(lambda body: body.scaled(factor))
        thin, gap = (None if v is None else v * factor for v in (self.thin, self.gap))
        return replace(bigger, thin=thin, gap=gap)

    def centred(self) -> Particle:
        """The particle moved so that the centre of its bounds is the origin."""
        low, high = self.bounds
        return self.moved(-(low + high) / 2)

    def _each(self, change: Callable[[Any], Any]) -> Particle:
        try:
            parts = tuple(Part(change(p.body), p.material) for p in self.parts)
            outline = None if self.outline is None else change(self.outline)
        except AttributeError as error:
            raise ShapeError(
                f"a body of this particle cannot be moved or turned: {error}"
            ) from error
        return replace(self, parts=parts, outline=outline)


def parts_apart(particle: Particle) -> bool:
    """Whether the bounding boxes of all parts are apart, and none of them removes."""
    if len(particle.parts) > 64 or any(p.material is None for p in particle.parts):
        return False
    boxes = [p.body.bounds for p in particle.parts]
    for i, (low, high) in enumerate(boxes):
        for other_low, other_high in boxes[:i]:
            if np.all(low < other_high) and np.all(other_low < high):
                return False
    return True
