"""Single bodies of the catalogue, each a particle of one material, centred on the origin.

Sizes are full lengths in nm, those of the solid before its edges are rounded. Shapes with an axis
take `axis`. By default those longer than wide (rod, bipyramid) lie along x, where light that runs
along z and is polarized along x drives them; the others stand on z.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from .body import FloatArray, Part, Particle
from .catalogue import Parameter, length, shape
from .frame import Frame
from .primitives import Capsule, Cuboid, Ellipsoid, Sphere, Torus
from .primitives_flat import Plate, Polyhedron, regular_polygon
from .primitives_revolved import Frustum
from .primitives_swept import Helix
from .rough import RoughSphere
from .solid import Solid, require
from .transform import Turned

AXIS = Parameter("axis of the shape", kind="choice", choices=("x", "y", "z"))
SEED = Parameter("seed of the random numbers", check=">= 0", kind="count")


def particle_of(body: Solid, material: str, name: str) -> Particle:
    """A particle that is one body."""
    return Particle((Part(body, material),), name=name)


def along(solid: Solid, axis: str) -> Solid:
    """A solid made about z, with its axis along x, y or z."""
    if axis == "z":
        return solid
    shift = 1 if axis == "x" else 2
    # a cyclic exchange of the axes is a rotation, and exact
    return Turned(solid, np.roll(np.eye(3), shift, axis=0))


@shape(diameter=length("diameter", example=60.0))
def sphere(diameter: float, material: str = "gold") -> Particle:
    """Sphere."""
    return particle_of(Sphere(diameter), material, "sphere")


@shape(
    axes=Parameter("full axes along x, y, z", "nm", "> 0", "numbers", example=(90.0, 50.0, 50.0))
)
def ellipsoid(axes: Sequence[float], material: str = "gold") -> Particle:
    """Ellipsoid."""
    x, y, z = three(axes, "axes")
    return particle_of(Ellipsoid((x, y, z)), material, "ellipsoid")


@shape(
    edge=length("edge", example=60.0),
    rounding=length("radius of edges and corners", ">= 0 and <= edge/2", example=8.0),
)
def cube(edge: float, rounding: float = 0.0, material: str = "gold") -> Particle:
    """Cube, edges along x, y, z."""
    return particle_of(Cuboid((edge, edge, edge), rounding), material, "cube")


@shape(
    sides=Parameter("full sides along x, y, z", "nm", "> 0", "numbers", example=(90.0, 50.0, 40.0)),
    rounding=length("radius of edges and corners", ">= 0 and <= min(sides)/2", example=6.0),
)
def cuboid(sides: Sequence[float], rounding: float = 0.0, material: str = "gold") -> Particle:
    """Box, sides along x, y, z."""
    x, y, z = three(sides, "sides")
    return particle_of(Cuboid((x, y, z), rounding), material, "cuboid")


@shape(
    length=length("total length, caps included", ">= diameter", example=90.0),
    diameter=length("diameter", example=30.0),
    axis=AXIS,
)
def rod(length: float, diameter: float, axis: str = "x", material: str = "gold") -> Particle:
    """Rod with hemispherical caps, by default along x."""
    return particle_of(along(Capsule(length, diameter), axis), material, "rod")


@shape(
    diameter=length("diameter", example=40.0),
    length=length("length along the axis", example=80.0),
    rounding=length("radius of the rims", ">= 0 and <= min(diameter, length)/2", example=4.0),
    axis=AXIS,
)
def cylinder(
    diameter: float,
    length: float,
    rounding: float = 0.0,
    axis: str = "z",
    material: str = "gold",
) -> Particle:
    """Cylinder with flat ends, by default along z."""
    body = Frustum(diameter, diameter, length, rounding)
    return particle_of(along(body, axis), material, "cylinder")


@shape(
    diameter=length("diameter", example=80.0),
    thickness=length("thickness along the axis", example=20.0),
    rounding=length("radius of the rims", ">= 0 and <= min(diameter, thickness)/2", example=6.0),
    axis=AXIS,
)
def disk(
    diameter: float,
    thickness: float,
    rounding: float = 0.0,
    axis: str = "z",
    material: str = "gold",
) -> Particle:
    """Flat disk, by default in the x, y plane."""
    body = Frustum(diameter, diameter, thickness, rounding)
    return particle_of(along(body, axis), material, "disk")


@shape(
    diameter=length("diameter of the base", example=60.0),
    height=length("height of the sharp cone", example=80.0),
    top=length("diameter of a flat top, 0 for a tip", ">= 0"),
    rounding=length("radius of tip and rims", ">= 0", example=5.0),
    axis=AXIS,
)
def cone(
    diameter: float,
    height: float,
    top: float = 0.0,
    rounding: float = 0.0,
    axis: str = "z",
    material: str = "gold",
) -> Particle:
    """Cone or truncated cone, its tip by default up z."""
    return particle_of(along(Frustum(diameter, top, height, rounding), axis), material, "cone")


@shape(
    diameter=length("diameter over all", example=90.0),
    thickness=length("diameter of the tube", "> 0 and < diameter/2", example=22.0),
    axis=AXIS,
)
def torus(diameter: float, thickness: float, axis: str = "z", material: str = "gold") -> Particle:
    """Ring of round cross section, by default in the x, y plane."""
    return particle_of(along(Torus(diameter, thickness), axis), material, "torus")


@shape(
    sides=Parameter("number of sides", check=">= 3", kind="count", example=3),
    edge=length("edge of the sharp polygon", example=80.0),
    thickness=length("thickness along the axis", example=20.0),
    tip=length("radius of the tips seen from above", ">= 0", example=8.0),
    rounding=length("radius of the rims", ">= 0 and <= thickness/2", example=3.0),
    axis=AXIS,
)
def prism(
    sides: int,
    edge: float,
    thickness: float,
    tip: float = 0.0,
    rounding: float = 0.0,
    axis: str = "z",
    material: str = "gold",
) -> Particle:
    """Plate on a regular polygon, by default in the x, y plane with a tip up y."""
    body = Plate(regular_polygon(sides, edge), thickness, tip, rounding)
    return particle_of(along(body, axis), material, "prism")


@shape(
    sides=Parameter("number of sides", check=">= 3", kind="count"),
    length=length("length from end to end, after truncation", example=90.0),
    width=length("diameter of the circle around the waist", example=40.0),
    truncation=Parameter("part of each half that is cut off", check=">= 0 and < 1", example=0.15),
    rounding=length("radius of edges and tips", ">= 0", example=3.0),
    axis=AXIS,
)
def bipyramid(
    length: float,
    width: float,
    sides: int = 5,
    truncation: float = 0.0,
    rounding: float = 0.0,
    axis: str = "x",
    material: str = "gold",
) -> Particle:
    """Two pyramids base to base, ends cut off, by default along x."""
    waist = regular_polygon(sides, width * np.sin(np.pi / sides))
    flat = np.concatenate([waist, np.zeros((sides, 1))], axis=1)
    if truncation > 0:
        end = np.concatenate([waist * truncation, np.full((sides, 1), length / 2)], axis=1)
    else:
        end = np.array([[0.0, 0.0, length / 2]])
    vertices = np.concatenate([flat, end, end * [1, 1, -1]])
    return particle_of(along(Polyhedron(vertices, rounding), axis), material, "bipyramid")


EDGE = length("edge of the sharp solid", example=70.0)
ROUNDING = length("radius of edges and corners", ">= 0", example=5.0)


@shape(edge=EDGE, rounding=ROUNDING)
def octahedron(edge: float, rounding: float = 0.0, material: str = "gold") -> Particle:
    """Regular octahedron, corners on the axes x, y, z."""
    vertices = np.concatenate([np.eye(3), -np.eye(3)]) * edge / np.sqrt(2)
    return particle_of(Polyhedron(vertices, rounding), material, "octahedron")


@shape(edge=EDGE, rounding=ROUNDING)
def tetrahedron(edge: float, rounding: float = 0.0, material: str = "gold") -> Particle:
    """Regular tetrahedron on a face, one corner up z, its centre at the origin."""
    height = edge * np.sqrt(2 / 3)
    base = np.concatenate([regular_polygon(3, edge), np.full((3, 1), -height / 4)], axis=1)
    vertices = np.concatenate([base, [[0.0, 0.0, 3 * height / 4]]])
    return particle_of(Polyhedron(vertices, rounding), material, "tetrahedron")


@shape(edge=length("edge of the sharp solid", example=40.0), rounding=ROUNDING)
def icosahedron(edge: float, rounding: float = 0.0, material: str = "gold") -> Particle:
    """Regular icosahedron, 2-fold axes along x, y, z."""
    return particle_of(Polyhedron(icosahedron_corners(edge), rounding), material, "icosahedron")


def icosahedron_corners(edge: float) -> FloatArray:
    """The 12 corners, (12, 3) nm."""
    golden = (1 + np.sqrt(5)) / 2
    signs = [(a, b) for a in (1, -1) for b in (1, -1)]
    corners = np.array([(0.0, a, b * golden) for a, b in signs])
    return np.concatenate([np.roll(corners, k, axis=1) for k in range(3)]) * edge / 2


@shape(
    diameter=length("diameter over all", example=80.0),
    pitch=length("rise in one turn", example=45.0),
    turns=Parameter("number of turns", check="> 0", example=2.5),
    thickness=length("diameter of the wire", "> 0 and < diameter", example=16.0),
    hand=Parameter("sense of winding", kind="choice", choices=("right", "left")),
    axis=AXIS,
)
def helix(
    diameter: float,
    pitch: float,
    turns: float,
    thickness: float,
    hand: str = "right",
    axis: str = "z",
    material: str = "gold",
) -> Particle:
    """Wire wound into a helix, by default about z."""
    sense = 1 if hand == "right" else -1
    body = Helix(diameter - thickness, pitch, turns, thickness, sense)
    return particle_of(along(body, axis), material, "helix")


@shape(
    edge=length("outer edge", example=70.0),
    bar=length("width of the square bars", "> 0 and < edge/2", example=14.0),
    rounding=length("radius of the bars' edges", ">= 0 and <= bar/2", example=3.0),
)
def frame(edge: float, bar: float, rounding: float = 0.0, material: str = "gold") -> Particle:
    """Hollow cube frame: twelve bars along the edges of a cube."""
    return particle_of(Frame(edge, bar, rounding), material, "frame")


@shape(
    diameter=length("diameter of the sphere of the same volume", example=60.0),
    roughness=length("root mean square height of the bumps", ">= 0 and < diameter/8", example=2.5),
    correlation=length(
        "distance along the surface over which heights are alike",
        ">= diameter/30 and <= diameter",
        example=12.0,
    ),
    seed=SEED,
)
def rough_sphere(
    diameter: float,
    roughness: float,
    correlation: float,
    seed: int = 0,
    material: str = "gold",
) -> Particle:
    """Sphere with random bumps."""
    body = RoughSphere(diameter, roughness, correlation, seed)
    return particle_of(body, material, "rough sphere")


def three(values: Sequence[float], name: str) -> tuple[float, float, float]:
    """Three numbers, or ShapeError."""
    require(len(values) == 3, f"{name} = {values} must be three lengths (nm)", (name,))
    x, y, z = (float(v) for v in values)
    return x, y, z
