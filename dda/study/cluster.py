"""Points computed on a cluster, by Dask distributed."""

from __future__ import annotations

import contextlib
import logging
import threading
from collections import deque
from collections.abc import Iterator, Sequence
from concurrent.futures import CancelledError
from typing import Any

from dda.errors import ComputationError, InputError
from dda.lattice.workers import available_threads
from dda.study.engines import Begun, Done, Task
from dda.study.geometry import Geometries
from dda.study.identity import ANSWERS
from dda.study.levels import Memory, Watch
from dda.study.points import Point
from dda.study.rows import Row
from dda.study.runner import Budget, Outcome, compute

#: Given instead of an address: workers on this machine.
LOCAL = "local"
# Points at the scheduler for each thread of a worker: enough that none waits for the next one.
_AHEAD = 2
# Seconds between two looks, and until a scheduler must have answered.
_LOOK, _ANSWER = 1.0, 15

_GONE = "the connection to the scheduler of the cluster is lost"

_here = threading.local()


class Cluster:
    """Computes points on the workers of a Dask scheduler.

    Parameters
    ----------
    address : str
        Of the scheduler, "tcp://host:port", or "local" for workers on this machine.

    Raises
    ------
    InputError
        Dask is not installed, nothing answers at the address, or a worker has other versions.

    Notes
    -----
    Only this process writes the run folder. A worker may die and another come at any time: its
    points are computed elsewhere. Mesh and image files must lie at the same path on all machines.
    """

    def __init__(self, address: str) -> None:
        try:
            from distributed import Client, LocalCluster
        except ImportError:
            raise InputError(
                'a cluster needs Dask; install it with python -m pip install "motelight[cluster]"'
            ) from None
        _quiet()
        self._local: Any = None
        if address == LOCAL:
            self._local = LocalCluster(
                n_workers=available_threads(), threads_per_worker=1, dashboard_address=None
            )
        try:
            self._client = Client(self._local or address, timeout=_ANSWER)
        except (OSError, ValueError) as error:
            raise InputError(
                f"--scheduler {address}: no Dask scheduler answers there ({error}); give an "
                f'address such as tcp://host:8786, or "{LOCAL}"'
            ) from None
        self._check_versions(address)

    @property
    def workers(self) -> int:
        """Threads of all workers at the moment: each computes a point."""
        return max(1, sum(self._client.nthreads().values()))

    def run(self, chains: Sequence[Sequence[Task]], begun: Begun, watch: Watch) -> Iterator[Done]:
        """See `dda.study.engines.Engine`."""
        from distributed import wait

        waiting = deque(task for chain in chains for task in chain)
        left = len(waiting)
        budget = Budget(waiting[0].point.limits.minutes if waiting else None, self.workers)
        tasks: dict[Any, Task] = {}
        try:
            while left:
                while waiting and len(tasks) < _AHEAD * self.workers:
                    task = waiting.popleft()
                    begun(task, "cluster")
                    future = self._client.submit(
                        _compute, task.point, budget.share(left), key=task.identity, pure=False
                    )
                    tasks[future] = task
                watch(f"{len(tasks)} points on {len(self._client.nthreads())} workers", 0.0)
                self._check_alive()
                try:
                    ready = wait(list(tasks), timeout=_LOOK, return_when="FIRST_COMPLETED").done
                except TimeoutError:
                    continue
                self._check_alive()
                for future in ready:
                    task = tasks.pop(future)
                    left -= 1
                    outcome, worker = _result(future, task)
                    yield Done(task, outcome, worker)
        except (OSError, CancelledError):  # all futures are cancelled when a scheduler is lost
            raise ComputationError(_GONE) from None
        finally:
            self._close(list(tasks))

    def _close(self, futures: list[Any]) -> None:
        with contextlib.suppress(OSError, TimeoutError):  # a scheduler that is gone
            self._client.cancel(futures)
        self._client.close()
        if self._local is not None:
            self._local.close()

    def _check_alive(self) -> None:
        if self._client.status != "running":
            raise ComputationError(_GONE)

    def _check_versions(self, address: str) -> None:
        here = _version()
        try:
            found = self._client.run(_version)
        except Exception as error:  # whatever a worker without the program raises
            self._client.close()
            raise InputError(
                f"--scheduler {address}: its workers cannot load this program ({error}); install "
                f"version {here[0]} for them"
            ) from None
        for worker, there in found.items():
            if there != here:
                self._client.close()
                raise InputError(
                    f"--scheduler {address}: {worker} has version {there[0]}, this is {here[0]}; "
                    "answers of different versions are not mixed"
                )


def _quiet() -> None:
    """Leave unsaid what the cluster logs of lost workers: their points are computed elsewhere."""
    for name in list(logging.root.manager.loggerDict):
        if name.partition(".")[0] == "distributed":
            logging.getLogger(name).setLevel(logging.CRITICAL + 1)


def _version() -> tuple[str, int]:
    from importlib.metadata import version

    return version("motelight"), ANSWERS


def _compute(point: Point, seconds: float) -> tuple[Outcome, str]:
    """Compute a point on a worker; its thread keeps cells and solutions for the next one."""
    from distributed import get_worker

    worker = get_worker()
    if not hasattr(_here, "memory"):
        _here.memory = Memory(Geometries())
    threads = point.solver.threads or max(1, available_threads() // worker.state.nthreads)
    solver = point.solver.model_copy(update={"threads": threads})
    outcome = compute(point.at(point.wavelength, solver=solver), _here.memory, _nothing, seconds)
    return outcome, str(worker.address)


def _nothing(message: str, part: float) -> None:
    """Nobody watches a worker."""


def _result(future: Any, task: Task) -> tuple[Outcome, str]:
    try:
        return future.result()
    except CancelledError:
        raise
    except Exception as error:  # KilledWorker, or whatever the cluster brings up
        reason = f"lost on the cluster: {type(error).__name__}: {error}"
        row = Row(task.point.wavelength, varied=task.point.varied, message=reason)
        return Outcome(row), "cluster"
