"""Volume, area and bounding box of bodies without a closed form, measured."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from weakref import WeakKeyDictionary

import numpy as np
from numpy.typing import NDArray

from .body import Body, Bounds, FloatArray, Particle, SampleGrid, ShapeError
from .solid import Solid

VOLUME_SAMPLES = 120  # along the largest extent
SLAB = 2_000_000  # samples held at once
BOX_TOLERANCE = 4e-3  # of the largest extent: how far ahead a corner may be overlooked
RAYS, STEPS = 64, 12

# bodies never change, so what has been measured once stays true as long as they live
_boxes: WeakKeyDictionary[Solid, Bounds] = WeakKeyDictionary()
_known: WeakKeyDictionary[Body | Particle, dict[tuple[str, int], float]] = WeakKeyDictionary()


def measured_volume(thing: Body | Particle, samples: int = VOLUME_SAMPLES) -> float:
    """Volume by counting filled samples, nm^3; good to about 0.1 % for compact bodies.

    Parameters
    ----------
    thing : Body or Particle
        What to measure; for a particle all that is not host.
    samples : int
        Samples along the largest extent.

    Examples
    --------
    >>> from shapes.primitives import Sphere
    >>> round(measured_volume(Sphere(20.0)) / Sphere(20.0).volume(), 3)
    1.0
    """
    return _remembered(thing, "volume", samples, _volume)


def _volume(thing: Body | Particle, samples: int) -> float:
    grid = _grid(thing, samples)
    total = sum(float(filled.sum(dtype=float)) for _, filled in _slabs(thing, grid, 0))
    return total * grid.step**3


def measured_area(thing: Body | Particle, samples: int = VOLUME_SAMPLES) -> float:
    """Surface area, nm^2, good to about 0.1 % for solids and 1 % for other bodies.

    Of solids, the volume between two surfaces half a sample inside and outside, over their
    distance. Of other bodies, the integral of the gradient of the filled fraction.
    """
    return _remembered(thing, "area", samples, _area)


def _area(thing: Body | Particle, samples: int) -> float:
    solid = _as_solid(thing)
    if solid is None:
        # smoothing cuts edges by an area that grows with the samples: two sizes lead back to none
        return 2 * _slope_area(thing, samples) - _slope_area(thing, samples // 2)
    low, high = thing.bounds
    shift = float(np.max(high - low)) / samples / 2
    outer, inner = (_volume(_Level(solid, sign * shift), samples) for sign in (1, -1))
    return (outer - inner) / (2 * shift)


def _as_solid(thing: Body | Particle) -> Solid | None:
    """All that is not host as one solid, None if some of it is no solid."""
    if not isinstance(thing, Particle):
        return thing if isinstance(thing, Solid) else None
    total: Solid | None = None
    for part in thing.parts:
        if not isinstance(part.body, Solid):
            return None
        if part.material is None:
            total = None if total is None else total.difference(part.body)
        else:
            total = part.body if total is None else total.union(part.body)
    return total


@dataclass(frozen=True, eq=False)
class _Level(Solid):
    """What lies within `shift` outside of a solid's surface, on its own rough box."""

    base: Solid
    shift: float

    @property
    def bounds(self) -> Bounds:
        low, high = self.base.bounds
        return low - abs(self.shift), high + abs(self.shift)

    def signed_distance(self, points: FloatArray) -> FloatArray:
        return self.base.signed_distance(points) + self.shift

    def surface_distance(self, points: FloatArray) -> FloatArray:
        return self.base.surface_distance(points) + self.shift


def _slope_area(thing: Body | Particle, samples: int) -> float:
    grid = _grid(thing, samples)
    total = 0.0
    for inner, filled in _slabs(thing, grid, 3):
        smooth = filled.astype(float)
        for axis in range(3):
            smooth = _blur(_blur(smooth, axis), axis)
        gradient = np.gradient(smooth, grid.step)
        total += float(np.sqrt(sum(g**2 for g in gradient))[inner].sum())
    return total * grid.step**3


def _remembered(
    thing: Body | Particle,
    what: str,
    samples: int,
    measure: Callable[[Body | Particle, int], float],
) -> float:
    known = _known.setdefault(thing, {})
    if (what, samples) not in known:
        known[what, samples] = measure(thing, samples)
    return known[what, samples]


