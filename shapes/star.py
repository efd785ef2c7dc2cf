"""Star: a round core with tapered spikes."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numba
import numpy as np

from .body import FloatArray, Particle
from .builders import SEED, icosahedron_corners, particle_of
from .catalogue import Parameter, length, shape
from .combine import Blend
from .primitives import Sphere
from .primitives_swept import Spike
from .solid import Solid, require

ARRANGEMENTS = ("even", "random", "axes", "corners", "icosahedral", "flat")
TRIES = 20_000


@shape(
    core=length("diameter of the core", example=50.0),
    spikes=Parameter("number of spikes", check=">= 1 and <= 200", kind="count", example=14),
    length=length("length of a spike from the core's surface to its tip", example=30.0),
    base_radius=length("radius of a spike at the core", "> 0 and <= core/2", example=9.0),
    tip_radius=length("radius of its rounded tip", "> 0 and <= base_radius", example=2.5),
    arrangement=Parameter(
        "directions of the spikes: even over the sphere, random but apart, along the axes x y z "
        "(6), to a cube's corners (8), to an icosahedron's (12), or flat in the x, y plane",
        kind="choice",
        choices=ARRANGEMENTS,
    ),
    spread=Parameter("relative standard deviation of the lengths", check=">= 0 and <= 0.5"),
    blend=length("reach of the fillets between spikes and core", ">= 0 and <= core/2"),
    seed=SEED,
)
def star(
    core: float,
    spikes: int,
    length: float,
    base_radius: float,
    tip_radius: float,
    arrangement: str = "even",
    spread: float = 0.0,
    blend: float = 0.0,
    seed: int = 0,
    material: str = "gold",
) -> Particle:
    """Star: a round core with tapered, round-tipped spikes."""
    rng = np.random.default_rng(seed)
    directions = spike_directions(spikes, arrangement, rng)
    lengths = length * np.clip(1 + spread * rng.standard_normal(spikes), 0.3, 2.0)
    body: Solid = Spikes(core, directions, lengths, base_radius, tip_radius)
    round_core = Sphere(core)
    joined = Blend((round_core, body), blend) if blend > 0 else round_core.union(body)
    return particle_of(joined, material, "star")


def spike_directions(count: int, arrangement: str, rng: np.random.Generator) -> FloatArray:
    """Unit vectors of `count` spikes, (count, 3).

    >>> spike_directions(4, "flat", np.random.default_rng(0)).round(3) + 0.0
    array([[ 1.,  0.,  0.],
           [ 0.,  1.,  0.],
           [-1.,  0.,  0.],
           [ 0., -1.,  0.]])
    """
    if arrangement == "flat":
        angle = 2 * np.pi * np.arange(count) / count
        return np.stack([np.cos(angle), np.sin(angle), np.zeros(count)], axis=1)
    if arrangement == "even":
        k = np.arange(count) + 0.5
        z = 1 - 2 * k / count
        turn = k * np.pi * (3 - np.sqrt(5))
        across = np.sqrt(1 - z**2)
        return np.stack([across * np.cos(turn), across * np.sin(turn), z], axis=1)
    if arrangement == "random":
        return _random_apart(count, rng)
    known = {
        "axes": np.concatenate([np.eye(3), -np.eye(3)]),
        "corners": np.array([(x, y, z) for x in (1, -1) for y in (1, -1) for z in (1, -1)]),
        "icosahedral": icosahedron_corners(1.0),
    }[arrangement]
    require(
        count == len(known),
        f"spikes = {count} must be {len(known)} for arrangement {arrangement!r}",
    )
    return known / np.linalg.norm(known, axis=1, keepdims=True)


def _random_apart(count: int, rng: np.random.Generator) -> FloatArray:
    """Random directions, each at least half the even spacing from all others."""
    least = np.sqrt(4 * np.pi / count) / 2
    chosen = np.empty((0, 3))
    for _ in range(TRIES):
        vector = rng.standard_normal(3)
        vector /= np.linalg.norm(vector)
        if np.all(chosen @ vector < np.cos(least)):
            chosen = np.concatenate([chosen, vector[None]])
            if len(chosen) == count:
                break
    require(
        len(chosen) == count,
        f"no room for {count} random spikes; use arrangement 'even'",
        ("spikes",),
    )
    return chosen


@dataclass(frozen=True, eq=False)
class Spikes(Solid):
    """Tapered spikes from the surface of a sphere of diameter `core`, lengths (n,) nm."""

    core: float
    directions: FloatArray
    lengths: FloatArray
    base: float
    tip: float

    @cached_property
    def _between(self) -> FloatArray:
        """Distance between the centres of the spheres at a spike's base and at its tip, (n,)."""
        return self.lengths - self.tip

    def __post_init__(self) -> None:
        shortest = float(self._between.min())
        require(
            shortest > self.base - self.tip,
            f"length: the shortest spike, {self.lengths.min():.3g} nm, must be longer than its "
            f"base radius, {self.base:g} nm",
            ("length",),
        )

    def signed_distance(self, points: FloatArray) -> FloatArray:
        points = np.ascontiguousarray(points, dtype=float)
        directions = np.ascontiguousarray(self.directions)
        return _spikes_distance(
            points, directions, self._between, self.core / 2, self.base, self.tip
        )

    def support(self, directions: FloatArray) -> FloatArray:
        cosine = directions @ self.directions.T
        near = self.core / 2 * cosine + self.base
        far = (self.core / 2 + self._between) * cosine + self.tip
        return np.maximum(near, far).max(axis=1)

    @property
    def thinnest(self) -> float:
        return 2 * self.tip

    def probes(self, number: int) -> FloatArray:
        rng = np.random.default_rng(7)
        one = Spike(1.0, 0.5, 0.5).probes(number)  # scaled to every spike below
        points = []
        for direction, reach in zip(self.directions, self._between, strict=True):
            centre = direction * (self.core / 2 + rng.uniform(0, reach, len(one))[:, None])
            points.append(centre + one * 2 * self.base)
        return np.concatenate(points)


@numba.njit(cache=True, nogil=True)
def _spikes_distance(points, directions, between, start, base, tip):  # type: ignore[no-untyped-def]
    """Signed distance from the union of hulls of two spheres on each direction."""
    out = np.empty(points.shape[0])
    for n in range(points.shape[0]):
        x, y, z = points[n, 0], points[n, 1], points[n, 2]
        square = x * x + y * y + z * z
        best = -np.inf
        for k in range(directions.shape[0]):
            along = x * directions[k, 0] + y * directions[k, 1] + z * directions[k, 2]
            rho = np.sqrt(max(square - along * along, 0.0))
            sine = (base - tip) / between[k]
            slide = along - start - rho * sine / np.sqrt(1 - sine * sine)
            centre = min(max(slide, 0.0), between[k])
            gap = np.sqrt(rho * rho + (along - start - centre) ** 2)
            best = max(best, base - sine * centre - gap)
        out[n] = best
    return out
