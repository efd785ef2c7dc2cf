"""Who computes the points of a run: this process, several processes, or a cluster."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from typing import Protocol

from dda.lattice import system
from dda.lattice.workers import Workers, available_threads
from dda.study.estimate import measure_step
from dda.study.geometry import PROCESS_BYTES, Geometries, usable_memory
from dda.study.levels import Memory, Watch
from dda.study.lights import lights_of
from dda.study.points import Point
from dda.study.prepare import Prepared
from dda.study.runner import Budget, Outcome, compute

# Seconds of computing that pay for starting processes, and what a cell and step of the solver,
# and a point besides, take on a machine of today: a guess that only decides whether to measure.
_WORTH, _NOMINAL, _POINT = 15.0, 1e-7, 0.05
# Cells across up to which refinement to a target should not want for memory.
_LIKELY = 64
# Processes must promise this much more than threads.
_GAIN = 1.1


@dataclass(frozen=True)
class Task:
    """A point to compute.

    Attributes
    ----------
    number : int
        Of the point in its study; previews have one of their own.
    identity : str
        Its fingerprint.
    point : Point
    """

    number: int
    identity: str
    point: Point


@dataclass(frozen=True)
class Done:
    """A task, its outcome and who computed it."""

    task: Task
    outcome: Outcome
    worker: str


#: Told which task is begun, and by whom.
Begun = Callable[[Task, str], None]


class Engine(Protocol):
    """Computes chains of tasks in any order; a chain's tasks help one another."""

    @property
    def workers(self) -> int:
        """How many points are computed at once."""
        ...

    def run(self, chains: Sequence[Sequence[Task]], begun: Begun, watch: Watch) -> Iterator[Done]:
        """Yield every task once, as soon as it is done."""
        ...


class Here:
    """Computes in this process, one point after the other, its threads all on one point."""

    workers = 1

    def __init__(self, geometries: Geometries | None = None) -> None:
        self._geometries = geometries or Geometries()

    def run(self, chains: Sequence[Sequence[Task]], begun: Begun, watch: Watch) -> Iterator[Done]:
        """See `Engine`."""
        memory = Memory(self._geometries)
        tasks = [task for chain in chains for task in chain]
        budget = Budget(tasks[0].point.limits.minutes if tasks else None)
        name = f"process {os.getpid()}"
        for number, task in enumerate(tasks):
            begun(task, name)
            seconds = budget.share(len(tasks) - number)
            yield Done(task, compute(task.point, memory, watch, seconds), name)


def choose(prepared: Prepared, chains: Sequence[Sequence[Task]]) -> Engine:
    """Return threads within a point or processes over points, whichever is quicker and fits.

    ``[solver] processes`` decides by itself. Otherwise a step of the solver is measured with one
    thread and with all: processes are taken where they promise more, if that many points fit in
    the memory at once and there is enough to do.

    Parameters
    ----------
    prepared : Prepared
    chains : sequence of sequence of Task
        What is left to do.
    """
    from dda.study.crew import Crew

    tasks = [task for chain in chains for task in chain]
    if not tasks:
        return Here(prepared.geometries)
    point = tasks[0].point
    cores = available_threads()
    threads = point.solver.threads
    if point.solver.processes is not None:
        processes = min(point.solver.processes, len(tasks))
        if processes == 1:
            return Here(prepared.geometries)
        return Crew(processes, threads or max(1, cores // processes))
    fit = usable_memory(point) // (_need(prepared) + PROCESS_BYTES)
    processes = min(cores // (threads or 1), fit, len(tasks))
    if processes < 2 or not worth_measuring(prepared, chains) or prepared.cells.n > 10**6:
        return Here(prepared.geometries)
    if threads is None:
        one, all_ = (_step(prepared, n) for n in (1, cores))
        if processes / one < _GAIN / all_:
            return Here(prepared.geometries)
    return Crew(int(processes), threads or max(1, cores // int(processes)))


def worth_measuring(prepared: Prepared, chains: Sequence[Sequence[Task]]) -> bool:
    """Whether so much is left that a second of measuring does not matter."""
    tasks = [task for chain in chains for task in chain]
    left = sum(prepared.weights[task.number % len(prepared.weights)] for task in tasks)
    return left * _NOMINAL + len(tasks) * _POINT > _WORTH


def _need(prepared: Prepared) -> int:
    """Bytes of a solve; of one that refinement may well come to where a target is asked for."""
    if prepared.points[0].accuracy.target is None:
        return prepared.memory
    geometry = prepared.geometry
    return max(prepared.memory, geometry.memory(geometry.size / _LIKELY))


def _step(prepared: Prepared, threads: int) -> float:
    """Seconds of a step of the solver on the first particle's cells."""
    point = prepared.points[len(prepared.points) // 2]
    matrix = system(
        prepared.cells,
        wavelength=point.wavelength,
        host=prepared.media.host,
        materials=dict(prepared.media.particle),
        precision=point.solver.precision,
        workers=Workers(threads),
    )
    light = lights_of(point, prepared.geometry, matrix.k)[0]
    return measure_step(matrix, light)
