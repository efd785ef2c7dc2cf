"""How the pieces of a closed surface lie to each other: apart, inside, overlapping, inside out."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit, prange
from numpy.typing import NDArray

from .body import ShapeError
from .mesh_distance import crossing_below
from .mesh_fill import winding_numbers
from .mesh_repair import Surface, compact, count, pieces

SAMPLES = 96  # across the largest extent, to look for overlaps
FOLDED = 1e-3  # of the volume: more than this enclosed twice or inside out is refused
SHEET = 0.01  # nm: a piece thinner than this, far below an atom, has no volume
NEAR = 0.005  # of the largest extent: bodies this close are sampled one by one
MOST_PIECES = 4000


class Bodies(NamedTuple):
    """A closed surface sorted into layers; within a layer no two bodies overlap or touch."""

    vertices: NDArray  # (nv, 3) float64, nm
    faces: NDArray  # (nf, 3) int64, outward
    layer: NDArray  # (nf,) int64
    overlap: bool  # whether bodies share a volume
    notes: tuple[str, ...]


def outward_bodies(surface: Surface, name: str) -> Bodies:
    """Turn every piece of a closed surface outwards, and see which pieces overlap.

    A piece inside another one whose triangles face the other way is a cavity. A mesh with all
    triangles facing inwards is turned as a whole.

    Raises
    ------
    ShapeError
        If nothing has a volume, or a piece passes through itself by more than `FOLDED`.

    Examples
    --------
    >>> import numpy as np
    >>> corners = np.array([[0.0, 0, 0], [3, 0, 0], [0, 3, 0], [0, 0, 3]])
    >>> inward = np.array([[0, 1, 2], [0, 3, 1], [0, 2, 3], [1, 3, 2]])
    >>> outward_bodies(Surface(corners, inward, ()), "it").notes
    ('turned all triangles, which faced inwards',)
    """
    vertices, faces = surface.vertices, surface.faces
    notes = list(surface.notes)
    faces, label, volume = _with_volume(vertices, faces, name, notes)
    inside = _containment(vertices, faces, label, len(volume))
    faces, volume = _turn_outwards(faces, label, volume, inside, notes)
    body = _bodies(volume, inside)
    overlap = _overlap(vertices, faces, body[label], name, notes)
    layer = _layers(vertices, faces, body[label])
    if body.max() > 0:
        notes.append(f"{int(body.max()) + 1} bodies, one particle")
    return Bodies(*compact(vertices, faces), layer, overlap, tuple(notes))


def signed_volumes(vertices: NDArray, faces: NDArray, label: NDArray) -> NDArray:
    """Volume each labelled piece encloses, negative if its triangles face inwards, nm^3."""
    a, b, c = (vertices[faces[:, m]] for m in range(3))
    return np.bincount(label, np.einsum("ij,ij->i", a, np.cross(b, c)) / 6.0)


def _with_volume(
    vertices: NDArray, faces: NDArray, name: str, notes: list[str]
) -> tuple[NDArray, NDArray, NDArray]:
    """Leave out pieces that enclose nothing, such as a sheet with two sides."""
    centred = vertices - vertices.mean(axis=0)  # keeps rounding small far from the origin
    number, label = pieces(faces)
    if number > MOST_PIECES:
        raise ShapeError(
            f"{name} falls into {number} separate pieces, more than {MOST_PIECES}: it is dust, or "
            "its triangles do not share corners; export it as a closed solid"
        )
    volume = signed_volumes(centred, faces, label)
    a, b, c = (centred[faces[:, m]] for m in range(3))
    area = np.bincount(label, np.linalg.norm(np.cross(b - a, c - a), axis=1) / 2)
    flat = np.abs(volume) <= SHEET / 2 * area
    if flat.all():
        raise ShapeError(
            f"{name} has zero volume ({np.abs(volume).sum():.2g} nm^3 inside a surface of "
            f"{area.sum():.3g} nm^2): it is a sheet, or as much of it is turned inside out as not"
        )
    if flat.any():
        notes.append(f"left out {count(int(flat.sum()), 'piece')} without a volume")
        faces = faces[~flat[label]]
        _, label = np.unique(label[~flat[label]], return_inverse=True)
        volume = volume[~flat]
    return faces, label.reshape(-1), volume


def _containment(vertices: NDArray, faces: NDArray, label: NDArray, number: int) -> NDArray:
    """(number, number) bool: piece i lies inside piece j (most of three of its corners do)."""
    if number == 1:
        return np.zeros((1, 1), bool)
    order = np.argsort(label, kind="stable")
    ends = np.cumsum(np.bincount(label, minlength=number))
    begins = ends - np.bincount(label, minlength=number)
    picks = np.stack([order[begins], order[(begins + ends) // 2], order[ends - 1]], axis=1)
    probes = vertices[faces[picks]].mean(axis=2)
    windings = _windings_by_piece(vertices[faces], label, probes.reshape(-1, 3), number)
    inside = (windings.reshape(number, 3, number) != 0).sum(axis=1) >= 2
    np.fill_diagonal(inside, False)
    return inside


@njit(parallel=True, cache=True)
def _windings_by_piece(triangles, label, points, number):
    out = np.zeros((points.shape[0], number), np.int16)
    for p in prange(points.shape[0]):
        x, y, z = points[p]
        for t in range(label.size):
            out[p, label[t]] += crossing_below(triangles[t], x, y, z)
    return out


def _turn_outwards(
    faces: NDArray, label: NDArray, volume: NDArray, inside: NDArray, notes: list[str]
) -> tuple[NDArray, NDArray]:
    outermost = ~inside.any(axis=1)
    wrong = outermost & (volume < 0)
    # what lies inside a piece that is turned keeps its relation to it
    turn = wrong | inside[:, wrong].any(axis=1)
    if turn.any():
        faces = faces.copy()
        chosen = turn[label]
        faces[chosen] = faces[chosen][:, ::-1]
        volume = np.where(turn, -volume, volume)
        what = "all triangles" if chosen.all() else count(int(chosen.sum()), "triangle")
        notes.append(f"turned {what}, which faced inwards")
    cavities = int((volume < 0).sum())
    if cavities:
        notes.append(f"{cavities} cavity" if cavities == 1 else f"{cavities} cavities")
    nested = int(((volume > 0) & (inside & (volume > 0)).any(axis=1)).sum())
    if nested and not cavities:
        notes.append(
            f"{count(nested, 'piece')} inside another with the same sense of outside: "
            "taken as solid, not as a cavity"
        )
    return faces, volume


def _bodies(volume: NDArray, inside: NDArray) -> NDArray:
    """Number of the body each piece belongs to: a solid piece with the cavities in it."""
    depth = inside.sum(axis=1)
    body = np.full(len(volume), -1)
    body[volume > 0] = np.arange(int((volume > 0).sum()))
    for piece in np.flatnonzero(volume < 0):
        around = np.flatnonzero(inside[piece] & (volume > 0))
        body[piece] = body[around[np.argmax(depth[around])]] if len(around) else 0
    return body


def _overlap(vertices: NDArray, faces: NDArray, body: NDArray, name: str, notes: list[str]) -> bool:
    """Whether bodies overlap each other; a body that overlaps itself is refused."""
    folded, twice, _, _ = _multiplicities(vertices, faces)
    if folded == 0 and twice == 0:
        return False
    for number in range(int(body.max()) + 1):
        own = faces[body == number]
        folded, again, solid, where = _multiplicities(vertices, own)
        if folded + again > FOLDED * solid:
            share = 100 * (folded + again) / solid
            place = ", ".join(f"{value:.4g}" for value in where)
            raise ShapeError(
                f"{name}: the surface passes through itself: {share:.2g} % of the volume, around "
                f"({place}) nm, is enclosed twice or inside out; unite the overlapping parts in "
                "the program that made the mesh"
            )
        if folded + again:
            shared = f"{folded + again:.2g} nm^3"
            notes.append(f"the surface passes through itself ({shared}, neglected)")
    if body.max() == 0:
        return False
    notes.append(f"bodies overlap: what they share ({twice:.3g} nm^3, measured) is counted once")
    return True


def _layers(vertices: NDArray, faces: NDArray, body: NDArray) -> NDArray:
    """Layer of each triangle, such that bodies that may touch are in different layers.

    In one layer the surface between two touching bodies would be taken for an outer surface.
    """
    reach = NEAR * float(np.ptp(vertices[faces], axis=(0, 1)).max())
    layers: list[list[tuple[NDArray, NDArray]]] = []
    chosen = np.empty(int(body.max()) + 1, np.int64)
    for number in range(len(chosen)):
        own = vertices[faces[body == number]]
        box = own.min(axis=(0, 1)) - reach, own.max(axis=(0, 1)) + reach
        free = (n for n, boxes in enumerate(layers) if not any(_touch(box, b) for b in boxes))
        index = next(free, len(layers))
        if index == len(layers):
            layers.append([])
        layers[index].append(box)
        chosen[number] = index
    return chosen[body]


def _touch(one: tuple[NDArray, NDArray], other: tuple[NDArray, NDArray]) -> bool:
    return bool(np.all(one[0] <= other[1]) and np.all(other[0] <= one[1]))


def _multiplicities(vertices: NDArray, faces: NDArray) -> tuple[float, float, float, NDArray]:
    """Volumes enclosed inside out, more than once, and at all, nm^3; where the first two are."""
    used = vertices[faces]
    low, high = used.min(axis=(0, 1)), used.max(axis=(0, 1))
    step = (high - low).max() / SAMPLES
    origin = low + np.array([0.318, 0.427, 0.591]) * step  # off the planes that CAD parts love
    shape = tuple(int(n) for n in np.floor((high - origin) / step) + 1)
    winding = winding_numbers((used - origin) / step, shape)
    bad = np.argwhere((winding < 0) | (winding > 1))
    cell = step**3
    where = origin + step * bad.mean(axis=0) if len(bad) else origin
    folded, twice = int((winding < 0).sum()), int((winding > 1).sum())
    return folded * cell, twice * cell, int((winding != 0).sum()) * cell, where
