"""Single bodies of the catalogue, each a particle of one material. Sizes are full lengths in nm."""

from __future__ import annotations

from collections.abc import Sequence

from .body import Part, Particle
from .primitives import Cuboid, Ellipsoid, Sphere
from .solid import Solid, require


def particle_of(body: Solid, material: str, name: str) -> Particle:
    """A particle that is one body."""
    return Particle((Part(body, material),), name=name)


def sphere(diameter: float = 60.0, material: str = "gold") -> Particle:
    """Sphere."""
    return particle_of(Sphere(diameter), material, "sphere")


def ellipsoid(axes: Sequence[float] = (80.0, 50.0, 50.0), material: str = "gold") -> Particle:
    """Ellipsoid of full axes along x, y, z."""
    x, y, z = three(axes, "axes")
    return particle_of(Ellipsoid((x, y, z)), material, "ellipsoid")


def cube(edge: float = 60.0, rounding: float = 8.0, material: str = "gold") -> Particle:
    """Cube; `rounding` is the radius of its edges and corners."""
    return particle_of(Cuboid((edge, edge, edge), rounding), material, "cube")


def cuboid(
    sides: Sequence[float] = (80.0, 50.0, 40.0), rounding: float = 5.0, material: str = "gold"
) -> Particle:
    """Box of full sides along x, y, z; `rounding` is the radius of its edges and corners."""
    x, y, z = three(sides, "sides")
    return particle_of(Cuboid((x, y, z), rounding), material, "cuboid")


def three(values: Sequence[float], name: str) -> tuple[float, float, float]:
    """Three numbers, or ShapeError."""
    require(len(values) == 3, f"{name} = {values} must be three lengths, along x, y and z (nm)")
    x, y, z = (float(v) for v in values)
    return x, y, z
