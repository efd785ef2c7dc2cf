"""From a system and its light to the induced polarization."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from .krylov import cocg
from .linear_system import System


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
    iterations, products : int
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
    monitor=None,
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
        As in `dda.lattice.krylov.cocg`.

    Returns
    -------
    Polarization
    """
    incident = light.field(system.positions, system.k)
    b = incident.astype(system.dtype).ravel()
    result = cocg(
        system,
        b,
        system.precondition,
        start=None if start is None else start.ravel(),
        tolerance=tolerance,
        limit=limit,
        monitor=monitor,
    )
    return Polarization(
        system,
        light,
        result.x.reshape(-1, 3),
        incident,
        result.iterations,
        result.products,
        result.residual,
        result.status,
    )


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
