"""Points in, rows out."""

from __future__ import annotations

import math
import time
from collections.abc import Iterator, Sequence

import numpy as np

from dda.accuracy import Refined
from dda.errors import ComputationError
from dda.study.geometry import Geometries
from dda.study.levels import Answer, Memory, Watch, answer, worst
from dda.study.points import Point
from dda.study.rows import Row

_STOPPED = {
    "memory": "a finer lattice would not fit in the memory it may use",
    "minutes": "a finer lattice would not end in the time it may take",
    "ladder": "no finer lattice is planned",
}


def run_points(
    points: Sequence[Point], watch: Watch | None = None, geometries: Geometries | None = None
) -> Iterator[Row]:
    """Solve points one after the other.

    Cells and solutions are kept from one point to the next as long as the geometry stays the
    same. A point that fails for a reason of its own gives a row that says so; the others go on.

    Parameters
    ----------
    points : sequence of Point
        Checked ones, see ``dda.study.plan.prepare``.
    watch : callable, optional
        Called often, with what is being done and how much of the point is done.
    geometries : Geometries, optional
        Where cells that are already made may be found.

    Yields
    ------
    Row
        One a point, in order.
    """
    memory = Memory(geometries or Geometries())
    started = time.perf_counter()
    for number, point in enumerate(points):
        seconds = _share(point, started, len(points) - number)
        yield _row(point, memory, watch or (lambda message, part: None), seconds)


def _share(point: Point, started: float, left: int) -> float:
    """Seconds that this point may take of those the run has left."""
    if point.limits.minutes is None:
        return math.inf
    return max(0.0, 60 * point.limits.minutes - (time.perf_counter() - started)) / left


def _row(point: Point, memory: Memory, watch: Watch, seconds: float) -> Row:
    started = time.perf_counter()
    try:
        found = answer(point, memory, watch, seconds)
    except MemoryError:
        return _failed(point, memory, started, "out of memory")
    except (ComputationError, ArithmeticError, np.linalg.LinAlgError) as error:
        return _failed(point, memory, started, str(error))
    status, message = _verdict(point, found.refined)
    return Row(
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
    return Row(
        wavelength_nm=point.wavelength,
        spacing_nm=memory.geometries.of(point).spacing,
        seconds=time.perf_counter() - started,
        message=reason,
        varied=point.varied,
    )
