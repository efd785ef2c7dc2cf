"""Mirror planes and rotation axes of solids and particles, found by comparing distances.

A plane or axis counts when the signed distances at points all over the body, and at their images,
agree. Every primitive of a combination contributes its own points, so a small asymmetric detail is
not overlooked.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import TYPE_CHECKING, Any

import numpy as np

from .body import FloatArray, Mirrors, Particle

if TYPE_CHECKING:
    from .solid import Solid

TOLERANCE = 1e-7  # of the largest extent; distances are good to about 1e-12 of it
FEW, MANY, LIMIT = 12, 400, 20_000
ORDERS = range(24, 1, -1)
TURN_UNLIKELY = 1.0  # radians: no rational part of a full turn, so only a round body passes

Field = Callable[[FloatArray], FloatArray]


def solid_mirrors(solid: Solid) -> Mirrors:
    """Whether the centre planes of the solid's bounds are mirror planes."""
    low, high = solid.bounds
    return _mirrors(lambda p: solid.signed_distance(p)[:, None], solid.probes, low, high)


def solid_rotations(solid: Solid) -> tuple[float, float, float]:
    """Order of the rotation axis along x, y, z through the solid's pivot."""
    low, high = solid.bounds
    scale = float(np.max(high - low))
    return _rotations(lambda p: solid.signed_distance(p)[:, None], solid.probes, solid.pivot, scale)


def particle_mirrors(particle: Particle) -> Mirrors:
    """Whether the centre planes of the particle's bounds are mirror planes, materials included."""
    from .solid import Solid

    if len(particle.parts) == 1 and particle.outline is None:
        return particle.parts[0].body.mirrors()  # a mesh has a tolerance of its own
    low, high = particle.bounds
    if all(isinstance(p.body, Solid) for p in particle.parts):
        return _mirrors(_layers(particle), _probes(particle), low, high)
    # meshes and images know only their own planes: these must be the particle's
    scale = float(np.max(high - low))
    answer = [True, True, True]
    for part in particle.parts:
        own_low, own_high = part.body.bounds
        same = np.abs(own_low + own_high - low - high) < TOLERANCE * scale
        own = part.body.mirrors()
        answer = [a and bool(same[k]) and bool(own[k]) for k, a in enumerate(answer)]
    return answer[0], answer[1], answer[2]


def particle_rotations(particle: Particle) -> tuple[float, float, float]:
    """Order of the axes along x, y, z, through a single part's pivot or else the origin."""
    from .solid import Solid

    if not all(isinstance(p.body, Solid) for p in particle.parts):
        return 1, 1, 1
    body = particle.parts[0].body
    pivot = body.pivot if len(particle.parts) == 1 and isinstance(body, Solid) else np.zeros(3)
    return _rotations(_layers(particle), _probes(particle), pivot, float(np.max(particle.extent)))


def _layers(particle: Particle) -> Field:
    """Signed distance of each material after all parts have been laid over each other."""
    materials = particle.materials

    def field(points: FloatArray) -> FloatArray:
        layers = np.full((len(points), len(materials)), -np.inf)
        for part in particle.parts:
            distance = part.body.signed_distance(points)  # type: ignore[attr-defined]
            np.minimum(layers, -distance[:, None], out=layers)
            if part.material is not None:
                k = materials.index(part.material)
                layers[:, k] = np.maximum(layers[:, k], distance)
        return layers

    return field


def _probes(particle: Particle) -> Callable[[int], FloatArray]:
    bodies: list[Any] = [part.body for part in particle.parts]
    return lambda number: np.concatenate([body.probes(number) for body in bodies])


def _mirrors(
    field: Field, probes: Callable[[int], FloatArray], low: FloatArray, high: FloatArray
) -> Mirrors:
    scale, centre = float(np.max(high - low)), (low + high) / 2
    answer = []
    for axis in range(3):
        flip = np.ones(3)
        flip[axis] = -1.0
        answer.append(_invariant(field, probes, np.diag(flip), centre, scale))
    return answer[0], answer[1], answer[2]


def _rotations(
    field: Field, probes: Callable[[int], FloatArray], pivot: FloatArray, scale: float
) -> tuple[float, float, float]:
    orders = []
    for axis in range(3):
        order: float = 1
        if _invariant(field, probes, _turn(axis, TURN_UNLIKELY), pivot, scale):
            order = math.inf
        else:
            for n in ORDERS:
                if _invariant(field, probes, _turn(axis, 2 * np.pi / n), pivot, scale):
                    order = n
                    break
        orders.append(order)
    return orders[0], orders[1], orders[2]


def _turn(axis: int, angle: float) -> FloatArray:
    matrix = np.eye(3)
    i, j = (axis + 1) % 3, (axis + 2) % 3
    matrix[i, i] = matrix[j, j] = np.cos(angle)
    matrix[j, i], matrix[i, j] = np.sin(angle), -np.sin(angle)
    return matrix


def _invariant(
    field: Field,
    probes: Callable[[int], FloatArray],
    matrix: FloatArray,
    centre: FloatArray,
    scale: float,
) -> bool:
    """Whether `field` is unchanged by `matrix` about `centre`; few points settle most cases."""
    for number in (FEW, MANY):
        points = probes(number)
        if len(points) > LIMIT:
            points = points[:: -(-len(points) // LIMIT)]
        images = (points - centre) @ matrix.T + centre
        difference = np.abs(field(points) - field(images))
        if not np.all(difference[np.isfinite(difference)] < TOLERANCE * scale):
            return False
    return True
