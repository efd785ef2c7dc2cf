"""Fields of smeared dipoles at very many points: lattice far away, cells close by.

Direct sums cost points times cells. Instead every dipole is first spread widely (over four
spacings), the field of that is made on the lattice by FFT and read between its nodes by polynomials
of the fifth degree, and what the wide ball changed is put right with the cells within four
spacings of each point (the particle-particle, particle-mesh method; Hockney & Eastwood 1988).
The reading errs by some 1e-3 of the incident field at most places.
"""

from __future__ import annotations

import math

import numpy as np
from numba import njit

from ..lattice.convolution import Convolution
from ..lattice.green import RadialTable
from ..lattice.kernel import kernel
from ..lattice.linear_system import System
from .smeared_sums import HEIGHT, held_part

#: Radius of the wide ball in spacings.
WIDE = 4.0
#: Nodes that a polynomial goes through, along each axis.
TAPS = 6

# The kernel of a mesh with this many nodes takes about a gigabyte.
_MOST_NODES = 4_000_000


class SmearedMesh:
    """The field of widely spread dipoles on lattice nodes in and around the box of cells.

    Parameters
    ----------
    system : System
    p : ndarray of complex, shape (n, 3)
        Dipoles.
    low, high : ndarray, shape (3,)
        Corners of the region where points are expected, nm. The mesh covers as much of it as
        memory allows, see `holds`.
    """

    def __init__(self, system: System, p: np.ndarray, low: np.ndarray, high: np.ndarray):
        cells = system.cells
        d = cells.spacing
        self.system = system
        below = np.clip(np.ceil((cells.origin - low) / d), 0, None).astype(int) + TAPS
        end = cells.origin + d * (np.array(cells.shape) - 1)
        above = np.clip(np.ceil((high - end) / d), 0, None).astype(int) + TAPS
        below, above = _affordable(np.array(cells.shape), below, above)
        self.first = -below
        nx, ny, nz = (int(n) for n in np.array(cells.shape) + below + above)
        self.shape = (nx, ny, nz)
        self.origin = cells.origin - d * below
        self._p = p
        self._electric: np.ndarray | None = None
        self._potential: np.ndarray | None = None

    def holds(self, points: np.ndarray) -> np.ndarray:
        """Which of `points` (n, 3) can be read from the mesh, (n,) bool."""
        place = (points - self.origin) / self.system.cells.spacing
        margin = TAPS // 2
        inside = (place >= margin) & (place <= np.array(self.shape) - 1 - margin)
        return inside.all(axis=1)

    @property
    def electric(self) -> np.ndarray:
        """E of the widely spread dipoles on the nodes, (nx, ny, nz, 3)."""
        if self._electric is None:
            self._electric = self._convolved(self._tensor_table())
        return self._electric

    @property
    def potential(self) -> np.ndarray:
        """``-ik sum_j g p_j`` on the nodes, whose curl is H, (nx, ny, nz, 3)."""
        if self._potential is None:
            self._potential = -1j * self.system.k * self._convolved(self._scalar_table())
        return self._potential

    def _convolved(self, table: RadialTable) -> np.ndarray:
        nodes = np.indices(self.shape, np.int32).reshape(3, -1).T.copy()
        at = self.system.index - self.first
        flat = np.ravel_multi_index(tuple(at.T), self.shape)
        dipoles = np.zeros((len(nodes), 3), np.complex128)
        dipoles[flat] = self._p
        own = table.isotropic[0] * self._p
        workers = self.system.convolution.workers
        convolution = Convolution(kernel(self.shape, table), workers=workers)
        out = convolution(nodes, dipoles, np.empty_like(dipoles))
        out[flat] += own  # the convolution leaves out the field of a cell on itself
        return out.reshape(*self.shape, 3)

    def _distances(self) -> np.ndarray:
        last = int(sum((n - 1) ** 2 for n in self.shape))
        return self.system.cells.spacing * np.sqrt(np.arange(1, last + 1))

    def _tensor_table(self) -> RadialTable:
        k, radius = self.system.k, WIDE * self.system.cells.spacing
        r = self._distances()
        wave = held_part(r / radius) * np.exp(1j * k * r) / r
        near = (1 - 1j * k * r) / r**2
        spread = HEIGHT / radius**3 * np.clip(1 - (r / radius) ** 2, 0, None) ** 3
        isotropic, dyadic = wave * (k**2 - near), wave * (3 * near - k**2) - spread
        return RadialTable(
            np.concatenate([[-HEIGHT / (3 * radius**3)], isotropic]),
            np.concatenate([[0], dyadic]),
        )

    def _scalar_table(self) -> RadialTable:
        k, radius = self.system.k, WIDE * self.system.cells.spacing
        r = np.concatenate([[0], self._distances()])
        outer = np.maximum(r, radius)
        value = np.exp(1j * k * outer) / outer
        # within the ball the slope is that of the point times the part of the density within
        inner = r < radius
        node, weight = np.polynomial.legendre.leggauss(24)
        half = (radius - r[inner, None]) / 2
        x = radius - half * (1 - node)
        slope = held_part(x / radius) * np.exp(1j * k * x) * (1j * k * x - 1) / x**2
        value[inner] -= (half * slope) @ weight
        return RadialTable(value, np.zeros_like(value))


