"""Geometry of particles: solids, meshes, voxel images and their cells on a cubic lattice."""

from .body import Body, Part, Particle, SampleGrid, ShapeError
from .builders import cube, cuboid, ellipsoid, sphere
from .cells import Cells
from .image import from_image
from .mesh import from_mesh
from .solid import Solid
from .voxelize import voxelize

__all__ = [
    "Body",
    "Cells",
    "Part",
    "Particle",
    "SampleGrid",
    "ShapeError",
    "Solid",
    "cube",
    "cuboid",
    "ellipsoid",
    "from_image",
    "from_mesh",
    "sphere",
    "voxelize",
]