def measured_bounds(solid: Solid, loose: Bounds) -> Bounds:
    """Bounding box within the box `loose`; a sharp corner may stick out by BOX_TOLERANCE of it.

    Boxes that may hold a point of the solid beyond the farthest one known are split, until they
    are small; that the distance is 1-Lipschitz says which may.

    Raises
    ------
    ShapeError
        If the solid is empty.
    """
    if solid not in _boxes:
        middle = (loose[0] + loose[1]) / 2
        reach = np.empty((2, 3))
        for axis in range(3):
            for side, sign in enumerate((-1.0, 1.0)):
                reach[side, axis] = _farthest(solid, loose, axis, sign) - sign * middle[axis]
        scale = float(np.max(loose[1] - loose[0]))
        alike = np.abs(reach[0] - reach[1]) < 2 * BOX_TOLERANCE * scale
        reach = np.where(alike, reach.max(axis=0), reach)  # keeps the centre of a symmetric solid
        _boxes[solid] = middle - reach[0], middle + reach[1]
    low, high = _boxes[solid]
    return low.copy(), high.copy()


def _farthest(solid: Solid, loose: Bounds, axis: int, sign: float) -> float:
    """Greatest coordinate along sign * axis of a point of the solid."""
    size = float(np.max(loose[1] - loose[0]))
    half = size / 2
    centres = ((loose[0] + loose[1]) / 2)[None]
    corners = np.stack(np.meshgrid([-1, 1], [-1, 1], [-1, 1], indexing="ij"), axis=-1).reshape(8, 3)
    best, tip = -np.inf, np.zeros(3)
    while len(centres) and half > BOX_TOLERANCE * size / 2:
        half /= 2
        centres = (centres[:, None] + half * corners).reshape(-1, 3)
        distance = solid.signed_distance(centres)
        along = sign * centres[:, axis]
        inside = np.nonzero(distance >= 0)[0]
        if len(inside):
            foremost = inside[np.argsort(-(along + distance)[inside])[:RAYS]]
            reached, there = _along_rays(solid, centres[foremost], axis, sign)
            if reached > best:
                best, tip = reached, there
        able = (distance > -half * np.sqrt(3)) & (along + half > best + BOX_TOLERANCE * size)
        centres = centres[able]
    if best == -np.inf:
        raise ShapeError("this combination of solids is empty: nothing is left, or none overlap")
    # the farthest point is known to a box: climb to it
    across = np.roll(corners[:4] * [0, 1, 1], axis, axis=1)
    while half > 1e-5 * size:
        back = tip - sign * half * np.eye(3)[axis]
        reached, there = _along_rays(solid, back + half * across, axis, sign)
        if reached > best:
            best, tip = reached, there
        else:
            half /= 2
    return best


def _along_rays(
    solid: Solid, points: FloatArray, axis: int, sign: float
) -> tuple[float, FloatArray]:
    """Farthest place reached by going along the axis from points inside to the surface."""
    places, room = points.copy(), solid.signed_distance(points)
    started = room >= 0
    for _ in range(STEPS):
        places[:, axis] += sign * np.maximum(room, 0.0)  # a ball of that radius is inside
        room = solid.signed_distance(places)
    reached = np.where(started, sign * places[:, axis], -np.inf)
    first = int(reached.argmax())
    return float(reached[first]), places[first]


def occupied(thing: Body | Particle, grid: SampleGrid) -> NDArray[np.float32]:
    """Fraction of every sample voxel that is not host."""
    if not isinstance(thing, Particle):
        return thing.fill(grid)
    total = np.zeros(grid.shape, dtype=np.float32)
    for part in thing.parts:
        window = grid.window(part.body.bounds)
        if window is None:
            continue
        filled = part.body.fill(grid.cut(window))
        kept = total[window] * (1 - filled)
        total[window] = kept if part.material is None else kept + filled
    return total


def _grid(thing: Body | Particle, samples: int) -> SampleGrid:
    low, high = thing.bounds
    step = float(np.max(high - low)) / samples
    shape = np.ceil((high - low) / step).astype(int) + 8
    origin = (low + high) / 2 - step * (shape - 1) / 2
    return SampleGrid(origin, step, tuple(shape))


def _slabs(
    thing: Body | Particle, grid: SampleGrid, halo: int
) -> Iterator[tuple[slice, NDArray[np.float32]]]:
    """Slabs along x with `halo` samples on both sides, and the slice that drops the halo."""
    nx, ny, nz = grid.shape
    thick = max(1, SLAB // (ny * nz))
    for start in range(0, nx, thick):
        stop = min(nx, start + thick)
        origin = grid.origin - np.array([halo * grid.step, 0, 0])
        shifted = SampleGrid(origin, grid.step, (nx + 2 * halo, ny, nz))
        window = (slice(start, stop + 2 * halo), slice(0, ny), slice(0, nz))
        yield slice(halo, halo + stop - start), occupied(thing, shifted.cut(window))


def _blur(values: NDArray[np.float64], axis: int) -> NDArray[np.float64]:
    """Weights 1/4, 1/2, 1/4 along `axis`; the two outermost layers hold host only."""
    forward, backward = np.roll(values, 1, axis), np.roll(values, -1, axis)
    return values / 2 + (forward + backward) / 4
