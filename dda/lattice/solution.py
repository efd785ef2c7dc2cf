"""From a system and its light to the induced polarization."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from .krylov import KrylovResult, cocg
from .linear_system import System
from .sectors import Sector, sectors

# From good to bad; a solution is as good as its worst part.
_STATUSES = ("converged", "limit", "stalled")


@dataclass(frozen=True, eq=False)
class Polarization:
    """Induced dipoles and how well they are known.

    Attributes
    ----------
    system : System
    light : PlaneWave
    p : ndarray of complex, shape (n, 3)
        Dipoles in units of the incident amplitude, nm^3.
    incident : ndarray of complex, shape (n, 3)
        Incident field at the cells.
    iterations : int
        Of the slowest mirror sector.
    products : int
        Products with the interaction, of all sectors; within a sector of m mirror planes one
        costs about 2^-m of a product with the whole.
    residual : float
        Of the preconditioned system, relative.
    status : {"converged", "stalled", "limit"}
    """

    system: System = field(repr=False)
    light: object
    p: np.ndarray = field(repr=False)
    incident: np.ndarray = field(repr=False)
    iterations: int
    products: int
    residual: float
    status: str


def solve(
    system: System,
    light,
    *,
    tolerance: float = 1e-4,
    limit: int = 2000,
    start: np.ndarray | None = None,
    monitor: Callable[[int, np.ndarray, float], bool] | None = None,
    mirrors: tuple[bool, bool, bool] | None = None,
) -> Polarization:
    """Solve for the dipoles that the light induces.

    Parameters
    ----------
    system : System
    light
        Has ``field(positions, k)``, e.g. `dda.plane_wave`.
    tolerance : float
        Relative norm of the preconditioned residual to stop at.
    limit : int
        Most iterations.
    start : ndarray, shape (n, 3), optional
        First guess of the dipoles.
    monitor : callable, optional
        As in `dda.lattice.krylov.cocg`; the vector it is given belongs to one mirror sector.
    mirrors : three bool, optional
        Mirror planes to use; all that the cells have by default.

    Returns
    -------
    Polarization
    """
    incident = light.field(system.positions, system.k)
    parts = [(s, s.fold(incident)) for s in sectors(system, mirrors)]
    total = np.sqrt(sum(float(np.linalg.norm(b)) ** 2 for _, b in parts))
    p = np.zeros((system.n, 3), system.dtype)
    results: list[tuple[KrylovResult, float]] = []
    for sector, b in parts:
        share = float(np.linalg.norm(b)) / total
        if share < 1e-12:  # the light has no part of this parity
            continue
        result = _solve_sector(sector, b, tolerance, limit, start, monitor)
        p += sector.unfold(result.x)
        results.append((result, share))
    return Polarization(
        system,
        light,
        p,
        incident,
        max(r.iterations for r, _ in results),
        sum(r.products for r, _ in results),
        float(np.sqrt(sum((r.residual * share) ** 2 for r, share in results))),
        max((r.status for r, _ in results), key=_badness),
    )


def _solve_sector(sector: Sector, b, tolerance, limit, start, monitor) -> KrylovResult:
    return cocg(
        sector,
        b,
        sector.precondition,
        start=None if start is None else sector.fold(start),
        tolerance=tolerance,
        limit=limit,
        monitor=monitor,
    )


def _badness(status: str) -> int:
    return _STATUSES.index(status) if status in _STATUSES else 0


def solve_dense(system: System, light) -> Polarization:
    """Direct solution with the dense matrix, for checks on some hundred cells."""
    from .green import tensor

    n = system.n
    pairs = tensor(system.table, system.index[:, None] - system.index[None])
    matrix = -pairs.transpose(0, 2, 1, 3).reshape(3 * n, 3 * n)
    identity = np.eye(3, dtype=system.dtype)
    own = np.empty((n, 3, 3), complex)
    for c in range(3):
        column = np.broadcast_to(identity[c], (n, 3)).copy()
        own[:, :, c] = system.alpha_inverse.apply(column, np.empty_like(column))
    for i in range(n):
        matrix[3 * i : 3 * i + 3, 3 * i : 3 * i + 3] += own[i]
    incident = light.field(system.positions, system.k)
    p = np.linalg.solve(matrix, incident.ravel())
    return Polarization(system, light, p.reshape(-1, 3), incident, 0, 0, 0.0, "converged")
