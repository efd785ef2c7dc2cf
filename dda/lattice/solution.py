"""From a system and its light to the induced polarization."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np

from .krylov import Iteration, KrylovResult, Subspace, iterate
from .linear_system import System
from .sectors import sectors
from .settling import Goal

# From good to bad; a solution is as good as its worst part.
_STATUSES = ("converged", "limit", "stalled")
# A sector that was stopped by its goal, or by whoever watched it, arrived where it should.
_STATUS_OF = {"stopped": "converged"}


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
    previous: Sequence[np.ndarray] = (),
    monitor: Callable[[int, np.ndarray, float], bool] | None = None,
    mirrors: tuple[bool, bool, bool] | None = None,
    goal: Goal | None = None,
    method: str = "cocg",
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
        Most iterations in a mirror sector.
    start : ndarray, shape (n, 3), optional
        First guess of the dipoles.
    previous : sequence of ndarray, shape (n, 3)
        Dipoles of similar systems on the same cells, at neighbouring wavelengths: the solution is
        sought in their span together with the Krylov space. Costs a product each.
    monitor : callable, optional
        As in `dda.lattice.krylov.cocg`; the vector it is given belongs to one mirror sector.
    mirrors : three bool, optional
        Mirror planes to use; all that the cells have by default.
    goal : Goal, optional
        Stops a sector when what is asked for has settled, whatever the residual; see
        `dda.response.settled`.
    method : {"cocg", "cocr", "bicgstab", "gmres", "idr"}
        Krylov method; GMRES takes over where another breaks down.

    Returns
    -------
    Polarization

    Notes
    -----
    Light that is not linearly polarized is solved as two linear parts. Where the conjugate
    gradients break down, restarted GMRES goes on from their best iterate.
    """
    incident = light.field(system.positions, system.k)
    parts = light.linear_parts() if hasattr(light, "linear_parts") else [(1.0, light)]
    found = sectors(system, mirrors)
    p = np.zeros((system.n, 3), system.answer_dtype)
    results: list[tuple[KrylovResult, float]] = []
    whole = float(np.linalg.norm(incident))
    extra = 0
    for coefficient, part in parts:
        field_ = (
            incident if len(parts) == 1 else coefficient * part.field(system.positions, system.k)
        )
        for sector in found:
            home = sector.exact or sector
            b = home.fold(field_)
            share = float(np.linalg.norm(b)) / whole
            if share < 1e-7 * (1 if b.dtype == np.complex128 else 100):
                continue  # the light has no part of this parity
            guess = home.fold(start) if start is not None and len(parts) == 1 else None
            known = None
            if len(previous) and guess is None:
                known = Subspace.of(sector, [sector.fold(v) for v in previous])
                extra += len(known.vectors) if known else 0
            watch = goal.watch(home, field_, monitor) if goal else None
            if watch:
                watch.by_residual = method == "cocg" and guess is None
                if known:
                    watch.start_is_known()
            rules = Iteration(tolerance, limit, guess, known, watch or monitor, sector.exact)
            result = iterate(method, sector, b, sector.precondition, rules)
            if goal and watch:
                watch.look(result.iterations, result.x, result.residual)
                goal.add(watch)
            p += home.unfold(result.x)
            results.append((result, share))
    return Polarization(
        system,
        light,
        p,
        incident,
        max(r.iterations for r, _ in results),
        extra + sum(r.products for r, _ in results),
        float(np.sqrt(sum((r.residual * share) ** 2 for r, share in results))),
        max((_STATUS_OF.get(r.status, r.status) for r, _ in results), key=_badness),
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
