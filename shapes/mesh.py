"""Particles from triangle meshes: STL, OBJ, PLY, 3MF, GLB."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property
from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .body import Bounds, FloatArray, Mirrors, Part, Particle, SampleGrid, ShapeError
from .mesh_fill import fill_mesh
from .solid import Solid

if TYPE_CHECKING:
    from .mesh_distance import TriangleTree

UNITS = {  # nm
    "pm": 1e-3,
    "angstrom": 0.1,
    "nm": 1.0,
    "um": 1e3,
    "mm": 1e6,
    "cm": 1e7,
    "m": 1e9,
    "inch": 2.54e7,
}
SAME_UNIT = {"a": "angstrom", "å": "angstrom", "µm": "um", "μm": "um", "micron": "um"}
LONG_UNITS = {  # as files spell them
    "micron": "um",
    "micrometer": "um",
    "millimeter": "mm",
    "millimeters": "mm",
    "centimeter": "cm",
    "meter": "m",
    "meters": "m",
}
FORMATS = ("stl", "obj", "ply", "3mf", "glb")
SMALLEST, LARGEST = 0.5, 1e5  # nm: extents outside this are taken for a wrong unit
MIRROR_SAMPLES = 48  # across the largest extent
MIRROR_TOLERANCE = 1e-4  # of the largest extent


def from_mesh(
    path: str | PathLike[str],
    unit: str = "nm",
    scale: float = 1.0,
    material: str = "gold",
    repair: bool = True,
) -> Particle:
    """Particle bounded by the triangles of a file.

    The mesh must be closed. Small damage is repaired (doubled and degenerate triangles, corners
    that are not joined, triangles turned the wrong way, holes up to a fifth of the size) and listed
    in the `notes` of the particle's body, with its size; what cannot be repaired is refused. Two or
    more bodies in the file make one particle, and a body inside another one with its triangles
    facing the other way is a cavity. Coordinates are kept as the file has them.

    Parameters
    ----------
    path : path
        STL (binary or ASCII), OBJ, PLY, 3MF or GLB file.
    unit : str
        What a coordinate of 1 in the file means: "nm", "um", "mm", "cm", "m", "angstrom", "pm" or
        "inch".
    scale : float
        Enlarges the particle, after the unit.
    material : str
        Name of the material.
    repair : bool
        False refuses a mesh that would need repair.

    Raises
    ------
    ShapeError
        If the file cannot be read, or bounds no solid, or its size is absurd; says what and where.

    Examples
    --------
    >>> import tempfile, trimesh
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     _ = trimesh.creation.box((40, 40, 20)).export(folder + "/plate.stl")
    ...     plate = from_mesh(folder + "/plate.stl", material="silver")
    >>> round(plate.volume()), round(plate.area()), plate.mirrors()
    (32000, 6400, (True, True, True))
    >>> plate.parts[0].body.notes
    ('size 40 x 40 x 20 nm (1 in the file taken as 1 nm)',)
    """
    path = Path(path)
    factor = _unit(unit)
    if not (np.isfinite(scale) and scale > 0):
        raise ShapeError(f"scale = {scale!r} must be a number greater than 0")
    vertices, faces, declared = _read(path)
    body = body_from_triangles(vertices * (factor * scale), faces, path.name, repair, unit)
    low, high = body.bounds
    size = " x ".join(f"{edge:.4g}" for edge in high - low)
    notes = [f"size {size} nm (1 in the file taken as {factor * scale:g} nm)"]
    if declared and UNITS.get(declared, factor) != factor:
        notes.append(f"the file itself names its unit {declared!r}; unit = {unit!r} was asked for")
    body = replace(body, notes=(*notes, *body.notes))
    return Particle((Part(body, material),), name=path.stem)


def body_from_triangles(
    vertices: ArrayLike, faces: ArrayLike, name: str = "mesh", repair: bool = True, unit: str = "nm"
) -> MeshBody:
    """Body bounded by triangles, checked and repaired as `from_mesh` says.

    Parameters
    ----------
    vertices : (nv, 3)
        Corners, nm.
    faces : (nf, 3) int
        Corner numbers of each triangle, counter-clockwise seen from outside.
    name, unit : str
        For messages.
    repair : bool
        False refuses a mesh that would need repair.
    """
    from .mesh_pieces import outward_bodies
    from .mesh_repair import closed_surface

    corners = np.asarray(vertices, dtype=np.float64).reshape(-1, 3)
    triangles = np.asarray(faces, dtype=np.int64).reshape(-1, 3)
    if len(triangles) == 0:
        raise ShapeError(f"{name} is empty: it has no triangles")
    bad = np.flatnonzero(~np.isfinite(corners).all(axis=1))
    if len(bad):
        raise ShapeError(
            f"{name}: {len(bad)} of {len(corners)} corners are not finite numbers, "
            f"the first is corner {bad[0]}: {corners[bad[0]].tolist()}"
        )
    _refuse_absurd_size(corners[triangles], name, unit)
    surface = closed_surface(corners, triangles, name)
    if surface.notes and not repair:
        raise ShapeError(f"{name} needs repair ({'; '.join(surface.notes)}), and repair is off")
    bodies = outward_bodies(surface, name)
    return MeshBody(*bodies)


@dataclass(frozen=True, eq=False)
class MeshBody(Solid):
    """A solid bounded by triangles; make one with `from_mesh` or `body_from_triangles`.

    Attributes
    ----------
    vertices : (nv, 3) float64 array
        Corners, nm.
    faces : (nf, 3) int array
        Corner numbers of each triangle, counter-clockwise seen from outside.
    layer : (nf,) int array
        Bodies that may touch are in different layers; the particle is the union of the layers.
    overlap : bool
        Whether bodies share a volume, so that volume and area do not just add.
    notes : tuple of str
        Size, what was repaired and what was found, for the user.
    """

    vertices: FloatArray
    faces: NDArray[np.int64]
    layer: NDArray[np.int64]
    overlap: bool = False
    notes: tuple[str, ...] = ()

    @property
    def exact(self) -> frozenset[str]:  # type: ignore[override]
        return frozenset({"bounds"} if self.overlap else {"bounds", "volume", "area"})

    @cached_property
    def bounds(self) -> Bounds:  # type: ignore[override]
        """Lower and upper corner of the bounding box, nm."""
        return self.vertices.min(axis=0), self.vertices.max(axis=0)

    @property
    def pivot(self) -> FloatArray:
        """Centre of the bounding box, (3,) nm."""
        low, high = self.bounds
        return (low + high) / 2

    def support(self, directions: FloatArray) -> FloatArray:
        """How far the solid reaches from the origin along unit `directions` (N, 3), (N,) nm."""
        return np.array([np.max(self.vertices @ d) for d in np.atleast_2d(directions)])

    def signed_distance(self, points: FloatArray) -> FloatArray:
        """Exact distance from the surface, positive inside, (N,) nm, at `points` (N, 3) nm."""
        from .mesh_distance import signed_distance

        return np.max([signed_distance(tree, points) for tree in self._trees], axis=0)

    def volume(self) -> float:
        """Volume, nm^3: exact from the triangles, measured if bodies overlap."""
        if self.overlap:
            return super().volume()
        from .mesh_pieces import signed_volumes

        centred = self.vertices - self.pivot
        return float(signed_volumes(centred, self.faces, self.layer).sum())

    def area(self) -> float:
        """Surface area, nm^2: exact from the triangles, measured if bodies overlap."""
        if self.overlap:
            return super().area()
        a, b, c = (self.vertices[self.faces[:, m]] for m in range(3))
        return float(np.linalg.norm(np.cross(b - a, c - a), axis=1).sum() / 2)

    def mirrors(self) -> Mirrors:
        """Whether the centre planes of the bounds are mirror planes, to 1e-4 of the largest extent.

        The filled fractions of a grid centred on the body move by the displacement of the surface
        over the step, so comparing them with their mirror images measures the asymmetry.
        """
        low, high = self.bounds
        step = float(np.max(high - low)) / MIRROR_SAMPLES
        shape = np.ceil((high - low) / step).astype(int) + 2
        origin = (low + high) / 2 - step * (shape - 1) / 2
        filled = self.fill(SampleGrid(origin, step, tuple(shape)))  # type: ignore[arg-type]
        limit = MIRROR_TOLERANCE * MIRROR_SAMPLES
        x, y, z = (bool(np.abs(filled - np.flip(filled, m)).max() <= limit) for m in range(3))
        return x, y, z

    def fill(self, grid: SampleGrid) -> NDArray[np.float32]:
        """Filled fraction of every sample voxel, (grid.shape) float32."""
        out = np.zeros(grid.shape, np.float32)
        window = grid.window(self.bounds)
        if window is None:
            return out
        part = grid.cut(window)
        places = (self.vertices - part.origin) / grid.step
        first, last = self._span
        near = (last >= part.origin[0] - grid.step) & (
            first <= part.origin[0] + grid.step * part.shape[0]
        )
        for number in range(int(self.layer.max()) + 1):
            chosen = self.faces[near & (self.layer == number)]
            filled = fill_mesh(places[chosen], part.shape)
            if self.overlap:
                np.maximum(out[window], filled, out=out[window])
            else:  # fractions of bodies that share nothing add up, also where they touch
                out[window] += filled
        return np.minimum(out, 1.0, out=out)

    def moved(self, offset: ArrayLike) -> MeshBody:  # type: ignore[override]
        """The solid moved by `offset`, (3,) nm."""
        return replace(self, vertices=self.vertices + np.asarray(offset, dtype=float).reshape(3))

    def rotated(self, angle: float, axis: ArrayLike = (0, 0, 1)) -> MeshBody:  # type: ignore[override]
        """The solid turned by `angle` degrees about `axis` through the origin."""
        from .transform import rotation_matrix

        return replace(self, vertices=self.vertices @ rotation_matrix(angle, axis).T)

    def mirrored(self, axis: int) -> MeshBody:  # type: ignore[override]
        """The mirror image in the plane through the origin across x (0), y (1) or z (2)."""
        signs = np.ones(3)
        signs[axis] = -1.0
        return replace(self, vertices=self.vertices * signs, faces=self.faces[:, ::-1].copy())

    def scaled(self, factor: float) -> MeshBody:  # type: ignore[override]
        """The solid made `factor` times larger about the origin."""
        if not (np.isfinite(factor) and factor > 0):
            raise ShapeError(f"scale factor {factor!r} must be a number greater than 0")
        return replace(self, vertices=self.vertices * factor)

    @cached_property
    def _span(self) -> tuple[NDArray, NDArray]:
        """Least and greatest x of each triangle, so that a slab costs only its own triangles."""
        x = self.vertices[:, 0][self.faces]
        return x.min(axis=1), x.max(axis=1)

    @cached_property
    def _trees(self) -> list[TriangleTree]:
        from .mesh_distance import triangle_tree

        layers = range(int(self.layer.max()) + 1)
        return [triangle_tree(self.vertices[self.faces[self.layer == n]]) for n in layers]


def _unit(unit: str) -> float:
    name = SAME_UNIT.get(str(unit).lower(), unit)
    if name not in UNITS:
        raise ShapeError(f"unknown unit {unit!r}; known are {', '.join(UNITS)}")
    return UNITS[name]


def _read(path: Path) -> tuple[NDArray, NDArray, str | None]:
    """Corners and triangles as the file has them, and the unit it declares, if any."""
    kind = path.suffix.lower().lstrip(".")
    if kind not in FORMATS:
        known = ", ".join("." + f for f in FORMATS)
        raise ShapeError(
            f"{path.name}: unknown kind of mesh file {path.suffix!r}; known are {known}"
        )
    if not path.is_file():
        raise ShapeError(f"no mesh file {path}")
    import trimesh

    try:
        with path.open("rb") as file:
            loaded = trimesh.load(file, file_type=kind, process=False)
    except ImportError as error:
        raise ShapeError(
            f"reading {path.name} needs a package that is not installed: {error}"
        ) from error
    except Exception as error:  # each format has errors of its own; to the user they are one
        raise ShapeError(f"{path.name} cannot be read as {kind.upper()}: {error}") from error
    declared = getattr(loaded, "units", None)
    if isinstance(loaded, trimesh.Scene):
        loaded = loaded.to_mesh()
    if not isinstance(loaded, trimesh.Trimesh) or len(loaded.faces) == 0:
        raise ShapeError(
            f"{path.name} holds no triangles: it is empty or not a valid {kind.upper()} file"
        )
    return (
        np.array(loaded.vertices, dtype=np.float64),
        np.array(loaded.faces, dtype=np.int64),
        LONG_UNITS.get(str(declared), str(declared)) if declared else None,
    )


def _refuse_absurd_size(triangles: NDArray, name: str, unit: str) -> None:
    extent = np.ptp(triangles.reshape(-1, 3), axis=0)
    largest = float(extent.max())
    if SMALLEST <= largest <= LARGEST:
        return
    size = " x ".join(f"{edge:.3g}" for edge in extent)
    in_file = largest / _unit(unit)
    fitting = [repr(name) for name, factor in UNITS.items() if 5 <= in_file * factor <= 5e3]
    hint = f"; unit = {' or '.join(fitting)} would make sense" if fitting else ""
    raise ShapeError(
        f"{name} is {size} nm in size with unit = {unit!r}, outside {SMALLEST} nm to "
        f"{LARGEST:g} nm: the unit or the scale is wrong{hint}"
    )
