"""Processes that compute points side by side."""

from __future__ import annotations

import contextlib
import math
import multiprocessing
import os
import signal
import threading
import time
from collections import deque
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from multiprocessing import resource_tracker
from multiprocessing.connection import Connection, wait
from multiprocessing.process import BaseProcess

from dda.study.engines import Begun, Done, Task
from dda.study.geometry import PROCESS_BYTES, Geometries
from dda.study.levels import Memory, Watch
from dda.study.memory import USABLE_SHARE, available_memory
from dda.study.points import Point
from dda.study.rows import Row
from dda.study.runner import Budget, Outcome, compute

# Libraries with threads of their own read these when they are loaded.
_THREADS = (
    "NUMBA_NUM_THREADS",
    "OMP_NUM_THREADS",
    "OPENBLAS_NUM_THREADS",
    "MKL_NUM_THREADS",
)
# A point whose worker was lost this often is given up.
_LOST = 2
# Seconds between two words of a worker on what it is doing, and between two looks at its parent.
_PERIOD, _LOOK = 0.5, 1.0


@dataclass
class _Worker:
    process: BaseProcess
    pipe: Connection
    chain: deque[Task] = field(default_factory=deque)
    task: Task | None = None
    part: float = 0.0

    @property
    def name(self) -> str:
        return f"process {self.process.pid}"


class Crew:
    """Worker processes, each with its own share of the cores.

    Parameters
    ----------
    workers : int
        Number of processes.
    threads : int
        Threads of each.

    Notes
    -----
    A chain stays with one worker, whose cells and solutions help the next point; when nothing
    else is left, half of another's chain is taken over. A worker that is lost (killed, out of
    memory) is replaced, and its point given to the new one.
    """

    def __init__(self, workers: int, threads: int) -> None:
        self.workers = workers
        self.threads = threads

    def run(self, chains: Sequence[Sequence[Task]], begun: Begun, watch: Watch) -> Iterator[Done]:
        """See `dda.study.engines.Engine`."""
        waiting = deque(deque(chain) for chain in chains if chain)
        left = sum(len(chain) for chain in waiting)
        if not left:
            return
        first = waiting[0][0]
        budget = Budget(first.point.limits.minutes, self.workers)
        lost: dict[int, int] = {}
        crew = [self._hire() for _ in range(min(self.workers, left))]
        try:
            while left:
                for worker in crew:
                    if worker.task is None and self._next(worker, crew, waiting):
                        assert worker.task is not None
                        begun(worker.task, worker.name)
                        seconds = budget.share(left)
                        with contextlib.suppress(OSError):  # it is found lost below
                            worker.pipe.send((self._shared(worker.task.point), seconds))
                ready = wait([worker.pipe for worker in crew], timeout=_LOOK)
                for number, worker in enumerate(list(crew)):
                    if worker.pipe not in ready:
                        continue
                    try:
                        said = worker.pipe.recv()
                    except (EOFError, OSError):
                        outcome = self._lost(worker, lost)
                        crew[number] = self._hire(worker.chain)
                    else:
                        outcome = said if isinstance(said, Outcome) else None
                        if outcome is None:
                            message, worker.part = said
                            watch(message, sum(w.part for w in crew))
                    if outcome is not None:
                        task, worker.task, worker.part = worker.task, None, 0.0
                        assert task is not None
                        left -= 1
                        yield Done(task, outcome, worker.name)
        finally:
            _dismiss(crew)

    def _shared(self, point: Point) -> Point:
        """Return a point that takes no more than a worker's share of the machine."""
        if point.limits.memory_gib is None:
            whole = int(USABLE_SHARE * available_memory())
        else:
            whole = int(point.limits.memory_gib * 2**30) - PROCESS_BYTES  # of this process
        gib = whole / self.workers / 2**30
        return point.at(
            point.wavelength,
            solver=point.solver.model_copy(update={"threads": self.threads}),
            limits=point.limits.model_copy(update={"memory_gib": gib}),
        )

    def _hire(self, chain: deque[Task] | None = None) -> _Worker:
        context = multiprocessing.get_context("spawn")
        ours, theirs = context.Pipe()
        before = {name: os.environ.get(name) for name in _THREADS}
        os.environ.update(dict.fromkeys(_THREADS, str(self.threads)))
        try:
            process = context.Process(target=_work, args=(theirs, os.getpid()), daemon=True)
            with _deaf():
                process.start()
        finally:
            for name, value in before.items():
                if value is None:
                    os.environ.pop(name, None)
                else:
                    os.environ[name] = value
        theirs.close()
        return _Worker(process, ours, deque() if chain is None else chain)

    def _next(self, worker: _Worker, crew: list[_Worker], waiting: deque[deque[Task]]) -> bool:
        """Give a worker its next task, if there is one."""
        if not worker.chain and waiting:
            worker.chain = waiting.popleft()
        if not worker.chain:
            longest = max(crew, key=lambda w: len(w.chain)).chain
            # the later half, or the only one: its owner is busy
            for _ in range((len(longest) + 1) // 2):
                worker.chain.appendleft(longest.pop())
        if not worker.chain:
            return False
        worker.task = worker.chain.popleft()
        return True

    def _lost(self, worker: _Worker, lost: dict[int, int]) -> Outcome | None:
        """Put the task of a lost worker back, or give it up."""
        worker.process.join(5)
        worker.pipe.close()
        task = worker.task
        if task is None:
            return None
        lost[task.number] = lost.get(task.number, 0) + 1
        if lost[task.number] < _LOST:
            worker.chain.appendleft(task)
            return None
        return Outcome(
            Row(
                wavelength_nm=task.point.wavelength,
                varied=task.point.varied,
                message=(
                    f"its worker process was lost {_LOST} times (exit code "
                    f"{worker.process.exitcode}): killed from outside, perhaps for want of memory"
                ),
            ),
            tries=_LOST,
        )


@contextlib.contextmanager
def _deaf() -> Iterator[None]:
    """Hold Ctrl-C back for a moment; a process that is started meanwhile never hears it."""
    if not hasattr(signal, "pthread_sigmask"):
        yield
        return
    resource_tracker.ensure_running()  # its start would let Ctrl-C through again
    before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, before)


def _dismiss(crew: Sequence[_Worker]) -> None:
    for worker in crew:
        worker.process.terminate()
    for worker in crew:
        worker.process.join(5)
        if worker.process.is_alive():
            worker.process.kill()
            worker.process.join(5)
        worker.pipe.close()


def _work(pipe: Connection, parent: int) -> None:
    """What a worker does: points in, outcomes out, until the pipe ends."""
    # Ctrl-C reaches all processes of a terminal; the parent decides what comes of it.
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    threading.Thread(target=_leave_with, args=(parent,), daemon=True).start()
    memory = Memory(Geometries())
    told = -math.inf

    def watch(message: str, part: float) -> None:
        nonlocal told
        if time.monotonic() - told > _PERIOD:
            told = time.monotonic()
            pipe.send((message, part))

    with contextlib.suppress(EOFError, BrokenPipeError, ConnectionError):
        while True:
            point, seconds = pipe.recv()
            pipe.send(compute(point, memory, watch, seconds))


def _leave_with(parent: int) -> None:
    """End this process when its parent has ended, whatever it is computing."""
    while os.getppid() == parent:
        time.sleep(_LOOK)
    os._exit(1)
