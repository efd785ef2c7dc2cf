"""Particles from voxel images: labels, as electron tomography gives, or filled fractions."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from os import PathLike
from pathlib import Path

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .body import FloatArray, Part, Particle, ShapeError
from .image_body import LabelledBody, VoxelBody
from .image_field import distance_field, matched_volume

SMOOTH = 1.0  # voxels
LEAST_SMOOTH = 0.7  # voxels: a narrower Gaussian is not resolved by the voxels
SMALLEST, LARGEST = 0.5, 1e5  # nm


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


def _from_labels(
    image: NDArray,
    voxel: FloatArray,
    materials: dict[int, str],
    smooth: float,
    notes: list[str],
    name: str,
) -> Particle:
    image = np.where(np.isin(image, list(materials)), image, 0)
    image, offset = _cropped(image, voxel, margin=int(np.ceil(5 * smooth)) + 2)
    labels = list(materials)
    whole, fields, thin = _fields(image, labels, voxel, smooth)
    if thin:
        notes.append(
            f"{thin} voxels lie in features too thin for a smoothing of {smooth:g} voxels: "
            "kept, but their thickness is uncertain"
        )
    volumes = [float((image == label).sum() * voxel.prod()) for label in labels]
    is_distance = smooth > 0
    all_of_it = VoxelBody(whole, voxel, offset, sum(volumes), is_distance)
    low, high = all_of_it.bounds
    size = " x ".join(f"{edge:.4g}" for edge in high - low)
    all_of_it = replace(all_of_it, notes=(f"size {size} nm", *notes))
    names = list(materials.values())
    if len(labels) == 1:
        return Particle((Part(all_of_it, names[0]),), name=name)
    members = tuple(
        VoxelBody(values, voxel, offset, volume, is_distance)
        for values, volume in zip(fields, volumes, strict=True)
    )
    parts = [
        Part(LabelledBody(all_of_it, members, rank), material)
        for rank, material in enumerate(names)
    ]
    return Particle(tuple(parts), name=name, outline=all_of_it)


def _cropped(image: NDArray, voxel: FloatArray, margin: int) -> tuple[NDArray, FloatArray]:
    """The box of voxels that are not host with an empty margin, and where its first voxel is."""
    index = np.argwhere(image != 0)
    low, high = index.min(axis=0), index.max(axis=0) + 1
    crop = image[tuple(slice(a, b) for a, b in zip(low, high, strict=True))]
    offset = voxel * (low - margin - (np.array(image.shape) - 1) / 2)
    return np.pad(crop, margin), offset


def _fields(
    image: NDArray, labels: list[int], voxel: FloatArray, smooth: float
) -> tuple[NDArray, list[NDArray], int]:
    """Values for all labels together and for each, and the number of voxels in thin features."""
    if smooth == 0:
        fractions = [(image == label).astype(np.float32) for label in labels]
        return (image != 0).astype(np.float32), fractions, 0
    whole, thin = distance_field(image != 0, voxel, smooth)
    volume = float((image != 0).sum() * voxel.prod())
    whole += np.float32(matched_volume(whole, voxel, volume))
    if len(labels) == 1:
        return whole, [whole], thin
    found = [distance_field(image == label, voxel, smooth) for label in labels]
    fields = []
    for n, (own, _) in enumerate(found):
        # halfway to the strongest rival, and no further out than the whole
        rival = np.max([other for m, (other, _) in enumerate(found) if m != n], axis=0)
        fields.append(np.minimum(whole, (own - rival) / 2))
    return whole, fields, thin + sum(lost for _, lost in found)


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
