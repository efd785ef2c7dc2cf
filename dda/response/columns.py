"""Many right-hand sides of one system, sharing products with the interaction matrix."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np
from numba import njit

from ..lattice.linear_system import System
from ..lattice.solution import solve
from .symmetry import Sectors

# A column is not left before this residual, and its drift is looked at over so many steps.
_LEAST_RESIDUAL = 0.3
_LEAST_DELAY = 5
# A column that starts near its end drifts little before it has found what is still missing:
# with guesses its drift counts three times (then all of 37 averages lay within their bars, of
# rods, a cube and a helix; 4 were beyond before).
_CAUTION = 3.0


@dataclass(frozen=True, eq=False)
class Column:
    """A right-hand side.

    Attributes
    ----------
    sector : int
        Parity sector the field belongs to.
    incident : ndarray, shape (c, 3)
        Incident field, a vector of the sector.
    """

    sector: int
    incident: np.ndarray = field(repr=False)


@dataclass(frozen=True, eq=False)
class Solved:
    """A solved column.

    Attributes
    ----------
    sector : int
    dipoles : ndarray of complex, shape (c, 3)
        Vector of the sector, nm^3 per unit amplitude.
    incident : ndarray, shape (c, 3)
    remainder : ndarray of complex, shape (c, 3)
        What is left of the incident field, ``E - A p``.
    value : complex
        ``E^T p`` corrected by ``p^T (E - A p)``: its error is of second order in the remainder.
    drift : float
        How far `value` wandered over the last third of the steps: an error bar for it.
    residual : float
        Norm of the remainder, preconditioned and relative.
    steps : int
        Products that this column took part in.
    status : {"converged", "stalled", "limit"}
    """

    sector: int
    dipoles: np.ndarray = field(repr=False)
    incident: np.ndarray = field(repr=False)
    remainder: np.ndarray = field(repr=False)
    value: complex
    drift: float
    residual: float
    steps: int
    status: str

    @property
    def image(self) -> np.ndarray:
        """The field ``A p`` that the dipoles do answer, shape (c, 3)."""
        return self.incident - self.remainder


def solve_columns(
    system: System,
    sectors: Sectors,
    columns: Sequence[Column],
    *,
    tolerance: float = 1e-5,
    enough: Callable[[int, complex, float], bool] | None = None,
    limit: int = 2000,
    known: Sequence[Solved] = (),
    guesses: Sequence[Sequence[np.ndarray]] = (),
    monitor: Callable[[int], None] | None = None,
) -> tuple[list[Solved], float]:
    """Solve columns with conjugate gradients (COCG), sector by sector.

    In mirror sectors a product is one on a part of the cells. Otherwise the sectors go side by
    side: their search vectors are added up before a product with all cells and its result is taken
    apart again, so that it serves a column of every sector. A column starts from the best
    combination of those solved before in its sector (Galerkin, at no product). One that stalls is
    handed to `dda.solve`.

    Parameters
    ----------
    system : System
    sectors : Sectors
    columns : sequence of Column
        Those of one sector are solved in this order.
    tolerance : float
        Relative norm of the preconditioned residual to stop at in any case.
    enough : callable, optional
        Called as ``enough(number, value, drift)`` after each step of a column with its `value`
        and `drift` so far; True ends the column as converged.
    limit : int
        Most steps for a column.
    known : sequence of Solved
        Columns solved earlier, to start from.
    guesses : sequence of sequences of ndarray, shape (c, 3)
        For each column dipoles that are nearly its own, such as those at another wavelength: to
        start from as well, at the price of a product each.
    monitor : callable, optional
        Called with the number of columns finished whenever one is.

    Returns
    -------
    solved : list of Solved
        As `columns`.
    products : float
        Products with the interaction matrix, in units of one with all cells.

    References
    ----------
    van der Vorst, H. A., Melissen, J. B. M. (1990), IEEE Trans. Magn. 26, 706.
    """
    work = _Operator(system, sectors)
    waiting: dict[int, list[int]] = {}
    for j, column in enumerate(columns):
        waiting.setdefault(column.sector, []).append(j)
    solved: dict[int, Solved] = {}
    runs: list[_Run] = []

    def start(sector: int) -> None:
        j = waiting[sector].pop(0)
        earlier = [(s.dipoles, s.image) for s in (*known, *solved.values()) if s.sector == sector]
        near = guesses[j] if guesses else ()
        for guess in near:
            earlier.append((guess, work.products([guess], [sector])[0]))
        runs.append(_Run(j, columns[j], work, earlier, (tolerance, limit, enough)))
        runs[-1].caution = _CAUTION if len(near) else 1.0

    for sector in waiting:
        start(sector)
    while runs:
        active = [run for run in runs if not run.status]
        homes = [run.column.sector for run in active]
        for run, q in zip(active, work.products([r.search for r in active], homes), strict=True):
            run.descend(q)
        for run, z in zip(active, work.preconditioned([r.r for r in active], homes), strict=True):
            run.turn(z)
        for run in [run for run in runs if run.status]:
            runs.remove(run)
            finished = run.result()
            if finished.status != "converged":
                finished = _rescued(work, run)
            solved[run.number] = finished
            if monitor is not None:
                monitor(len(solved))
            if waiting[run.column.sector]:
                start(run.column.sector)
    return [solved[j] for j in range(len(columns))], work.count


class _Operator:
    """The system's matrix and preconditioner on vectors of sectors; counts products."""

    def __init__(self, system: System, sectors: Sectors):
        self.system, self.sectors = system, sectors
        self.count = 0.0
        self._whole = np.empty((system.n, 3), system.dtype)

    def products(self, vectors: list[np.ndarray], homes: list[int]) -> list[np.ndarray]:
        if not vectors:
            return []
        if self.sectors.mirrored:
            self.count += len(vectors) / self.sectors.count
            parts = zip(vectors, homes, strict=True)
            return [self.sectors.mirrored[s].matvec(v) for v, s in parts]
        self.count += 1
        return self._apart(self.system.matvec, vectors, homes)

    def preconditioned(self, vectors: list[np.ndarray], homes: list[int]) -> list[np.ndarray]:
        if not vectors:
            return []
        if self.sectors.mirrored:
            parts = zip(vectors, homes, strict=True)
            return [self.sectors.mirrored[s].precondition(v) for v, s in parts]
        return self._apart(self.system.precondition, vectors, homes)

    def _apart(self, operator, vectors: list[np.ndarray], homes: list[int]) -> list[np.ndarray]:
        active, parts = np.array(homes), np.stack(vectors)
        done = operator(self.sectors.spread(parts, active, self._whole))
        return list(self.sectors.gather(done, active, np.empty_like(parts)))


