"""One point at several spacings: what refinement solves, and what it keeps for the next point."""

from __future__ import annotations

import math
import time
from collections.abc import Callable, Iterable
from dataclasses import dataclass, field

import numpy as np

from dda.accuracy import Level, Refined, refine_at, refine_to
from dda.lattice import System, system
from dda.lattice.workers import Workers
from dda.response import Settled, settle
from dda.response.averages import OrientationAverage
from dda.response.orientation import Tumbling, tumbling
from dda.study.estimate import expected_steps
from dda.study.geometry import Geometries, Geometry, kept_memory, usable_memory
from dda.study.lights import light_count, lights_of
from dda.study.media import Media, media_of
from dda.study.more import NOTHING_MORE, More
from dda.study.points import Point
from dda.study.recycling import Recycled, RecycledColumns
from dda.study.scattering import Scattered, of_average, of_direction, over_levels, partner

#: Called with a message and the part of the current point that is done, 0 to 1.
Watch = Callable[[str, float], None]
# Cells of a box below which one thread is quicker than two (measured: 1.1 to 1.6 times up to 24^3).
_FEW = 24**3
#: Order of the statuses from good to bad, as far as they are known; others are worse.
_STATUSES = ("converged", "limit", "stalled")


@dataclass
class Memory:
    """What neighbouring points share: cells, and solutions as first guesses.

    Attributes
    ----------
    geometries : Geometries
    solutions : Recycled
    """

    geometries: Geometries
    solutions: Recycled = field(default_factory=Recycled)


@dataclass(frozen=True, eq=False)
class Answer:
    """A refined point.

    Attributes
    ----------
    refined : Refined
    area : float
        pi r_eff^2, nm^2.
    balance : float
        Of the finest level, averaged over the polarizations.
    cells : int
        Of the finest level.
    more : More
        What else the study asked for, of the finest level.
    """

    refined: Refined
    area: float
    balance: float
    cells: int
    more: More = NOTHING_MORE


def answer(point: Point, memory: Memory, watch: Watch, seconds: float = math.inf) -> Answer:
    """Solve a point at the spacings that its accuracy asks for.

    Parameters
    ----------
    point : Point
    memory : Memory
    watch : callable
    seconds : float
        What refinement to a target may take.
    """
    geometry = memory.geometries.of(point)
    memory.solutions.only_for(point.geometry_key)
    memory.solutions.most_bytes = kept_memory(point)
    finest: list[tuple[float, float]] = []
    scattered: list[Scattered | None] = []

    def solve(across: float) -> Level:
        started = time.perf_counter()
        level = memory.geometries.level(geometry, across)
        if point.averaged:
            tumbled = _average(point, level, memory, watch)
            average = tumbled.average
            assert tumbled.t_matrix is not None
            scattered.append(of_average(point, average, tumbled.t_matrix))
            finest.append((average.area, average.c_abs + average.c_sca - average.c_ext))
            return _averaged_level(level, average, time.perf_counter() - started)
        solved = solutions(point, level, memory, watch, both=True)
        count = light_count(point)
        scattered.append(of_direction(point, solved, count))
        balance = float(np.mean([each.sections.balance for each in solved[:count]]))
        finest.append((solved[0].sections.area, balance))
        return _level(level, solved, count, time.perf_counter() - started)

    target = point.accuracy.target
    if target is None:
        across = geometry.size / geometry.spacing
        refined = refine_at(solve, across, geometry.size, coarser=geometry.coarser())
    else:
        usable = usable_memory(point)
        refined = refine_to(
            solve,
            target,
            geometry.size,
            ladder=geometry.ladder(),
            fits=lambda across: geometry.memory(geometry.size / across) <= usable,
            seconds=seconds,
        )
    area, balance = finest[-1]
    spacings = [level.spacing for level in refined.levels]
    more = over_levels(spacings, scattered, geometry.size, to_zero=target is not None)
    return Answer(refined, area, balance, refined.levels[-1].cells, more)


def worst(statuses: Iterable[str]) -> str:
    """Return the worst of some statuses of the solver."""
    return max(statuses, key=lambda s: _STATUSES.index(s) if s in _STATUSES else len(_STATUSES))