def _affordable(shape, below, above):
    """Margins cut alike until the mesh is small enough."""
    for _ in range(100):
        if np.prod(shape + below + above) <= max(_MOST_NODES, np.prod(shape + 2 * TAPS)):
            break
        below = np.maximum(TAPS, (0.9 * below).astype(int))
        above = np.maximum(TAPS, (0.9 * above).astype(int))
    return below, above


@njit(nogil=True, cache=True, error_model="numpy")
def _weights(u, values, slopes):  # pragma: no cover - compiled
    """Lagrange's polynomials on the nodes -2 .. 3 and their derivatives at `u`."""
    taps = len(values)
    for i in range(taps):
        xi = i - (taps // 2 - 1)
        value = 1.0
        slope = 0.0
        for j in range(taps):
            if j == i:
                continue
            xj = j - (taps // 2 - 1)
            slope = (slope * (u - xj) + value) / (xi - xj)
            value *= (u - xj) / (xi - xj)
        values[i] = value
        slopes[i] = slope


@njit(nogil=True, cache=True, error_model="numpy")
def read_field(points, origin, spacing, taps, nodes, out, start, stop):  # pragma: no cover
    """Add the field on the `nodes` (nx, ny, nz, 3) read at points start .. stop to `out`."""
    w = np.empty((3, taps))
    slopes = np.empty(taps)
    first = np.empty(3, np.int64)
    for t in range(start, stop):
        for c in range(3):
            place = (points[t, c] - origin[c]) / spacing
            floor = math.floor(place)
            first[c] = int(floor) - (taps // 2 - 1)
            _weights(place - floor, w[c], slopes)
        for a in range(taps):
            for b in range(taps):
                both = w[0, a] * w[1, b]
                for c in range(taps):
                    f = both * w[2, c]
                    for q in range(3):
                        out[t, q] += f * nodes[first[0] + a, first[1] + b, first[2] + c, q]


@njit(nogil=True, cache=True, error_model="numpy")
def read_curl(points, origin, spacing, taps, nodes, out, start, stop):  # pragma: no cover
    """Add the curl of the field on the `nodes`, read at points start .. stop, to `out`."""
    w = np.empty((3, taps))
    v = np.empty((3, taps))
    first = np.empty(3, np.int64)
    for t in range(start, stop):
        for c in range(3):
            place = (points[t, c] - origin[c]) / spacing
            floor = math.floor(place)
            first[c] = int(floor) - (taps // 2 - 1)
            _weights(place - floor, w[c], v[c])
            for i in range(taps):
                v[c, i] /= spacing
        for a in range(taps):
            for b in range(taps):
                for c in range(taps):
                    node = nodes[first[0] + a, first[1] + b, first[2] + c]
                    dx = v[0, a] * w[1, b] * w[2, c]
                    dy = w[0, a] * v[1, b] * w[2, c]
                    dz = w[0, a] * w[1, b] * v[2, c]
                    out[t, 0] += dy * node[2] - dz * node[1]
                    out[t, 1] += dz * node[0] - dx * node[2]
                    out[t, 2] += dx * node[1] - dy * node[0]
