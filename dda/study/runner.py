"""A point in, its outcome out, whatever happens on the way."""

from __future__ import annotations

import math
import time
from dataclasses import dataclass, replace

from dda.accuracy import Level, Refined
from dda.errors import ComputationError, InputError
from dda.study.levels import Answer, Memory, Watch, answer, worst
from dda.study.more import Array
from dda.study.points import Point
from dda.study.rows import Row
from shapes import ShapeError

_STOPPED = {
    "memory": "a finer lattice would not fit in the memory it may use",
    "minutes": "a finer lattice would not end in the time it may take",
    "ladder": "no finer lattice is planned",
}
#: Statuses of a row that are not tried again with another solver.
_GOOD = ("converged", "coarse")


@dataclass(frozen=True, eq=False)
class Outcome:
    """What came out of a point.

    Attributes
    ----------
    row : Row
    levels : tuple of Level
        The answers at each spacing, coarse to fine; empty if it failed.
    arrays : tuple of Array
        What else the study asked for.
    tries : int
        How often it was computed.
    """

    row: Row
    levels: tuple[Level, ...] = ()
    arrays: tuple[Array, ...] = ()
    tries: int = 1


class Budget:
    """The minutes that a run may take, shared out over the points that are left."""

    def __init__(self, minutes: float | None, workers: int = 1) -> None:
        self._seconds = math.inf if minutes is None else 60 * minutes
        self._workers = workers
        self._started = time.perf_counter()

    def share(self, left: int) -> float:
        """Return the seconds that the next of so many points may take."""
        if math.isinf(self._seconds):
            return math.inf
        rest = self._seconds - (time.perf_counter() - self._started)
        return max(0.0, rest) * self._workers / max(left, 1)


def compute(point: Point, memory: Memory, watch: Watch, seconds: float = math.inf) -> Outcome:
    """Compute a point; if it fails or does not converge, once more with another solver.

    Parameters
    ----------
    point : Point
        A checked one, see `dda.study.prepare.prepare`.
    memory : Memory
        Cells and solutions of the points before, and what this one leaves for the next.
    watch : callable
        Called often, with what is being done and how much of the point is done.
    seconds : float
        What refinement to a target may take.

    Returns
    -------
    Outcome
        Of the better try. Only an interruption from outside is raised.
    """
    started = time.perf_counter()
    first = _attempt(point, memory, watch, seconds)
    if first.row.status in _GOOD or first.tries == 0:
        return replace(first, tries=1)
    other = "gmres" if point.solver.method == "bicgstab" else "bicgstab"
    solver = point.solver.model_copy(update={"method": other})
    left = seconds - (time.perf_counter() - started)
    second = _attempt(point.at(point.wavelength, solver=solver), memory, watch, left)
    best = min(first, second, key=_badness)
    row = best.row
    if row.status not in _GOOD:
        row = replace(row, message=f"{row.message}; with another solver ({other}) as well")
    total = time.perf_counter() - started
    return replace(best, row=replace(row, seconds=total), tries=2)


def _badness(outcome: Outcome) -> tuple[bool, float]:
    """Order of two tries: an answer before none, then by the solver's share of the error."""
    row = outcome.row
    if row.status in _GOOD:
        return False, -1.0
    share = (row.c_ext_solver_error_nm2 + row.c_abs_solver_error_nm2) / abs(row.c_ext_nm2 or 1)
    return not row.answered, share if math.isfinite(share) else math.inf


def _attempt(point: Point, memory: Memory, watch: Watch, seconds: float) -> Outcome:
    """Compute a point; ``tries`` is 0 where another solver cannot help."""
    started = time.perf_counter()
    try:
        found = answer(point, memory, watch, seconds)
    except MemoryError:
        return Outcome(_failed(point, memory, started, "out of memory"), tries=0)
    except (InputError, ShapeError) as error:
        return Outcome(_failed(point, memory, started, str(error)), tries=0)
    except (ComputationError, ArithmeticError) as error:
        return Outcome(_failed(point, memory, started, str(error)))
    except Exception as error:  # a sweep goes on whatever one point brings up
        reason = f"{type(error).__name__}: {error}"
        return Outcome(_failed(point, memory, started, reason))
    status, message = _verdict(point, found.refined)
    row = Row(
        wavelength_nm=point.wavelength,
        **_numbers(found, point.averaged),
        cells=found.cells,
        spacing_nm=found.refined.levels[-1].spacing,
        iterations=sum(level.iterations for level in found.refined.levels),
        residual=max(level.residual for level in found.refined.levels),
        status=status,
        levels=len(found.refined.levels),
        balance=found.balance,
        seconds=time.perf_counter() - started,
        message=message,
        varied=point.varied,
        more=found.more.columns,
    )
    return Outcome(row, found.refined.levels, found.more.arrays)


def _numbers(found: Answer, averaged: bool) -> dict[str, float]:
    """Columns of the cross sections, their efficiencies and errors."""
    refined = found.refined
    out = {}
    for i, name in enumerate(("ext", "abs", "sca")):
        out[f"c_{name}_nm2"] = refined.sections[i]
        out[f"q_{name}"] = refined.sections[i] / found.area
        out[f"c_{name}_error_nm2"] = refined.error[i]
        out[f"c_{name}_spacing_error_nm2"] = refined.spacing_error[i]
        out[f"c_{name}_solver_error_nm2"] = 0.0 if averaged else refined.solver_error[i]
        out[f"c_{name}_orientation_error_nm2"] = refined.solver_error[i] if averaged else 0.0
    return out


def _verdict(point: Point, refined: Refined) -> tuple[str, str]:
    """Status of a row, and what to say when it is not good."""
    status = worst(level.status for level in refined.levels)
    percent = f"{100 * refined.relative:.2g} %"
    if status != "converged":
        slow = next(level for level in refined.levels if level.status == status)
        ext, absorbed = (
            100 * slow.solver_error[i] / abs(slow.sections[i] or math.inf) for i in (0, 1)
        )
        return status, (
            f"after {slow.iterations} steps (residual {slow.residual:.1e}) the solver leaves C_ext "
            f"uncertain by {ext:.2g} %, C_abs by {absorbed:.2g} %; a larger solver.tolerance "
            "accepts that, other cells may settle sooner"
        )
    target = point.accuracy.target
    if target is not None and refined.relative > target:
        return "coarse", (
            f"the error is {percent}, {100 * target:g} % were asked for: "
            f"{_STOPPED[refined.stopped]}"
        )
    return status, ""


def _failed(point: Point, memory: Memory, started: float, reason: str) -> Row:
    try:
        spacing = memory.geometries.of(point).spacing
    except (ValueError, MemoryError):  # the particle itself may be what failed
        spacing = math.nan
    return Row(
        wavelength_nm=point.wavelength,
        spacing_nm=spacing,
        seconds=time.perf_counter() - started,
        message=reason,
        varied=point.varied,
    )
