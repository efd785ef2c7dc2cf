"""Points in, rows out."""

from __future__ import annotations

import math
import time
from collections.abc import Callable, Iterable, Iterator

import numpy as np

from dda.errors import ComputationError
from dda.lattice import system
from dda.lattice.workers import Workers
from dda.light import PlaneWave, plane_wave, transverse
from dda.response import Settled, settle
from dda.study.estimate import expected_steps
from dda.study.geometry import Geometries, Geometry
from dda.study.media import media_of
from dda.study.points import Point
from dda.study.rows import Row

#: Called with a message and the part of the current point that is done, 0 to 1.
Watch = Callable[[str, float], None]
#: Order of the statuses from good to bad, as far as they are known; others are worse.
_STATUSES = ("converged", "limit", "stalled")


def run_points(
    points: Iterable[Point], watch: Watch | None = None, geometries: Geometries | None = None
) -> Iterator[Row]:
    """Solve points one after the other.

    Cells are kept from one point to the next as long as the geometry stays the same. A point
    that fails for a reason of its own gives a row that says so; the others go on.

    Parameters
    ----------
    points : iterable of Point
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
    made = geometries or Geometries()
    for point in points:
        yield _row(point, made.of(point), watch or (lambda message, part: None))


def lights_of(point: Point) -> tuple[PlaneWave, ...]:
    """Return the plane waves to solve for; their cross sections are averaged."""
    if point.polarization == "unpolarized":
        first, second = transverse(np.asarray(point.direction, float))
        return plane_wave(point.direction, first), plane_wave(point.direction, second)
    return (plane_wave(point.direction, point.polarization),)


def _row(point: Point, geometry: Geometry, watch: Watch) -> Row:
    started = time.perf_counter()
    try:
        solutions = _solutions(point, geometry, watch)
    except MemoryError:
        return _failed(point, geometry, started, "out of memory")
    except (ComputationError, ArithmeticError, np.linalg.LinAlgError) as error:
        return _failed(point, geometry, started, str(error))
    sections = [solution.sections for solution in solutions]
    c_ext, c_abs, c_sca = (
        float(np.mean([getattr(each, name) for each in sections]))
        for name in ("c_ext", "c_abs", "c_sca")
    )
    errors = np.mean([solution.error for solution in solutions], axis=0)
    area = sections[0].area
    polarizations = [solution.polarization for solution in solutions]
    status = max((p.status for p in polarizations), key=_badness)
    return Row(
        wavelength_nm=point.wavelength,
        c_ext_nm2=c_ext,
        c_abs_nm2=c_abs,
        c_sca_nm2=c_sca,
        q_ext=c_ext / area,
        q_abs=c_abs / area,
        q_sca=c_sca / area,
        cells=polarizations[0].system.n,
        spacing_nm=geometry.cells.spacing,
        iterations=sum(p.iterations for p in polarizations),
        residual=max(p.residual for p in polarizations),
        status=status,
        c_ext_solver_error_nm2=float(errors[0]),
        c_abs_solver_error_nm2=float(errors[1]),
        c_sca_solver_error_nm2=float(errors[2]),
        balance=float(np.mean([each.balance for each in sections])),
        seconds=time.perf_counter() - started,
        message="" if status == "converged" else _advice(solutions),
    )


def _solutions(point: Point, geometry: Geometry, watch: Watch) -> list[Settled]:
    label = f"{point.wavelength:g} nm"
    watch(f"{label}: cells", 0.0)
    cells = geometry.cells
    media = media_of(point, cells.materials)
    watch(f"{label}: interactions", 0.0)
    matrix = system(
        cells,
        wavelength=point.wavelength,
        host=media.host,
        materials=dict(media.particle),
        precision=point.solver.precision,
        workers=Workers(point.solver.threads),
    )
    lights = lights_of(point)
    indices = media.relative_index(point.wavelength).values()
    steps = max(expected_steps(m, max(cells.shape), point.solver.tolerance) for m in indices)
    monitor = _monitor(label, steps * len(lights), watch)
    return [settle(matrix, x, tolerance=point.solver.tolerance, monitor=monitor) for x in lights]


def _monitor(label: str, steps: float, watch: Watch) -> Callable[[int, np.ndarray, float], bool]:
    """Return what the solver calls after every step, in every mirror sector."""
    taken = 0

    def after_step(_: int, __: np.ndarray, residual: float) -> bool:
        nonlocal taken
        taken += 1
        # How many steps there will be is known roughly: the bar slows down instead of overflowing.
        watch(f"{label}: step {taken}, residual {residual:.1e}", 1 - math.exp(-taken / steps))
        return False

    return after_step


def _failed(point: Point, geometry: Geometry, started: float, reason: str) -> Row:
    return Row(
        wavelength_nm=point.wavelength,
        spacing_nm=geometry.spacing,
        seconds=time.perf_counter() - started,
        message=reason,
    )


def _badness(status: str) -> int:
    return _STATUSES.index(status) if status in _STATUSES else len(_STATUSES)


def _advice(solutions: list[Settled]) -> str:
    worst = max(solutions, key=lambda each: each.polarization.residual)
    c_ext, c_abs = worst.sections.c_ext, worst.sections.c_abs
    ext, absorbed = 100 * worst.error[0] / c_ext, 100 * worst.error[1] / abs(c_abs)
    return (
        f"after {worst.polarization.iterations} steps the solver leaves C_ext uncertain by "
        f"{ext:.2g} %, C_abs by {absorbed:.2g} %"
    )
