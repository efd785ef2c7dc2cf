"""From a soup of triangles to a closed, outward-oriented surface, or a reason why it is none.

The steps: weld corners, drop degenerate and doubled triangles, turn triangles to agree with their
neighbours, close small holes, turn pieces outwards (a piece inside another may be a cavity).
Each step says what it did. `shapes.mesh_pieces` then looks at how the pieces lie to each other.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit
from numpy.typing import NDArray
from scipy.sparse import coo_matrix
from scipy.sparse.csgraph import connected_components
from scipy.spatial import cKDTree
from scipy.spatial.distance import pdist

from .body import ShapeError

WELD = 1e-5  # of the largest extent: corners closer than this are one, if that closes the surface
SMALL_HOLE = 0.2  # of the largest extent: a larger hole is not guessed at


class Surface(NamedTuple):
    """Triangles and what has been done to them."""

    vertices: NDArray  # (nv, 3) float64, nm
    faces: NDArray  # (nf, 3) int64
    notes: tuple[str, ...]


def closed_surface(vertices: NDArray, faces: NDArray, name: str) -> Surface:
    """Repair a triangle mesh until every edge joins triangles that agree on what is outside.

    Parameters
    ----------
    vertices : (nv, 3) float64
        Corners, nm, all finite.
    faces : (nf, 3) int
        Corner numbers of each triangle.
    name : str
        What to call the mesh in messages.

    Raises
    ------
    ShapeError
        If holes too large to close remain, or edges where the surface branches.

    Examples
    --------
    The last triangle of a tetrahedron is turned the wrong way, and then missing:

    >>> corners = np.array([[0.0, 0, 0], [3, 0, 0], [0, 3, 0], [0, 0, 3]])
    >>> faces = np.array([[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 3, 2]])
    >>> closed_surface(corners, faces, "it").notes
    ('turned 1 of 4 triangles to agree with their neighbours',)
    >>> closed_surface(corners, faces[:3], "it").notes
    ('closed 1 hole (the largest 4.24 nm across)',)
    """
    notes: list[str] = []
    size = float(np.ptp(vertices, axis=0).max())
    vertices, faces = _weld_equal(vertices, faces)
    faces = _drop_degenerate(faces, notes)
    faces = _drop_doubled(faces, notes)
    if _open_edges(faces).size:
        faces = _drop_flat(vertices, faces, size, notes)
        vertices, faces = _weld_close(vertices, faces, size, notes)
        faces = _drop_stray(faces, notes)
    if len(faces) == 0:
        raise ShapeError(f"{name} has no triangle with an area: zero volume")
    faces = _agree(vertices, faces, name, notes)
    vertices, faces = _close_holes(vertices, faces, size, name, notes)
    vertices, faces = compact(vertices, faces)
    return Surface(vertices, faces, tuple(notes))


def pieces(faces: NDArray) -> tuple[int, NDArray]:
    """Number of connected pieces of a consistent closed surface, and the piece of each triangle."""
    label, _, _ = _orient(len(faces), _neighbours(faces))
    _, label = np.unique(label, return_inverse=True)
    return int(label.max()) + 1, label


def count(number: int, what: str) -> str:
    """Number and noun: "1 hole", "2 holes"."""
    return f"{number} {what}" if number == 1 else f"{number} {what}s"


def _weld_equal(vertices: NDArray, faces: NDArray) -> tuple[NDArray, NDArray]:
    """Merge corners at the very same place: formats such as STL repeat them for each triangle."""
    vertices, number = np.unique(vertices + 0.0, axis=0, return_inverse=True)  # -0 becomes 0
    return vertices, number.reshape(-1)[faces]


def _weld_close(
    vertices: NDArray, faces: NDArray, size: float, notes: list[str]
) -> tuple[NDArray, NDArray]:
    """Merge corners a rounding error apart, if that leaves fewer open edges."""
    used = np.unique(faces)
    pairs = cKDTree(vertices[used]).query_pairs(WELD * size, output_type="ndarray")
    if len(pairs) == 0:
        return vertices, faces
    graph = coo_matrix((np.ones(len(pairs)), used[pairs].T), shape=(len(vertices),) * 2)
    _, label = connected_components(graph, directed=False)
    welded = label[faces]
    scratch: list[str] = []
    welded = _drop_doubled(_drop_degenerate(welded, scratch), scratch)
    before, after = _open_edges(faces).size, _open_edges(welded).size
    if after >= before:
        return vertices, faces
    places = np.empty((label.max() + 1, 3))
    places[label] = vertices
    merged = len(used) - len(np.unique(label[used]))
    notes.append(f"welded {count(merged, 'corner')} closer than {WELD * size:.2g} nm to another")
    return places, welded


def _drop_degenerate(faces: NDArray, notes: list[str]) -> NDArray:
    a, b, c = faces.T
    good = (a != b) & (b != c) & (c != a)
    if not good.all():
        notes.append(f"removed {count(int((~good).sum()), 'degenerate triangle')}")
    return faces[good]


def _drop_flat(vertices: NDArray, faces: NDArray, size: float, notes: list[str]) -> NDArray:
    """Drop triangles without an area at open edges; elsewhere they do no harm and close cracks."""
    flat = np.linalg.norm(_double_areas(vertices, faces), axis=1) < 1e-12 * size**2
    if not flat.any():
        return faces
    _, edge, uses = _edges(faces)
    loose = (uses[edge] % 2 == 1).reshape(-1, 3).any(axis=1)
    bad = flat & loose
    if not bad.any() or _open_edges(faces[~bad]).size > _open_edges(faces).size:
        return faces
    notes.append(f"removed {count(int(bad.sum()), 'degenerate triangle')} without an area")
    return faces[~bad]


def _drop_doubled(faces: NDArray, notes: list[str]) -> NDArray:
    """Keep one of each set of equal triangles, or none where the rest is closed without it.

    Two bodies that share a wall have it twice and closed neighbours on both sides: it goes.
    """
    _, first, copies = np.unique(
        np.sort(faces, axis=1), axis=0, return_index=True, return_counts=True
    )
    if (copies == 1).all():
        return faces
    order = np.argsort(first)
    faces, copies = faces[first[order]], copies[order]
    wall = _walls(faces, copies > 1)
    doubled = int((copies - 1)[~wall].sum())
    if doubled:
        notes.append(f"removed {count(doubled, 'duplicate triangle')}")
    if wall.any():
        inner = int(wall.sum())
        notes.append(f"removed {count(inner, 'inner wall triangle')} between touching bodies")
    return faces[~wall]


def _walls(faces: NDArray, doubled: NDArray) -> NDArray:
    """Which doubled triangles, patch by patch, leave fewer open edges when they are left out."""
    _, edge, uses = _edges(faces)
    edge = edge.reshape(-1, 3)
    own = np.flatnonzero(doubled)
    links = coo_matrix(
        (np.ones(3 * len(own)), (np.repeat(own, 3), edge[own].ravel())),
        shape=(len(faces), len(uses)),
    ).tocsr()
    _, patch = connected_components(links @ links.T, directed=False)
    wall = np.zeros(len(faces), bool)
    for label in np.unique(patch[own]):
        members = own[patch[own] == label]
        touched, times = np.unique(edge[members], return_counts=True)
        flipped = touched[times % 2 == 1]
        wall[members] = (uses[flipped] % 2 == 1).sum() > len(flipped) / 2
    return wall


def _drop_stray(faces: NDArray, notes: list[str]) -> NDArray:
    """Drop triangles that share no edge with another."""
    _, edge, uses = _edges(faces)
    stray = (uses[edge] == 1).reshape(-1, 3).all(axis=1)
    if not stray.any() or stray.all():
        return faces
    notes.append(f"removed {count(int(stray.sum()), 'stray triangle')}")
    return faces[~stray]


def _agree(vertices: NDArray, faces: NDArray, name: str, notes: list[str]) -> NDArray:
    """Turn triangles so that neighbours run through their common edge in opposite directions."""
    pairs = _neighbours(faces)
    label, odd, conflict = _orient(len(faces), pairs)
    if conflict >= 0:
        where = _place(vertices[faces[pairs[conflict, 0]]].mean(axis=0))
        raise ShapeError(
            f"{name}: inside and outside cannot be told apart, the surface is one-sided or "
            f"branches near {where} nm; export it as a closed solid"
        )
    # the turn that changes less area wins, piece by piece
    area = np.linalg.norm(_double_areas(vertices, faces), axis=1)
    total = np.bincount(label, area, len(faces))
    turned = np.bincount(label, area * odd, len(faces))
    odd = odd ^ (turned > total / 2)[label]
    if odd.any():
        faces = faces.copy()
        faces[odd] = faces[odd][:, ::-1]
        notes.append(
            f"turned {int(odd.sum())} of {count(len(faces), 'triangle')} "
            "to agree with their neighbours"
        )
    _refuse_branches(vertices, faces, name)
    return faces


def _refuse_branches(vertices: NDArray, faces: NDArray, name: str) -> None:
    """Every edge but an open one must be run through as often one way as the other."""
    half, edge, uses = _edges(faces)
    balance = np.bincount(edge, np.where(half[:, 0] < half[:, 1], 1, -1))
    bad = (uses > 1) & (balance != 0)
    if not bad.any():
        return
    first = half[np.flatnonzero(bad[edge])[0]]
    raise ShapeError(
        f"{name}: the surface branches at {count(int(bad.sum()), 'edge')} shared by three or more "
        f"triangles, the first near {_place(vertices[first].mean(axis=0))} nm, so it bounds no "
        "solid; remove the extra sheet and export again"
    )


def _close_holes(
    vertices: NDArray, faces: NDArray, size: float, name: str, notes: list[str]
) -> tuple[NDArray, NDArray]:
    loops = _hole_loops(faces)
    if not loops:
        return vertices, faces
    wide = np.array([_width(vertices[loop]) for loop in loops])
    small = [len(q) == 3 or w <= SMALL_HOLE * size for q, w in zip(loops, wide, strict=True)]
    if not all(small):
        edges = sum(len(loop) for loop in loops)
        worst = int(np.argmax(np.where(small, -1.0, wide)))
        centre = vertices[loops[worst]].mean(axis=0)
        raise ShapeError(
            f"{name} is not closed: {count(edges, 'open edge')} around "
            f"{count(len(loops), 'hole')}; the largest ({wide[worst]:.3g} nm across) has its "
            f"centre at {_place(centre)} nm. Holes up to {SMALL_HOLE * size:.3g} nm are closed "
            "unasked, larger ones must be closed in the program that made the mesh"
        )
    added_faces, added_vertices = [faces], [vertices]
    number = len(vertices)
    for loop in loops:
        following = np.roll(loop, -1)
        if len(loop) == 3:
            added_faces.append(loop[None, ::-1])
            continue
        added_vertices.append(vertices[loop].mean(axis=0, keepdims=True))
        added_faces.append(np.stack([following, loop, np.full(len(loop), number)], axis=1))
        number += 1
    notes.append(f"closed {count(len(loops), 'hole')} (the largest {wide.max():.3g} nm across)")
    return np.concatenate(added_vertices), np.concatenate(added_faces)


def _hole_loops(faces: NDArray) -> list[NDArray]:
    """Rims of the holes as closed runs of corners, in the direction of their triangles."""
    half, edge, uses = _edges(faces)
    rim = half[uses[edge] == 1]
    leaving: dict[int, list[int]] = {}
    for a, b in rim.tolist():
        leaving.setdefault(a, []).append(b)
    loops = []
    for start in list(leaving):
        while leaving[start]:
            path, seen = [start], {start: 0}
            while path:
                onward = leaving[path[-1]].pop()
                if onward in seen:  # a rim that meets itself is two holes that share a corner
                    at = seen[onward]
                    loops.append(np.array(path[at:]))
                    for corner in path[at + 1 :]:
                        del seen[corner]
                    path = path[: at + 1]
                    if at == 0:
                        break
                else:
                    seen[onward] = len(path)
                    path.append(onward)
    return loops


def _neighbours(faces: NDArray) -> NDArray:
    """Pairs of triangles at a common edge, (m, 3): two triangles and whether they disagree.

    Where two solids touch along an edge four triangles meet: those that agree are paired, so the
    file's own orientation is trusted there.
    """
    half, edge, uses = _edges(faces)
    order = np.argsort(edge, kind="stable")
    forward = half[:, 0] < half[:, 1]
    starts = np.concatenate([[0], np.cumsum(uses)])[:-1]
    two = starts[uses == 2]
    i, j = order[two], order[two + 1]
    pairs = [np.stack([i // 3, j // 3, forward[i] == forward[j]], axis=1)]
    for begin, number in zip(starts[uses > 2], uses[uses > 2], strict=True):
        here = order[begin : begin + number]
        up, down = here[forward[here]], here[~forward[here]]
        if len(up) == len(down):
            pairs.append(np.stack([up // 3, down // 3, np.zeros(len(up), int)], axis=1))
    return np.concatenate(pairs)


@njit(cache=True)
def _orient(number, pairs):
    """Label of the piece of each triangle, whether to turn it, and the first pair that conflicts.

    Union-find where each triangle carries its turn relative to its parent.
    """
    parent = np.arange(number)
    turn = np.zeros(number, np.bool_)
    conflict = -1
    for n in range(pairs.shape[0]):
        root_i, turn_i = _root(parent, turn, pairs[n, 0])
        root_j, turn_j = _root(parent, turn, pairs[n, 1])
        differ = pairs[n, 2] == 1
        if root_i != root_j:
            parent[root_j] = root_i
            turn[root_j] = turn_i ^ turn_j ^ differ
        elif (turn_i ^ turn_j) != differ and conflict < 0:
            conflict = n
    label = np.empty(number, np.int64)
    odd = np.empty(number, np.bool_)
    for n in range(number):
        label[n], odd[n] = _root(parent, turn, n)
    return label, odd, conflict


@njit(cache=True)
def _root(parent, turn, n):
    """Root of n and the turn of n relative to it; the path is shortened on the way."""
    root = n
    total = False
    while parent[root] != root:
        total ^= turn[root]
        root = parent[root]
    rest = total
    while n != root:
        above, own = parent[n], turn[n]
        parent[n], turn[n] = root, rest
        rest ^= own
        n = above
    return root, total


def _edges(faces: NDArray) -> tuple[NDArray, NDArray, NDArray]:
    """Half-edges (3 nf, 2), the edge each belongs to (3 nf,), and how often each edge is used."""
    half = faces[:, [0, 1, 1, 2, 2, 0]].reshape(-1, 2)
    key = half.min(axis=1) * (int(faces.max(initial=0)) + 1) + half.max(axis=1)
    _, edge, uses = np.unique(key, return_inverse=True, return_counts=True)
    return half, edge.reshape(-1), uses


def _open_edges(faces: NDArray) -> NDArray:
    """Edges used an odd number of times."""
    return np.flatnonzero(_edges(faces)[2] % 2 == 1)


def _double_areas(vertices: NDArray, faces: NDArray) -> NDArray:
    """Vectors along the normals, twice the area long, (nf, 3) nm^2."""
    a, b, c = (vertices[faces[:, m]] for m in range(3))
    return np.cross(b - a, c - a)


def _width(points: NDArray) -> float:
    """Largest distance between points; for very many the diagonal of their box, which is larger."""
    if len(points) > 2000:
        return float(np.linalg.norm(np.ptp(points, axis=0)))
    return float(pdist(points).max())


def compact(vertices: NDArray, faces: NDArray) -> tuple[NDArray, NDArray]:
    """Without the corners that no triangle uses."""
    used, faces = np.unique(faces, return_inverse=True)
    return vertices[used], faces.reshape(-1, 3)


def _place(point: NDArray) -> str:
    return "(" + ", ".join(f"{value:.4g}" for value in point) + ")"