def solutions(
    point: Point, geometry: Geometry, memory: Memory, watch: Watch, *, both: bool = False
) -> list[Settled]:
    """Solve a point on one lattice, for every incident field of `lights_of`.

    With `both`, the other polarization follows where ``[scattering]`` needs it.
    """
    label = _label(point, geometry)
    matrix, media = _matrix(point, geometry, watch)
    cells = geometry.cells
    lights = lights_of(point, geometry, matrix.k)
    if both:
        lights = (*lights, *partner(point, lights))
    indices = media.relative_index(point.wavelength).values()
    tolerance = tolerance_of(point)
    steps = max(expected_steps(m, max(cells.shape), tolerance) for m in indices)
    monitor = _monitor(label, steps * len(lights), watch)
    out = []
    for number, light in enumerate(lights):
        key = (round(geometry.spacing, 9), point.tables.light.model_dump_json(), number, matrix.n)
        previous = memory.solutions.nearest(key, point.wavelength)
        settled = settle(
            matrix,
            light,
            tolerance=tolerance,
            previous=previous,
            monitor=monitor,
            method=point.solver.method,
        )
        memory.solutions.keep(key, point.wavelength, settled.polarization.p)
        out.append(settled)
    return out


def system_of(point: Point, geometry: Geometry, watch: Watch) -> System:
    """Return the system of a point on one lattice."""
    return _matrix(point, geometry, watch)[0]


def _label(point: Point, geometry: Geometry) -> str:
    return f"{point.wavelength:g} nm, {geometry.size / geometry.spacing:.0f} cells across"


def _matrix(point: Point, geometry: Geometry, watch: Watch) -> tuple[System, Media]:
    watch(f"{_label(point, geometry)}: cells", 0.0)
    cells = geometry.cells
    media = media_of(point, cells.materials)
    watch(f"{_label(point, geometry)}: interactions", 0.0)
    matrix = system(
        cells,
        wavelength=point.wavelength,
        host=media.host,
        materials=dict(media.particle),
        precision=point.solver.precision,
        workers=Workers(_threads(point, cells.shape)),
    )
    return matrix, media


def _threads(point: Point, shape: tuple[int, int, int]) -> int | None:
    """Threads of a solve; handing a small product to a second one takes longer than it saves."""
    if point.solver.threads is None and math.prod(shape) < _FEW:
        return 1
    return point.solver.threads


def _average(point: Point, geometry: Geometry, memory: Memory, watch: Watch) -> Tumbling:
    matrix, _ = _matrix(point, geometry, watch)
    label = _label(point, geometry)

    def columns(done: int, of: int) -> None:
        watch(f"{label}: multipole {done} of {of}", done / max(of, 1))

    lattice = (round(geometry.spacing, 9), matrix.n)
    known = RecycledColumns(memory.solutions, lattice, point.wavelength)
    return tumbling(matrix, tolerance=tolerance_of(point), memory=known, monitor=columns)


def _averaged_level(geometry: Geometry, average: OrientationAverage, seconds: float) -> Level:
    return Level(
        spacing=geometry.spacing,
        sections=(average.c_ext, average.c_abs, average.c_sca),
        solver_error=(average.c_ext_error, average.c_abs_error, average.c_sca_error),
        cells=geometry.cells.n,
        iterations=round(average.products),
        products=round(average.products),
        residual=math.nan,
        status=average.status,
        seconds=seconds,
    )


def tolerance_of(point: Point) -> float:
    """Return the relative error the solver may leave: a tenth of the target at most."""
    target = point.accuracy.target
    return point.solver.tolerance if target is None else min(point.solver.tolerance, target / 10)


def _level(geometry: Geometry, solved: list[Settled], count: int, seconds: float) -> Level:
    """A level from its solutions; the cross sections are the mean of the first `count`."""

    def mean(values: Iterable) -> tuple[float, float, float]:
        ext, absorbed, scattered = np.mean(list(values), axis=0)
        return float(ext), float(absorbed), float(scattered)

    polarizations = [each.polarization for each in solved]
    lights = solved[:count]
    return Level(
        spacing=geometry.spacing,
        sections=mean((s.sections.c_ext, s.sections.c_abs, s.sections.c_sca) for s in lights),
        solver_error=mean(s.error for s in lights),
        cells=polarizations[0].system.n,
        iterations=sum(p.iterations for p in polarizations),
        products=sum(p.products for p in polarizations),
        residual=max(p.residual for p in polarizations),
        status=worst(p.status for p in polarizations),
        seconds=seconds,
    )


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
