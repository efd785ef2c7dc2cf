"""Symmetries of a system's cells, and the parity sectors they split its fields into.

A cubic lattice can have 48 symmetries: the matrices that exchange axes and change their signs. The
sign changes among them commute, so every field is a sum of fields that each of them keeps up to a
sign. Such a parity sector is solved by itself: on a part of the cells where mirrors make the
sectors, and otherwise (half turns, inversion) on all cells but for a vector of every sector at
once.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass, field

import numpy as np
from numba import njit

from ..lattice.linear_system import System
from ..lattice.sectors import Sector, sectors

# Voxelization makes mirror images equal to the last bits, but cells after an exchange of axes only
# to a per cent or so of a surface cell's tensor (the signs of these deviations alternate).
MIRROR_TOLERANCE = 1e-6
EXCHANGE_TOLERANCE = 0.05


@dataclass(frozen=True, eq=False)
class Sectors:
    """The parity sectors of a system.

    Attributes
    ----------
    group : ndarray of int, shape (h, 3, 3)
        All symmetries of the cells about their centre, the identity first.
    flips : ndarray of int, shape (f, 3)
        The sign changes among them: mirrors, half turns, inversion; the identity first.
    characters : ndarray of int, shape (f, f)
        Sign of the fields of sector s (row) under sign change g (column).
    centre : ndarray, shape (3,)
        Centre of the box of cells, nm.
    cells : ndarray of int, shape (c,)
        One cell of every set of images.
    images : ndarray of int, shape (f, c)
        The cell that each sign change takes it to.
    scale : ndarray, shape (c, 1)
        Square root of the number of different cells in its set. Vectors of a sector are fields on
        `cells` times this, so that their products are those of the fields on all cells.
    mirrored : tuple of dda.lattice.sectors.Sector
        The operators of the sectors if mirrors make all of them, else empty.
    """

    group: np.ndarray
    flips: np.ndarray
    characters: np.ndarray
    centre: np.ndarray
    cells: np.ndarray = field(repr=False)
    images: np.ndarray = field(repr=False)
    scale: np.ndarray = field(repr=False)
    mirrored: tuple[Sector, ...] = field(repr=False)

    @property
    def count(self) -> int:
        """Number of sectors."""
        return len(self.flips)

    def spread(self, parts: np.ndarray, sectors: np.ndarray, out: np.ndarray) -> np.ndarray:
        """Field on all cells from vectors of different sectors.

        Parameters
        ----------
        parts : ndarray, shape (s, c, 3)
        sectors : ndarray of int, shape (s,)
        out : ndarray, shape (n, 3)
        """
        signs = self.characters[sectors].astype(float)
        _spread(parts / self.scale, signs, self.flips.astype(float), self.images, out)
        return out

    def gather(self, whole: np.ndarray, sectors: np.ndarray, out: np.ndarray) -> np.ndarray:
        """Vectors of the sectors in a field (n, 3), to `out` (s, c, 3)."""
        signs = self.characters[sectors].astype(float)
        _gather(whole, signs, self.flips.astype(float), self.images, out)
        out *= self.scale
        return out


def find_sectors(system: System, use: bool = True) -> Sectors:
    """Find the symmetries of a system and set up its sectors.

    Parameters
    ----------
    system : System
    use : bool
        False: take the particle as if it had no symmetry.

    Returns
    -------
    Sectors

    Examples
    --------
    >>> import dda, shapes
    >>> cells = shapes.voxelize(shapes.cube(edge=20, rounding=2, material="gold"), cells=6)
    >>> sectors = find_sectors(dda.system(cells, wavelength=560))
    >>> len(sectors.group), sectors.count
    (48, 8)
    """
    low, high = system.index.min(axis=0), system.index.max(axis=0)
    row = np.full(high - low + 1, -1, np.int64)
    row[tuple((system.index - low).T)] = np.arange(system.n)
    group = _group(system, row, low, high) if use else np.eye(3, dtype=int)[None]
    flips = np.array([np.diag(g) for g in group if np.count_nonzero(np.diag(g)) == 3])
    images = np.stack([_image(system.index, np.diag(f), row, low, high) for f in flips])
    # The last of the images, as the lattice's own sectors have it.
    chosen = np.flatnonzero((images <= np.arange(system.n)).all(axis=0))
    images = np.ascontiguousarray(images[:, chosen])
    copies = 1.0 + (np.diff(np.sort(images, axis=0), axis=0) > 0).sum(axis=0)
    centre = system.cells.origin + system.cells.spacing * (low + high) / 2
    characters = _characters(flips)
    mirrored = _mirrored(system, flips, characters)
    scale = np.sqrt(copies)[:, None]
    return Sectors(group, flips, characters, centre, chosen, images, scale, mirrored)


def _mirrored(system: System, flips: np.ndarray, characters: np.ndarray) -> tuple[Sector, ...]:
    mirror = [
        np.flatnonzero((flips == 1 - 2 * np.eye(3, dtype=int)[a]).all(axis=1)) for a in range(3)
    ]
    planes = [len(m) == 1 for m in mirror]
    if not any(planes) or len(flips) != 2 ** sum(planes):
        return ()
    parts = {s.signs: s for s in sectors(system, (planes[0], planes[1], planes[2]))}
    rows = [tuple(int(c[m[0]]) if len(m) else 0 for m in mirror) for c in characters]
    return tuple(parts[row] for row in rows)  # type: ignore[index]


def _characters(flips: np.ndarray) -> np.ndarray:
    """Homomorphisms of the sign changes to +-1: products of the signs of some axes."""
    rows: dict[tuple, None] = {}
    for axes in itertools.product((0, 1), repeat=3):
        signs = np.prod(np.where(np.array(axes) == 1, flips, 1), axis=1)
        rows.setdefault(tuple(signs.tolist()), None)
    return np.array(list(rows))


def _group(system: System, row: np.ndarray, low: np.ndarray, high: np.ndarray) -> np.ndarray:
    tensors = dense_tensors(system)
    size = np.linalg.norm(tensors, axis=(1, 2))
    found = []
    for order in itertools.permutations(range(3)):
        for signs in itertools.product((1, -1), repeat=3):
            g = np.zeros((3, 3), int)
            g[range(3), order] = signs
            image = _image(system.index, g, row, low, high)
            if np.any(image < 0):
                continue
            if not _keeps_materials(system, g):
                continue
            turned = g @ tensors @ g.T
            off = np.linalg.norm(turned - tensors[image], axis=(1, 2)) / size[image]
            plain = order == (0, 1, 2)
            if off.max() < (MIRROR_TOLERANCE if plain else EXCHANGE_TOLERANCE):
                found.append(g)
    return _closed(np.array(found))


def _keeps_materials(system: System, g: np.ndarray) -> bool:
    """Whether anisotropic materials stay as they are; cells alone would not show little of it."""
    eps = system.tensors
    return eps is None or bool(abs(g @ eps @ g.T - eps).max() < 1e-9 * abs(eps).max())


def _closed(group: np.ndarray) -> np.ndarray:
    """The largest part around the identity that is a group (tolerances may leave it open)."""
    members = {g.tobytes(): g for g in group}
    identity = np.eye(3, dtype=group.dtype)
    for g in group:
        if any((g @ h).tobytes() not in members for h in members.values()):
            plain = [h for h in group if np.count_nonzero(np.diag(h)) == 3]
            return np.array(plain)
    rest = [g for g in group if not np.array_equal(g, identity)]
    return np.array([identity, *rest])


def _image(index, g: np.ndarray, row: np.ndarray, low, high) -> np.ndarray:
    """Cell that every cell is taken to, -1 where there is none."""
    twice = (2 * index - (low + high)) @ g.T + (low + high)
    if np.any(twice % 2):
        return np.full(len(index), -1)
    place = twice // 2 - low
    inside = ((place >= 0) & (place < row.shape)).all(axis=1)
    out = np.full(len(index), -1)
    out[inside] = row[tuple(place[inside].T)]
    return out


def dense_tensors(system: System) -> np.ndarray:
    """Inverse polarizability of every cell, shape (n, 3, 3), nm^-3."""
    out = np.empty((system.n, 3, 3), system.dtype)
    for axis in range(3):
        unit = np.zeros((system.n, 3), system.dtype)
        unit[:, axis] = 1
        out[:, :, axis] = system.alpha_inverse.apply(unit, np.empty_like(unit))
    return out


@njit(nogil=True, cache=True)
def _spread(parts, signs, flips, images, out):  # pragma: no cover - compiled
    for g in range(len(flips)):
        for i in range(images.shape[1]):
            cell = images[g, i]
            for a in range(3):
                total = parts[0, i, a] * signs[0, g]
                for s in range(1, len(parts)):
                    total += parts[s, i, a] * signs[s, g]
                out[cell, a] = total * flips[g, a]


@njit(nogil=True, cache=True)
def _gather(whole, signs, flips, images, out):  # pragma: no cover - compiled
    out[:] = 0
    share = 1 / len(flips)
    for g in range(len(flips)):
        for i in range(images.shape[1]):
            cell = images[g, i]
            for a in range(3):
                value = whole[cell, a] * (flips[g, a] * share)
                for s in range(len(out)):
                    out[s, i, a] += value * signs[s, g]


def cosets(group: np.ndarray) -> np.ndarray:
    """One symmetry of every exchange of axes; the others differ by sign changes."""
    _, first = np.unique(abs(group).reshape(len(group), -1), axis=0, return_index=True)
    return group[np.sort(first)]


def cell_images(system: System, turn: np.ndarray) -> np.ndarray:
    """Cell that a symmetry takes every cell to."""
    low, high = system.index.min(axis=0), system.index.max(axis=0)
    row = np.full(high - low + 1, -1, np.int64)
    row[tuple((system.index - low).T)] = np.arange(system.n)
    twice = (2 * system.index - (low + high)) @ turn.T + (low + high)
    return row[tuple((twice // 2 - low).T)]
