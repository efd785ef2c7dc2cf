"""Points on a particle's surface, or at a height over it, with the area each stands for."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from scipy.spatial import cKDTree

from shapes import Particle
from shapes.body import SampleGrid
from shapes.measure import occupied

from ..errors import InputError
from .outer_distance import outer_distance

# More samples than this would take gigabytes.
_MOST_SAMPLES = 200_000_000


@dataclass(frozen=True, eq=False)
class SurfacePoints:
    """A surface in pieces.

    Attributes
    ----------
    points : ndarray, shape (n, 3)
        nm.
    normals : ndarray, shape (n, 3)
        Unit vectors out of the particle.
    areas : ndarray, shape (n,)
        nm^2 of the surface at the height; they add up to its area.
    height : float
        Over the particle's surface, nm.
    step : float
        About the distance between neighbours, nm.
    corners : ndarray, shape (n, 4, 3)
        Of the quadrilateral around each point, nm, for pictures.
    """

    points: np.ndarray
    normals: np.ndarray
    areas: np.ndarray
    height: float
    step: float
    corners: np.ndarray = field(repr=False)


def cover_surface(particle: Particle, step: float, height: float = 0.0) -> SurfacePoints:
    """Cover the surface that lies `height` outside the particle.

    Parameters
    ----------
    particle : shapes.Particle
    step : float
        Edge of the pieces, nm; the cells' spacing suits.
    height : float
        nm, zero or more.

    Returns
    -------
    SurfacePoints

    Raises
    ------
    InputError
        If the step or the height makes no sense.

    Notes
    -----
    The filled fraction is sampled on a lattice of the step; each lattice cube that the surface
    cuts gets a vertex at the mean of its edges' crossings, each cut edge a quadrilateral of the
    vertices around it (surface nets; Gibson 1998). Where the bodies know their distance the
    vertices are moved onto the surface exactly. Pieces that would lie closer than nine tenths
    of the height to another part of the surface, in narrow gaps and notches, are left out: there
    is no room for them.

    Examples
    --------
    >>> import shapes
    >>> shell = cover_surface(shapes.sphere(diameter=20), step=1.0, height=2.0)
    >>> round(float(shell.areas.sum()) / (4 * np.pi * 12**2), 2)
    1.0
    """
    if not (np.isfinite(step) and step > 0):
        raise InputError(f"step = {step} must be a length greater than 0 (nm)")
    if not (np.isfinite(height) and height >= 0):
        raise InputError(f"height = {height} must be a length of 0 or more (nm)")
    vertices, quads = _surface_net(particle, step)
    vertices = _onto_surface(particle, vertices, step)
    area = _area_vectors(vertices, quads)
    normal_at = _vertex_normals(vertices, quads, area)
    risen = vertices + height * normal_at
    middle = risen[quads].mean(axis=1)
    normals = area / np.maximum(np.linalg.norm(area, axis=1, keepdims=True), 1e-300)
    areas = np.einsum("nc,nc->n", _area_vectors(risen, quads), normals)
    middle = _at_height(particle, middle, normals, height, step)
    kept = areas > 0
    if height > 0:
        kept &= _clearance(particle, middle, vertices) >= 0.9 * height
    return SurfacePoints(
        middle[kept],
        normals[kept],
        areas[kept],
        float(height),
        float(step),
        risen[quads[kept]],
    )


def _surface_net(particle: Particle, step: float) -> tuple[np.ndarray, np.ndarray]:
    """Vertices (v, 3) and quadrilaterals (q, 4), turned so that their normals point outwards."""
    low, high = particle.bounds
    shape = np.ceil((high - low) / step).astype(int) + 5
    if np.prod(shape.astype(float)) > _MOST_SAMPLES:
        raise InputError(
            f"a surface of {step:.3g} nm steps on a particle of {np.max(high - low):.4g} nm is too "
            "fine to sample; use larger steps"
        )
    origin = (low + high) / 2 - step * (shape - 1) / 2
    inside = occupied(particle, SampleGrid(origin, step, tuple(shape))).astype(float) - 0.5
    inside[inside == 0] = 1e-9  # a sample exactly on the surface counts as inside
    full = inside > 0
    corner = np.array([[i, j, k] for i in (0, 1) for j in (0, 1) for k in (0, 1)])
    cubes = tuple(n - 1 for n in shape)
    count = np.zeros(cubes, int)
    for c in corner:
        count += full[tuple(slice(a, a + n) for a, n in zip(c, cubes, strict=True))]
    cut = np.argwhere((count > 0) & (count < 8))
    number = np.full(cubes, -1, np.int64)
    number[tuple(cut.T)] = np.arange(len(cut))
    total, hits = np.zeros((len(cut), 3)), np.zeros(len(cut))
    for c in corner:
        for axis in range(3):
            if c[axis]:
                continue
            other = c.copy()
            other[axis] = 1
            a, b = inside[tuple((cut + c).T)], inside[tuple((cut + other).T)]
            crossed = (a > 0) != (b > 0)
            place = np.broadcast_to(c, cut.shape).astype(float).copy()
            place[:, axis] = np.where(crossed, a / np.where(crossed, a - b, 1), 0)
            total += place * crossed[:, None]
            hits += crossed
    vertices = origin + step * (cut + total / hits[:, None])
    return vertices, np.concatenate([_quads(full, number, axis) for axis in range(3)])


def _quads(full: np.ndarray, number: np.ndarray, axis: int) -> np.ndarray:
    """Quadrilaterals of the lattice edges along `axis` that the surface cuts."""
    here = [slice(None)] * 3
    there = [slice(None)] * 3
    here[axis], there[axis] = slice(0, -1), slice(1, None)
    before, after = full[tuple(here)], full[tuple(there)]
    edges = np.argwhere(before != after)
    outwards = before[tuple(edges.T)]
    u, v = (axis + 1) % 3, (axis + 2) % 3
    around = []
    for du, dv in ((-1, -1), (0, -1), (0, 0), (-1, 0)):
        cube = edges.copy()
        cube[:, u] += du
        cube[:, v] += dv
        around.append(number[tuple(cube.T)])
    quads = np.stack(around, axis=1)
    return np.where(outwards[:, None], quads, quads[:, ::-1])


def _area_vectors(vertices: np.ndarray, quads: np.ndarray) -> np.ndarray:
    a, b, c, d = (vertices[quads[:, i]] for i in range(4))
    return 0.5 * np.cross(c - a, d - b)


def _vertex_normals(vertices: np.ndarray, quads: np.ndarray, area: np.ndarray) -> np.ndarray:
    total = np.zeros_like(vertices)
    for i in range(4):
        np.add.at(total, quads[:, i], area)
    return total / np.maximum(np.linalg.norm(total, axis=1, keepdims=True), 1e-300)


def _onto_surface(particle: Particle, points: np.ndarray, step: float) -> np.ndarray:
    """Points moved along the slope of the distance until it vanishes."""
    for _ in range(3):
        distance = outer_distance(particle, points)
        if distance is None:
            return points
        move = np.clip(distance, -0.5 * step, 0.5 * step)
        points = points - move[:, None] * _slope(particle, points, 0.05 * step)
    return points


def _at_height(particle, points, normals, height, step) -> np.ndarray:
    """Middles of the pieces moved to the height exactly, as chords sag below curved surfaces."""
    distance = outer_distance(particle, points)
    if distance is None:
        return points
    sag = np.clip(height + distance, -0.3 * step, 0.3 * step)
    return points + sag[:, None] * normals


def _slope(particle: Particle, points: np.ndarray, h: float) -> np.ndarray:
    slope = np.empty_like(points)
    for axis in range(3):
        shift = np.zeros(3)
        shift[axis] = h
        above, below = (outer_distance(particle, points + s * shift) for s in (1, -1))
        assert above is not None
        assert below is not None
        slope[:, axis] = (above - below) / (2 * h)
    return slope / np.maximum(np.linalg.norm(slope, axis=1, keepdims=True), 1e-12)


def _clearance(particle: Particle, points: np.ndarray, surface: np.ndarray) -> np.ndarray:
    """Distance of points from the whole surface, negative inside."""
    distance = outer_distance(particle, points)
    if distance is not None:
        return -distance
    return cKDTree(surface).query(points)[0]
