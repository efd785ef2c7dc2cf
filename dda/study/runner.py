"""Points in, rows out."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterable, Iterator

import numpy as np

from dda.errors import ComputationError
from dda.lattice import Polarization, solve, system
from dda.lattice.workers import Workers
from dda.light import PlaneWave, plane_wave, transverse
from dda.response import cross_sections
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
    responses = [cross_sections(solution) for solution in solutions]
    c_ext, c_abs, c_sca = (
        float(np.mean([getattr(r, name) for r in responses]))
        for name in ("c_ext", "c_abs", "c_sca")
    )
    area = responses[0].area
    status = max((s.status for s in solutions), key=_badness)
    return Row(
        wavelength_nm=point.wavelength,
        c_ext_nm2=c_ext,
        c_abs_nm2=c_abs,
        c_sca_nm2=c_sca,
        q_ext=c_ext / area,
        q_abs=c_abs / area,
        q_sca=c_sca / area,
        cells=solutions[0].system.n,
        spacing_nm=geometry.cells.spacing,
        iterations=sum(s.iterations for s in solutions),
        residual=max(s.residual for s in solutions),
        status=status,
        balance=float(np.mean([r.balance for r in responses])),
        seconds=time.perf_counter() - started,
        message="" if status == "converged" else _advice(solutions, point),
    )


def _solutions(point: Point, geometry: Geometry, watch: Watch) -> list[Polarization]:
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
    solutions = []
    for number, light in enumerate(lights):
        monitor = _monitor(label, number / len(lights), len(lights), point, watch)
        solutions.append(solve(matrix, light, tolerance=point.solver.tolerance, monitor=monitor))
    return solutions


def _monitor(
    label: str, done: float, solves: int, point: Point, watch: Watch
) -> Callable[[int, np.ndarray, float], bool]:
    """Return what the solver calls after every step; residuals fall about exponentially."""
    target = np.log10(point.solver.tolerance)

    def after_step(step: int, _: np.ndarray, residual: float) -> bool:
        part = float(np.clip(np.log10(max(residual, 1e-300)) / target, 0, 1))
        watch(f"{label}: step {step}, residual {residual:.1e}", done + part / solves)
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


def _advice(solutions: list[Polarization], point: Point) -> str:
    worst = max(solutions, key=lambda s: s.residual)
    return (
        f"residual {worst.residual:.1e} after {worst.iterations} steps, "
        f"{point.solver.tolerance:.0e} asked for"
    )
