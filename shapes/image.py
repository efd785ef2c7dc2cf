"""Particles from voxel images: labels, as electron tomography gives, or filled fractions."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import cached_property
from os import PathLike
from pathlib import Path

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .body import Bounds, FloatArray, Mirrors, Part, Particle, SampleGrid, ShapeError
from .image_field import (
    distance_field,
    matched_volume,
    overlap_fraction,
    sample_distance,
    sample_fraction,
    surface_points,
)

SMOOTH = 1.0  # voxels
LEAST_SMOOTH = 0.7  # voxels: a narrower Gaussian is not resolved by the voxels
SMALLEST, LARGEST = 0.5, 1e5  # nm
MIRROR_TOLERANCE = 1e-3  # voxels


def from_image(
    source: str | PathLike[str] | ArrayLike,
    voxel: float | ArrayLike,
    materials: Mapping[int | str, str | None] | None = None,
    smooth: float | None = None,
) -> Particle:
    """Particle from a voxel image.

    A whole-numbered image holds labels: 0 is the host, every other label a material. The staircase
    of the voxels is smoothed to the surface it stands for, its volume kept. An image of fractions
    between 0 and 1 says how much of each voxel one material fills; it is taken as it is.
    The centre of the image becomes the origin.

    Parameters
    ----------
    source : path or array
        .npy file, TIFF stack or array. Array axes are x, y, z. In a TIFF stack frames follow each
        other along z, rows along y and columns along x.
    voxel : float or (3,)
        Edge of a voxel, nm; three numbers (x, y, z) where voxels are no cubes.
    materials : mapping
        Name of the material of each label, None for a label that is host. May be left out if the
        only label is 1, which then is gold.
    smooth : float, optional
        Standard deviation in voxels of the smoothing: 0 (none) or at least 0.7. Default 1 for
        labels; fractions are never smoothed.

    Raises
    ------
    ShapeError
        If the file cannot be read or the image makes no particle; says what and where.

    Examples
    --------
    >>> import numpy as np
    >>> x = np.indices((44, 44, 44)) - 21.5
    >>> ball = ((x**2).sum(axis=0) < 20.0**2).astype(np.uint8)
    >>> particle = from_image(ball, voxel=0.5, materials={1: "silver"})
    >>> particle.materials, round(particle.volume() / (4 / 3 * np.pi * 10.0**3), 2)
    (('silver',), 1.0)
    """
    image, name = _read(source)
    edges = _voxel(voxel)
    if smooth is not None and not (smooth == 0 or LEAST_SMOOTH <= smooth <= 10):
        raise ShapeError(
            f"smooth = {smooth!r} voxels must be 0 (staircase) or from {LEAST_SMOOTH} to 10"
        )
    image, notes = _labels_or_fractions(image, name)
    _refuse_absurd_size(image, edges, name)
    border = _touches_border(image != 0)
    if border:
        notes.append(f"the particle touches the image border ({border}): it is cut off there")
    if image.dtype.kind == "f":
        return _from_fractions(image, edges, _single(materials, name), notes, name)
    wanted = _materials(image, materials, name)
    return _from_labels(image, edges, wanted, SMOOTH if smooth is None else smooth, notes, name)


@dataclass(frozen=True, eq=False)
class VoxelBody:
    """A body given by values on voxels; make one with `from_image`.

    Attributes
    ----------
    field : (nx, ny, nz) float32 array
        Signed distance (nm, positive inside) or filled fraction at the voxel centres.
    voxel : (3,) array
        Edges of a voxel, nm.
    offset : (3,) array
        Centre of voxel (0, 0, 0), nm.
    counted : float
        Volume of the voxels, nm^3.
    is_distance : bool
        What `field` holds.
    covered_by : tuple of VoxelBody
        Bodies of the same image that are laid over this one. Where they meet it is given as its
        share of what they leave, so that the shares come out right once they are laid over it.
    turn : (3, 3) array
        Rotation or reflection of the image.
    notes : tuple of str
        What was found, for the user.
    """

    field: NDArray[np.float32]
    voxel: FloatArray
    offset: FloatArray
    counted: float
    is_distance: bool = True
    covered_by: tuple[VoxelBody, ...] = ()
    turn: FloatArray = None  # type: ignore[assignment]
    notes: tuple[str, ...] = ()

    exact = frozenset[str]()

    def __post_init__(self) -> None:
        if self.turn is None:
            object.__setattr__(self, "turn", np.eye(3))

    @cached_property
    def bounds(self) -> Bounds:
        """Lower and upper corner of the bounding box, nm."""
        if self.is_distance:
            points = surface_points(self.field, 0.0)
        else:  # the boxes of all voxels that hold anything
            index = np.argwhere(self.field > 0)
            low, high = index.min(axis=0) - 0.5, index.max(axis=0) + 0.5
            points = np.stack(np.meshgrid(*zip(low, high, strict=True)), axis=-1).reshape(-1, 3)
        places = self.offset + (points * self.voxel) @ self.turn.T
        return places.min(axis=0), places.max(axis=0)

    def volume(self) -> float:
        """Volume of the voxels, nm^3."""
        return self.counted

    def area(self) -> float:
        """Surface area, nm^2, measured on a fine grid."""
        from .measure import measured_area

        return measured_area(self)

    def mirrors(self) -> Mirrors:
        """Whether the centre planes of the bounds are mirror planes."""
        order = np.abs(self.turn).argmax(axis=1)
        if not np.allclose(np.abs(self.turn)[np.arange(3), order], 1.0, atol=1e-9):
            return False, False, False
        field = self._tight
        limit = MIRROR_TOLERANCE * (float(self.voxel.min()) if self.is_distance else 1.0)
        own = [bool(np.abs(field - np.flip(field, m)).max() <= limit) for m in range(3)]
        return own[order[0]], own[order[1]], own[order[2]]

    def fill(self, grid: SampleGrid) -> NDArray[np.float32]:
        """Filled fraction of every sample voxel, (grid.shape) float32."""
        out = np.zeros(grid.shape, np.float32)
        window = grid.window(self.bounds)
        if window is None:
            return out
        part = grid.cut(window)
        filled = self._own_fill(part)
        if self.covered_by:
            left = 1.0 - sum(body._own_fill(part) for body in self.covered_by)
            share = np.divide(filled, left, out=np.zeros_like(filled), where=left > 1e-6)
            filled = np.minimum(share, 1.0)
        out[window] = filled
        return out

    def moved(self, offset: ArrayLike) -> VoxelBody:
        """The body moved by `offset`, (3,) nm."""
        shift = np.asarray(offset, dtype=float).reshape(3)
        covered = tuple(body.moved(shift) for body in self.covered_by)
        return replace(self, offset=self.offset + shift, covered_by=covered)

    def rotated(self, angle: float, axis: ArrayLike = (0, 0, 1)) -> VoxelBody:
        """The body turned by `angle` degrees about `axis` through the origin."""
        from .combine import rotation_matrix

        return self._turned(rotation_matrix(angle, axis))

    def mirrored(self, axis: int) -> VoxelBody:
        """The mirror image in the plane through the origin across x (0), y (1) or z (2)."""
        signs = np.ones(3)
        signs[axis] = -1.0
        return self._turned(np.diag(signs))

    def scaled(self, factor: float) -> VoxelBody:
        """The body made `factor` times larger about the origin."""
        if not (np.isfinite(factor) and factor > 0):
            raise ShapeError(f"scale factor {factor!r} must be a number greater than 0")
        return replace(
            self,
            field=self.field * np.float32(factor) if self.is_distance else self.field,
            voxel=self.voxel * factor,
            offset=self.offset * factor,
            counted=self.counted * factor**3,
            covered_by=tuple(body.scaled(factor) for body in self.covered_by),
        )

    def _turned(self, matrix: FloatArray) -> VoxelBody:
        covered = tuple(body._turned(matrix) for body in self.covered_by)
        turn, offset = matrix @ self.turn, matrix @ self.offset
        return replace(self, turn=turn, offset=offset, covered_by=covered)

    def _own_fill(self, grid: SampleGrid) -> NDArray[np.float32]:
        to_voxels = self.turn.T / self.voxel[:, None]
        start = to_voxels @ (grid.origin - self.offset)
        stride = to_voxels * grid.step
        parts = max(1, int(np.ceil(grid.step / self.voxel.min() - 1e-6)))
        if self.is_distance:
            return sample_distance(self.field, start, stride, grid.shape, grid.step, parts)
        if np.array_equal(self.turn, np.eye(3)):
            return overlap_fraction(self.field, start, np.diag(stride), grid.shape)
        return sample_fraction(self.field, start, stride, grid.shape, parts + 1)

    @cached_property
    def _tight(self) -> NDArray[np.float32]:
        """The field without the planes at its ends that hold nothing."""
        index = np.argwhere(self.field > 0)
        low, high = index.min(axis=0), index.max(axis=0) + 1
        return self.field[tuple(slice(a, b) for a, b in zip(low, high, strict=True))]


def _from_labels(
    image: NDArray,
    voxel: FloatArray,
    materials: dict[int, str],
    smooth: float,
    notes: list[str],
    name: str,
) -> Particle:
    anything = np.isin(image, list(materials))
    centre = voxel * (np.array(image.shape) - 1) / 2
    whole, thin, shift = _label_body(anything, voxel, centre, smooth, None)
    bodies = [whole]
    if len(materials) > 1:
        bodies = []
        for label in materials:
            body, lost, _ = _label_body(image == label, voxel, centre, smooth, shift)
            bodies.append(body)
            thin += lost
    if thin:
        notes.append(
            f"{thin} voxels lie in features too thin for a smoothing of {smooth:g} voxels: "
            "kept, but their thickness is uncertain"
        )
    size = " x ".join(f"{edge:.4g}" for edge in whole.bounds[1] - whole.bounds[0])
    told = (f"size {size} nm", *notes)
    parts = [
        Part(replace(body, covered_by=tuple(bodies[n + 1 :]), notes=told), material)
        for n, (body, material) in enumerate(zip(bodies, materials.values(), strict=True))
    ]
    outline = replace(whole, notes=told) if len(parts) > 1 else None
    return Particle(tuple(parts), name=name, outline=outline)


def _label_body(
    inside: NDArray[np.bool_],
    voxel: FloatArray,
    centre: FloatArray,
    smooth: float,
    shift: float | None,
) -> tuple[VoxelBody, int, float]:
    """Body of a set of voxels, its voxels in thin features, and the shift that kept its volume."""
    index = np.argwhere(inside)
    low, high = index.min(axis=0), index.max(axis=0) + 1
    margin = int(np.ceil(5 * smooth)) + 2
    crop = inside[tuple(slice(a, b) for a, b in zip(low, high, strict=True))]
    padded = np.pad(crop, margin)
    offset = voxel * (low - margin) - centre
    volume = float(len(index) * voxel.prod())
    if smooth == 0:
        return VoxelBody(padded.astype(np.float32), voxel, offset, volume, False), 0, 0.0
    distance, lost = distance_field(padded, voxel, smooth)
    if shift is None:
        shift = matched_volume(distance, voxel, volume)
    return VoxelBody(distance + np.float32(shift), voxel, offset, volume), lost, shift


def _from_fractions(
    image: NDArray, voxel: FloatArray, material: str, notes: list[str], name: str
) -> Particle:
    offset = -voxel * (np.array(image.shape) - 1) / 2
    volume = float(image.sum(dtype=float) * voxel.prod())
    body = VoxelBody(image.astype(np.float32), voxel, offset, volume, False, notes=tuple(notes))
    return Particle((Part(body, material),), name=name)


def _labels_or_fractions(image: NDArray, name: str) -> tuple[NDArray, list[str]]:
    """The image as whole numbers (labels) or floats (fractions), and what there is to say."""
    notes: list[str] = []
    if image.ndim != 3:
        raise ShapeError(
            f"{name} has {image.ndim} dimensions {image.shape}; a voxel image has three (x, y, z)"
        )
    if image.size == 0 or image.dtype.kind not in "biuf":
        raise ShapeError(f"{name} holds no numbers (shape {image.shape}, type {image.dtype})")
    if image.dtype.kind == "f":
        bad = np.argwhere(~np.isfinite(image))
        if len(bad):
            raise ShapeError(
                f"{name}: {len(bad)} voxels are not finite numbers, the first is {_at(bad)}"
            )
        if np.array_equal(image, np.round(image)) and np.abs(image).max() < 2**31:
            image = image.astype(np.int64)
            notes.append("whole numbers are taken as labels")
    elif image.dtype.kind == "b":
        image = image.astype(np.uint8)
    negative = np.argwhere(image < 0)
    if len(negative):
        raise ShapeError(
            f"{name}: {len(negative)} voxels are negative, the first is {_at(negative)}; labels "
            "are 0 (host), 1, 2, ..., fractions lie between 0 and 1"
        )
    if image.dtype.kind == "f" and image.max() > 1:
        raise ShapeError(
            f"{name}: grey values reach {image.max():g}; scale them to filled fractions from 0 to "
            "1, or give whole-numbered labels"
        )
    if not image.any():
        raise ShapeError(f"{name} is empty: every voxel is 0 (host)")
    return image, notes


def _materials(
    image: NDArray, materials: Mapping[int | str, str | None] | None, name: str
) -> dict[int, str]:
    """Material of each label that is not host, in the order of the labels."""
    found = [int(label) for label in np.unique(image) if label != 0]
    if materials is None and found == [1]:
        return {1: "gold"}
    given: dict[int, str | None] = {}
    for key, value in (materials or {}).items():
        try:
            label = int(key)
        except ValueError:
            raise ShapeError(f"materials: label {key!r} is not a whole number") from None
        if label <= 0:
            raise ShapeError(f"materials: label {label} cannot have a material; 0 is the host")
        given[label] = value
    missing = [label for label in found if label not in given]
    if missing:
        grey = (
            ". If these are grey values, scale them to fractions from 0 to 1"
            if len(found) > 8
            else ""
        )
        raise ShapeError(f"{name}: no material for {_list(missing)}; give materials for each{grey}")
    absent = [label for label in given if label not in found]
    if absent:
        raise ShapeError(f"{name} has no {_list(absent)}; it has {_list(found)}")
    wanted = {label: given[label] for label in found}
    solid = {label: value for label, value in wanted.items() if value is not None}
    if not solid:
        raise ShapeError(f"{name}: every label is host, so no particle is left")
    return solid


def _single(materials: Mapping[int | str, str | None] | None, name: str) -> str:
    if materials is None:
        return "gold"
    values = list(materials.values())
    if len(values) != 1 or not isinstance(values[0], str):
        raise ShapeError(
            f"{name} holds fractions of one material, but materials has {len(values)} entries; "
            'give one, for example {1: "gold"}'
        )
    return values[0]


def _voxel(voxel: float | ArrayLike) -> FloatArray:
    edges = np.atleast_1d(np.asarray(voxel, dtype=float))
    if edges.shape not in ((1,), (3,)) or not (np.isfinite(edges) & (edges > 0)).all():
        raise ShapeError(
            f"voxel = {voxel!r} must be one edge or three (x, y, z), greater than 0 (nm)"
        )
    return np.broadcast_to(edges, 3).copy()


def _refuse_absurd_size(image: NDArray, voxel: FloatArray, name: str) -> None:
    index = np.argwhere(image != 0)
    extent = (np.ptp(index, axis=0) + 1) * voxel
    if SMALLEST <= extent.max() <= LARGEST:
        return
    size = " x ".join(f"{edge:.3g}" for edge in extent)
    raise ShapeError(
        f"{name} is {size} nm in size, outside {SMALLEST} nm to {LARGEST:g} nm: voxel is the edge "
        "of one voxel in nm"
    )


def _touches_border(inside: NDArray[np.bool_]) -> str:
    sides = []
    for axis, letter in enumerate("xyz"):
        ends = np.moveaxis(inside, axis, 0)
        sides += [f"{letter} {side}" for side, n in (("low", 0), ("high", -1)) if ends[n].any()]
    return ", ".join(sides)


def _read(source: str | PathLike[str] | ArrayLike) -> tuple[NDArray, str]:
    if not isinstance(source, str | PathLike):
        return np.asarray(source), "image"
    path = Path(source)
    kind = path.suffix.lower()
    if kind not in (".npy", ".tif", ".tiff"):
        raise ShapeError(
            f"{path.name}: unknown kind of image {path.suffix!r}; known are .npy, .tif, .tiff"
        )
    if not path.is_file():
        raise ShapeError(f"no image file {path}")
    try:
        image = np.load(path, allow_pickle=False) if kind == ".npy" else _read_tiff(path)
    except (OSError, ValueError, EOFError, SyntaxError) as error:
        if isinstance(error, ShapeError):
            raise
        raise ShapeError(f"{path.name} cannot be read as {kind[1:].upper()}: {error}") from error
    return image, path.name


def _read_tiff(path: Path) -> NDArray:
    from PIL import Image, ImageSequence

    with Image.open(path) as stack:
        frames = [np.array(frame) for frame in ImageSequence.Iterator(stack)]
        told = str(stack.tag_v2.get(270, ""))  # type: ignore[attr-defined]  # image description
    shapes = {frame.shape for frame in frames}
    if len(shapes) != 1 or frames[0].ndim != 2:
        raise ShapeError(
            f"{path.name}: frames of shape {sorted(shapes)}; a stack has frames of one size with "
            "one number per pixel (no colours)"
        )
    if len(frames) == 1 and "images=" in told:
        raise ShapeError(
            f"{path.name} stores its frames in one block, which cannot be read; save it as .npy or "
            "as a TIFF with one directory per frame"
        )
    return np.stack(frames).transpose(2, 1, 0)  # frames, rows, columns are z, y, x


def _at(found: NDArray) -> str:
    return "(" + ", ".join(str(int(n)) for n in found[0]) + ")"


def _list(labels: list[int]) -> str:
    shown = ", ".join(map(str, labels[:8])) + (", ..." if len(labels) > 8 else "")
    return f"label{'s' if len(labels) > 1 else ''} {shown}"
