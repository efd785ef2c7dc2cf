"""Fields of smeared dipoles: what the lattice really knows between and beside its cells.

A point dipole's field is useless within a cell of it, and the filtered tensor rings for many cells
beyond a surface. Here every dipole is spread over a ball of 1.75 spacings with the density
(1 - r^2/a^2)^3. Outside its ball its field is that of the point; inside it is smooth, so that the
lattice cannot be seen in the sum. Because a ball's mean of a solution of Laplace's equation is the
value at its centre, spreading does no harm wherever the ball does not reach over a surface.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from ..lattice.solution import Polarization
from ..lattice.workers import Workers
from . import smeared_mesh as mesh
from .smeared_sums import add_all, add_close, add_surroundings, phase_count

#: Radius of the ball in spacings: smaller ones let the lattice shine through inside metals
#: (10 % of E against 2 %), larger ones blur more.
SMEAR = 1.75

# Below this many pairs of a point and a cell direct sums are quicker than a mesh.
_FEW_PAIRS = 5e7
# Pairs, or points of a mesh, between two calls of the progress callback: about a second.
_PAIRS_AT_ONCE = 1e8
_POINTS_AT_ONCE = 200_000

Progress = Callable[[int, int], None]


@dataclass(frozen=True, eq=False)
class Surroundings:
    """What the cells around points hold, averaged with the smearing density.

    Attributes
    ----------
    density : ndarray of complex, shape (n, 3)
        4 pi times the dipole density, in units of the incident amplitude.
    fraction : ndarray, shape (n, m)
        Filled fraction of each material, twice averaged: over the window and the ball.
    structure : ndarray, shape (n, 6)
        xx, yy, zz, xy, xz, yz of the mean of ``w nn``, n the cells' normals, w the squared
        gradients of the fractions.
    """

    density: np.ndarray
    fraction: np.ndarray
    structure: np.ndarray


class SmearedField:
    """Fields that a solved system radiates, its dipoles smeared.

    Parameters
    ----------
    polarization : Polarization
    workers : Workers, optional
        Threads; those of the system by default.
    """

    def __init__(self, polarization: Polarization, workers: Workers | None = None):
        system = polarization.system
        cells = system.cells
        self.system = system
        self.workers = workers or system.convolution.workers
        self.radius = SMEAR * cells.spacing
        self._p = np.ascontiguousarray(polarization.p, np.complex128)
        self._positions = np.ascontiguousarray(system.positions, float)
        self._row = np.full(cells.shape, -1, np.int64)
        self._row[tuple(system.index.T)] = np.arange(system.n)
        chosen = cells.rows()[tuple(system.index.T)]
        self._window = np.ascontiguousarray(cells.window[chosen], float)
        self._tensor = _structure(cells, chosen)
        self._mesh: mesh.SmearedMesh | None = None
        self._asked = (np.zeros(3), np.zeros(3))

    def scattered(
        self, points: np.ndarray, magnetic: bool = False, progress: Progress | None = None
    ) -> tuple[np.ndarray, np.ndarray]:
        """E and, if asked for, H of the dipoles at `points` (n, 3) in nm; both (n, 3).

        H is in units of the incident wave's H; it is zero where it was not asked for.
        `progress` is called with the number of points done and of all.
        """
        points = np.ascontiguousarray(points, float).reshape(-1, 3)
        e = np.zeros(points.shape, np.complex128)
        h = np.zeros(points.shape, np.complex128)
        done, told = 0, progress or (lambda number, of: None)
        read = np.zeros(len(points), bool)
        if len(points) * self.system.n > _FEW_PAIRS:
            read = self._mesh_for(points).holds(points)
        for rows in _portions(np.flatnonzero(read), _POINTS_AT_ONCE):
            e[rows], h[rows] = self._from_mesh(points[rows], magnetic)
            done += len(rows)
            told(done, len(points))
        at_once = max(64, int(_PAIRS_AT_ONCE / max(1, self.system.n)))
        for rows in _portions(np.flatnonzero(~read), at_once):
            e[rows], h[rows] = self._direct(points[rows], magnetic)
            done += len(rows)
            told(done, len(points))
        return e, h

    def around(self, points: np.ndarray, smear: float = SMEAR) -> Surroundings:
        """Averages over balls of radius `smear` (spacings) around `points` (n, 3) in nm."""
        points = np.ascontiguousarray(points, float).reshape(-1, 3)
        n = len(points)
        density = np.zeros((n, 3), np.complex128)
        fraction = np.zeros((n, self._window.shape[1]))
        structure = np.zeros((n, 6))
        cells = self.system.cells

        def share(a: int, b: int) -> None:
            add_surroundings(
                points, cells.origin, cells.spacing, self._row, self._p, self._window,
                self._tensor, smear * cells.spacing, density, fraction, structure, a, b,
            )  # fmt: skip

        self.workers.run(share, self.workers.split(n, grain=1024))
        return Surroundings(density, fraction, structure)

    def _direct(self, points: np.ndarray, magnetic: bool) -> tuple[np.ndarray, np.ndarray]:
        e = np.zeros(points.shape, np.complex128)
        h = np.zeros(points.shape, np.complex128)
        k = self.system.k
        reach = k * _farthest(points, self._positions)
        phases, step = np.linspace(0, reach, phase_count(reach), retstep=True)
        phases = np.exp(1j * phases)

        def share(a: int, b: int) -> None:
            add_all(
                points, self._positions, self._p, k, self.radius, phases, float(step), magnetic,
                e, h, a, b,
            )  # fmt: skip

        self.workers.run(share, self.workers.split(len(points), grain=16))
        return e, h

    def _mesh_for(self, points: np.ndarray) -> mesh.SmearedMesh:
        low, high = points.min(axis=0), points.max(axis=0)
        known = self._mesh
        if known is None or (low < self._asked[0]).any() or (high > self._asked[1]).any():
            # a little more than asked for, so that points along normals find it as well
            margin = 4 * self.system.cells.spacing
            self._asked = low - margin, high + margin
            known = self._mesh = mesh.SmearedMesh(self.system, self._p, *self._asked)
        return known

    def _from_mesh(self, points: np.ndarray, magnetic: bool) -> tuple[np.ndarray, np.ndarray]:
        assert self._mesh is not None
        grid = self._mesh
        e = np.zeros(points.shape, np.complex128)
        h = np.zeros(points.shape, np.complex128)
        cells = self.system.cells
        d = cells.spacing
        electric = grid.electric
        potential = grid.potential if magnetic else electric

        def share(a: int, b: int) -> None:
            mesh.read_field(points, grid.origin, d, mesh.TAPS, electric, e, a, b)
            if magnetic:
                mesh.read_curl(points, grid.origin, d, mesh.TAPS, potential, h, a, b)
            add_close(
                points, cells.origin, d, self._row, self._p, self.system.k, self.radius,
                mesh.WIDE * d, magnetic, e, h, a, b,
            )  # fmt: skip

        self.workers.run(share, self.workers.split(len(points), grain=256))
        return e, h


def _structure(cells, chosen: np.ndarray) -> np.ndarray:
    """xx, yy, zz, xy, xz, yz of ``w nn`` of the chosen cells."""
    normal = cells.normal[chosen]
    weight = np.ones(len(chosen))
    if cells.gradient.shape[:2] == cells.window.shape:
        gradient = cells.gradient[chosen]
        host = gradient.sum(axis=1)
        weight = ((gradient**2).sum(axis=(1, 2)) + (host**2).sum(axis=1)) * cells.spacing**2
    pairs = ((0, 0), (1, 1), (2, 2), (0, 1), (0, 2), (1, 2))
    return np.stack([weight * normal[:, a] * normal[:, b] for a, b in pairs], axis=1)


def _farthest(points: np.ndarray, positions: np.ndarray) -> float:
    """A bound of the distances between the two sets."""
    low, high = positions.min(axis=0), positions.max(axis=0)
    away = np.maximum(np.abs(points - low), np.abs(points - high))
    return float(np.sqrt((away**2).sum(axis=1).max()))


def _portions(rows: np.ndarray, size: int) -> list[np.ndarray]:
    return [rows[start : start + size] for start in range(0, len(rows), size)]
