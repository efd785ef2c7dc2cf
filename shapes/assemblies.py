"""Particles made of other particles: coated, hollow, paired, chained, in a ring."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from .body import Body, Part, Particle, ShapeError
from .builders import AXIS, particle_of
from .catalogue import Parameter, length, shape
from .combine import Union
from .primitives_flat import Plate, regular_polygon
from .solid import Solid, require
from .transform import Shell


def nested(doc: str, **of: object) -> Parameter:
    """A parameter that is itself a shape, with the values of an example."""
    return Parameter(doc, kind="particle", example=of)


@shape(
    of=nested("the core", shape="sphere", diameter=50.0, material="silica"),
    thickness=length("thickness of the shell", example=8.0),
)
def core_shell(of: Particle, thickness: float, material: str = "gold") -> Particle:
    """Core of any shape with a shell of even thickness around it."""
    coated = _coated(of, (thickness,), (material,))
    return Particle(coated.parts, "core-shell", coated.outline, coated.thin, of.gap)


@shape(
    of=nested("the core", shape="sphere", diameter=40.0, material="gold"),
    thicknesses=Parameter(
        "thickness of each layer, from inside out", "nm", "> 0", "numbers", example=(10.0, 6.0)
    ),
    materials=Parameter(
        "material of each layer; without, the core's material and the outer one alternate, so "
        "that the outermost layer has the outer one",
        kind="names",
        example=("silica", "gold"),
    ),
)
def multilayer(
    of: Particle,
    thicknesses: Sequence[float],
    materials: Sequence[str] = (),
    material: str = "gold",
) -> Particle:
    """Core of any shape with several layers, each of even thickness."""
    count = len(thicknesses)
    require(count > 0, "multilayer: thicknesses must list a layer or more (nm)", ("thicknesses",))
    if not materials:
        both = (material, of.materials[-1])
        materials = tuple(both[(count - 1 - k) % 2] for k in range(count))
    require(
        len(materials) == count,
        f"multilayer: materials lists {len(materials)} names for {count} thicknesses",
        ("materials",),
    )
    coated = _coated(of, tuple(thicknesses), tuple(materials))
    return Particle(coated.parts, "multilayer", coated.outline, coated.thin, of.gap)


@shape(
    of=nested("the solid that is hollowed", shape="cube", edge=60.0, rounding=10.0),
    thickness=length("thickness of the wall", example=8.0),
)
def hollow(of: Particle, thickness: float, material: str = "gold") -> Particle:
    """Closed shell of any shape, host inside."""
    solid = _solid(of, "hollowed out")
    thin = of.thinnest
    require(
        thin is None or 2 * thickness < thin,
        f"hollow: thickness = {thickness:g} must be less than half of the solid's thinnest part, "
        f"{(thin or 0.0) / 2:g} nm",
        ("thickness",),
    )
    return particle_of(Shell(solid, thickness), material, "hollow")


@shape(
    of=nested("one of the two", shape="sphere", diameter=50.0),
    gap=length("gap between the two; negative if they overlap", "", example=3.0),
    axis=AXIS,
)
def dimer(of: Particle, gap: float, axis: str = "x", material: str = "gold") -> Particle:
    """Two of a shape, the second one the mirror image of the first across the gap."""
    k = "xyz".index(axis)
    first = of.centred()
    require(
        gap > -first.extent[k],
        f"dimer: gap = {gap:g} nm makes the two coincide; it must be more than "
        f"{-first.extent[k]:g} nm",
        ("gap",),
    )
    offset = np.zeros(3)
    offset[k] = -(first.extent[k] + gap) / 2
    left = first.moved(offset)
    return _together([left, left.mirrored(k)], gap, "dimer")


@shape(
    of=nested("one member", shape="sphere", diameter=40.0),
    number=Parameter("number of members", check=">= 2 and <= 500", kind="count", example=4),
    gap=length("gap between neighbours; negative if they overlap", "", example=3.0),
    axis=AXIS,
)
def chain(
    of: Particle, number: int, gap: float, axis: str = "x", material: str = "gold"
) -> Particle:
    """Straight row of copies, their bounding boxes apart by the gap."""
    k = "xyz".index(axis)
    one = of.centred()
    pitch = one.extent[k] + gap
    require(pitch > 0, f"chain: gap = {gap:g} must be more than {-one.extent[k]:g} nm", ("gap",))
    places = np.zeros((number, 3))
    places[:, k] = pitch * (np.arange(number) - (number - 1) / 2)
    return _together([one.moved(place) for place in places], gap, "chain")


@shape(
    of=nested("one member", shape="sphere", diameter=36.0),
    number=Parameter("number of members", check=">= 3 and <= 500", kind="count", example=6),
    gap=length("gap between neighbours; negative if they overlap", "", example=3.0),
)
def ring(of: Particle, number: int, gap: float, material: str = "gold") -> Particle:
    """Copies on a circle about z, each turned along with its place."""
    one = of.centred()
    half = 180.0 / number
    # neighbours meet at the plane halfway between them: their reach towards it sets the circle
    reach = (one.rotated(-half).bounds[1][1] - one.rotated(half).bounds[0][1]) / 2
    radius = (reach + gap / 2) / np.sin(np.radians(half))
    require(radius > 0, f"ring: gap = {gap:g} must be more than {-2 * reach:g} nm", ("gap",))
    out = one.moved((radius, 0.0, 0.0))
    members = [out.rotated(2 * half * k) for k in range(number)]
    return _together(members, gap, "ring")


@shape(
    edge=length("edge of the sharp triangles", example=70.0),
    thickness=length("thickness along z", example=20.0),
    gap=length("gap between the two tips", "> 0", example=5.0),
    tip=length("radius of the tips seen from above", ">= 0", example=6.0),
    rounding=length("radius of the rims", ">= 0 and <= thickness/2", example=3.0),
)
def bowtie(
    edge: float,
    thickness: float,
    gap: float,
    tip: float = 0.0,
    rounding: float = 0.0,
    material: str = "gold",
) -> Particle:
    """Two triangular plates, tip to tip across a gap along x."""
    plate = Plate(regular_polygon(3, edge), thickness, tip, rounding).rotated(-90)
    left = plate.moved((-gap / 2 - plate.bounds[1][0], 0.0, 0.0))
    one = particle_of(left, material, "triangle")
    return _together([one, one.mirrored(0)], gap, "bowtie")


def _coated(of: Particle, thicknesses: tuple[float, ...], materials: tuple[str, ...]) -> Particle:
    """Layers around a particle, the outermost one first among the parts."""
    core = _solid(of, "coated")
    total = np.cumsum(thicknesses)
    layers = [Part(core.grown(t), m) for t, m in zip(total, materials, strict=True)]
    known = [*thicknesses, *([of.thinnest] if of.thinnest is not None else [])]
    outline = layers[-1].body
    return Particle((*reversed(layers), *of.parts), of.name, outline, min(known))


def _solid(of: Particle, what: str) -> Solid:
    """The particle's outer surface as a solid."""
    whole = of.whole
    if whole is None:
        bodies = [p.body for p in of.parts if p.material is not None]
        solids = [b for b in bodies if isinstance(b, Solid)]
        if len(solids) == len(bodies) == len(of.parts):
            return Union(tuple(solids))
    if not isinstance(whole, Solid):
        raise ShapeError(
            f"a {of.name} cannot be {what}: only solids of the catalogue know their distance",
            ("of",),
        )
    return whole


def _together(members: Sequence[Particle], gap: float, name: str) -> Particle:
    """Members as one particle; their outlines joined, apart if the gap is open."""
    parts = tuple(part for member in members for part in member.parts)
    wholes: list[Body | None] = [member.whole for member in members]
    solids = [w for w in wholes if isinstance(w, Solid)]
    outline = Union(tuple(solids), disjoint=gap >= 0) if len(solids) == len(members) else None
    gaps = [g for g in (gap, members[0].gap) if g is not None and g > 0]
    return Particle(parts, name, outline, members[0].thinnest, min(gaps) if gaps else None)
