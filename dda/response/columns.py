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


@dataclass(frozen=True, eq=False)
class Column:
    """A right-hand side.

    Attributes
    ----------
    sector : int
        Parity sector the field belongs to.
    incident : ndarray, shape (c, 3)
        Incident field at `Sectors.cells`.
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
        On `Sectors.cells`, nm^3 per unit amplitude.
    incident : ndarray, shape (c, 3)
    remainder : ndarray of complex, shape (c, 3)
        What is left of the incident field, ``E - A p``.
    value : complex
        ``E^T p`` corrected by ``p^T (E - A p)``: its error is of second order in the remainder.
    drift : float
        How far `value` wandered over the last quarter of the steps: an error bar for it.
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
    monitor: Callable[[int], None] | None = None,
) -> tuple[list[Solved], int]:
    """Solve columns side by side, one of each sector at a time.

    Every sector runs its own conjugate gradients (COCG), but the search vectors of all sectors are
    added up before the product with the interaction matrix and its result is taken apart again, so
    that a product serves up to eight columns. A column starts from the best combination of those
    solved before in its sector (Galerkin, at no product). One that stalls is handed to
    `dda.solve`.

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
    monitor : callable, optional
        Called with the number of columns finished whenever one is.

    Returns
    -------
    solved : list of Solved
        As `columns`.
    products : int
        Products with the interaction matrix on all cells.

    References
    ----------
    van der Vorst, H. A., Melissen, J. B. M. (1990), IEEE Trans. Magn. 26, 706.
    """
    waiting: dict[int, list[int]] = {}
    for j, column in enumerate(columns):
        waiting.setdefault(column.sector, []).append(j)
    solved: dict[int, Solved] = {}
    runs: list[_Run] = []
    whole = np.empty((system.n, 3), system.dtype)
    products = 0

    def start(sector: int) -> None:
        j = waiting[sector].pop(0)
        earlier = [s for s in (*known, *solved.values()) if s.sector == sector]
        rules = (tolerance, limit, enough)
        runs.append(_Run(j, columns[j], system, sectors, earlier, rules))

    for sector in waiting:
        start(sector)
    while runs:
        active = np.array([run.column.sector for run in runs])
        sectors.spread(np.stack([run.search for run in runs]), active, whole)
        product = system.matvec(whole)
        products += 1
        parts = np.empty((len(runs), len(sectors.cells), 3), system.dtype)
        for run, part in zip(runs, sectors.gather(product, active, parts), strict=True):
            run.descend(part)
        rests = np.stack([run.r for run in runs])
        product = system.precondition(sectors.spread(rests, active, whole))
        for run, part in zip(runs, sectors.gather(product, active, parts), strict=True):
            run.turn(part)
        for run in [run for run in runs if run.status]:
            runs.remove(run)
            finished = run.result()
            if finished.status != "converged":
                finished, extra = _rescued(system, sectors, run)
                products += extra
            solved[run.number] = finished
            if monitor is not None:
                monitor(len(solved))
            if waiting[run.column.sector]:
                start(run.column.sector)
    return [solved[j] for j in range(len(columns))], products


class _Run:
    """Conjugate gradients of one column, a step in two halves."""

    def __init__(self, number, column: Column, system: System, sectors: Sectors, known, rules):
        self.number, self.column = number, column
        self.tolerance, self.limit, self.enough = rules
        self.weight = sectors.weight
        self.status, self.steps = "", 0
        b = column.incident.astype(system.dtype)
        self.x = np.zeros_like(b)
        self.r = b.copy()
        start = self._precondition(system, sectors, b)
        self.norm = _norm(self.weight, start)
        if known and self.norm > 0:
            self._project(known)
            start = self._precondition(system, sectors, self.r)
        self.residual = _norm(self.weight, start) / self.norm if self.norm > 0 else 0.0
        self.search = start.copy()
        self.rho = _dot(self.weight, self.r, start)
        self.values = [_dot(self.weight, b, self.x) + _dot(self.weight, self.x, self.r)]
        if self.residual <= self.tolerance:
            self.status = "converged"

    def _precondition(self, system: System, sectors: Sectors, r: np.ndarray) -> np.ndarray:
        sector = np.array([self.column.sector])
        whole = np.empty((system.n, 3), system.dtype)
        done = system.precondition(sectors.spread(r[None], sector, whole))
        return sectors.gather(done, sector, np.empty_like(r[None]))[0]

    def _project(self, known) -> None:
        """Best start in the span of known solutions x, A x = their incident field - remainder."""
        x = np.stack([s.dipoles for s in known])
        image = np.stack([s.image for s in known])
        flat = (x * self.weight[:, None]).reshape(len(known), -1)
        y = np.linalg.lstsq(flat @ image.reshape(len(known), -1).T, flat @ self.r.ravel())[0]
        self.x += np.tensordot(y, x, 1).astype(self.x.dtype)
        self.r -= np.tensordot(y, image, 1).astype(self.x.dtype)

    def descend(self, q: np.ndarray) -> None:
        if self.status:
            return
        self.steps += 1
        pq = _dot(self.weight, self.search, q)
        if pq == 0 or self.rho == 0 or not np.isfinite(pq):
            self.status = "stalled"
            return
        _step(self.x, self.r, self.search, q, self.x.dtype.type(self.rho / pq))
        # The functional is stationary at the solution, so it grows by what the step removes.
        self.values.append(self.values[-1] + self.rho**2 / pq)

    @property
    def drift(self) -> float:
        back = max(_LEAST_DELAY, self.steps // 4)
        if self.steps < back:
            return np.inf
        return float(np.max(np.abs(np.array(self.values[-back - 1 : -1]) - self.values[-1])))

    def turn(self, z: np.ndarray) -> None:
        if self.status:
            return
        self.residual = _norm(self.weight, z) / self.norm
        known = self.residual < _LEAST_RESIDUAL and self.enough is not None
        if self.residual <= self.tolerance or (
            known and self.enough(self.number, self.values[-1], self.drift)
        ):
            self.status = "converged"
        elif self.steps >= self.limit:
            self.status = "limit"
        else:
            fresh = _dot(self.weight, self.r, z)
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


def _rescued(system: System, sectors: Sectors, run: _Run) -> tuple[Solved, int]:
    """Go on from where a column stopped with the program's general solver."""
    column = run.column
    sector = np.array([column.sector])
    whole = np.empty((system.n, 3), complex)
    field_ = sectors.spread(column.incident[None].astype(complex), sector, whole)
    start = sectors.spread(run.x[None], sector, np.empty((system.n, 3), system.dtype))
    answer = solve(system, _Given(field_), tolerance=run.tolerance, limit=run.limit, start=start)
    p = np.ascontiguousarray(answer.p, system.dtype)
    x = sectors.gather(p, sector, np.empty_like(run.x[None]))[0]
    image = sectors.gather(system.matvec(p), sector, np.empty_like(run.x[None]))[0]
    remainder = column.incident - image
    value = _dot(sectors.weight, column.incident, x) + _dot(sectors.weight, x, remainder)
    done = Solved(
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
    return done, answer.products + 1


@njit(nogil=True, cache=True)
def _dot(weight, a, b):  # pragma: no cover - compiled
    total = 0j
    for i in range(len(a)):
        total += weight[i] * (a[i, 0] * b[i, 0] + a[i, 1] * b[i, 1] + a[i, 2] * b[i, 2])
    return total


@njit(nogil=True, cache=True)
def _norm(weight, a):  # pragma: no cover - compiled
    total = 0.0
    for i in range(len(a)):
        for c in range(3):
            total += weight[i] * (a[i, c].real ** 2 + a[i, c].imag ** 2)
    return np.sqrt(total)


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