class _Run:
    """Conjugate gradients of one column, a step in two halves."""

    def __init__(self, number: int, column: Column, work: _Operator, known, rules):
        self.number, self.column = number, column
        self.tolerance, self.limit, self.enough = rules
        self.status, self.steps, self.caution = "", 0, 1.0
        b = column.incident.astype(work.system.dtype)
        self.x = np.zeros_like(b)
        self.r = b.copy()
        start = work.preconditioned([b], [column.sector])[0]
        self.norm = float(np.linalg.norm(start))
        if known and self.norm > 0:
            self._project(known)
            start = work.preconditioned([self.r], [column.sector])[0]
        self.residual = float(np.linalg.norm(start)) / self.norm if self.norm > 0 else 0.0
        self.search = start.copy()
        self.rho = _dot(self.r, start)
        self.values = [_dot(b, self.x) + _dot(self.x, self.r)]
        if self.residual <= self.tolerance:
            self.status = "converged"

    def _project(self, known) -> None:
        """Best start in the span of known dipoles x with their fields A x."""
        x, image = (np.stack(parts) for parts in zip(*known, strict=True))
        flat = x.reshape(len(known), -1)
        y = np.linalg.lstsq(flat @ image.reshape(len(known), -1).T, flat @ self.r.ravel())[0]
        self.x += np.tensordot(y, x, 1).astype(self.x.dtype)
        self.r -= np.tensordot(y, image, 1).astype(self.x.dtype)

    def descend(self, q: np.ndarray) -> None:
        if self.status:
            return
        self.steps += 1
        pq = _dot(self.search, q)
        if pq == 0 or self.rho == 0 or not np.isfinite(pq):
            self.status = "stalled"
            return
        _step(self.x, self.r, self.search, q, self.x.dtype.type(self.rho / pq))
        # The functional is stationary at the solution, so it grows by what the step removes.
        self.values.append(self.values[-1] + self.rho**2 / pq)

    @property
    def drift(self) -> float:
        back = max(_LEAST_DELAY, self.steps // 3)
        if self.steps < back:
            return np.inf
        wandered = np.max(np.abs(np.array(self.values[-back - 1 : -1]) - self.values[-1]))
        return self.caution * float(wandered)

    def turn(self, z: np.ndarray) -> None:
        if self.status:
            return
        self.residual = float(np.linalg.norm(z)) / self.norm
        known = self.residual < _LEAST_RESIDUAL and self.enough is not None
        if self.residual <= self.tolerance or (
            known and self.enough(self.number, self.values[-1], self.drift)
        ):
            self.status = "converged"
        elif self.steps >= self.limit:
            self.status = "limit"
        else:
            fresh = _dot(self.r, z)
            _extend(self.search, z, self.x.dtype.type(fresh / self.rho))
            self.rho = fresh

    def result(self) -> Solved:
        column = self.column
        return Solved(
            column.sector,
            self.x,
            column.incident,
            self.r,
            complex(self.values[-1]),
            self.drift if self.steps else 0.0,
            float(self.residual),
            self.steps,
            self.status,
        )


@dataclass(frozen=True, eq=False)
class _Given:
    """A field at the cells in the place of a light."""

    values: np.ndarray

    def field(self, positions: np.ndarray, k: float) -> np.ndarray:
        return self.values


def _rescued(work: _Operator, run: _Run) -> Solved:
    """Go on from where a column stopped with the program's general solver."""
    column, system, sectors = run.column, work.system, work.sectors
    home = np.array([column.sector])
    whole = np.empty((system.n, 3), complex)
    incident = sectors.spread(column.incident[None].astype(complex), home, whole)
    start = sectors.spread(run.x[None], home, np.empty((system.n, 3), system.dtype))
    answer = solve(system, _Given(incident), tolerance=run.tolerance, limit=run.limit, start=start)
    work.count += answer.products / (sectors.count if sectors.mirrored else 1)
    p = np.ascontiguousarray(answer.p, system.dtype)
    x = sectors.gather(p, home, np.empty_like(run.x[None]))[0]
    remainder = column.incident - work.products([x], [column.sector])[0]
    value = _dot(column.incident.astype(x.dtype), x) + _dot(x, remainder)
    return Solved(
        column.sector,
        x,
        column.incident,
        remainder,
        complex(value),
        abs(complex(value) - run.values[-1]),
        answer.residual,
        run.steps + answer.iterations,
        answer.status,
    )


def _dot(a: np.ndarray, b: np.ndarray) -> complex:
    """Without a conjugate, and summed in double precision."""
    return complex(np.sum(np.einsum("ia,ia->i", a, b), dtype=complex))


@njit(nogil=True, cache=True)
def _step(x, r, p, q, a):  # pragma: no cover - compiled
    for i in range(len(x)):
        for c in range(3):
            x[i, c] += a * p[i, c]
            r[i, c] -= a * q[i, c]


@njit(nogil=True, cache=True)
def _extend(p, z, beta):  # pragma: no cover - compiled
    for i in range(len(p)):
        for c in range(3):
            p[i, c] = z[i, c] + beta * p[i, c]
