"""Geometry of particles: solids, meshes, voxel images and their cells on a cubic lattice."""

from . import catalogue
from .aggregate import aggregate
from .assemblies import bowtie, chain, core_shell, dimer, hollow, multilayer, ring
from .body import Body, Part, Particle, SampleGrid, ShapeError
from .builders import (
    bipyramid,
    cone,
    cube,
    cuboid,
    cylinder,
    disk,
    ellipsoid,
    frame,
    helix,
    icosahedron,
    octahedron,
    prism,
    rod,
    rough_sphere,
    sphere,
    tetrahedron,
    torus,
)
from .cells import Cells
from .image import from_image
from .mesh import from_mesh
from .parts import assemble, build_parts, placed
from .solid import Solid
from .star import star
from .voxelize import voxelize

__all__ = [
    "Body",
    "Cells",
    "Part",
    "Particle",
    "SampleGrid",
    "ShapeError",
    "Solid",
    "aggregate",
    "assemble",
    "bipyramid",
    "bowtie",
    "build_parts",
    "catalogue",
    "chain",
    "cone",
    "core_shell",
    "cube",
    "cuboid",
    "cylinder",
    "dimer",
    "disk",
    "ellipsoid",
    "frame",
    "from_image",
    "from_mesh",
    "helix",
    "hollow",
    "icosahedron",
    "multilayer",
    "octahedron",
    "placed",
    "prism",
    "ring",
    "rod",
    "rough_sphere",
    "sphere",
    "star",
    "tetrahedron",
    "torus",
    "voxelize",
]
