"""Runs of ``dda`` that start at once: a process that has everything imported, and forks.

Each run is a process of its own, leader of its own process group, to be killed at will. The warm
process itself, ``python -m validation.warm``, has one thread and solves nothing: it may fork.
"""

from __future__ import annotations

import contextlib
import importlib
import json
import os
import signal
import subprocess
import sys
import time
import tomllib
import traceback
from collections.abc import Callable, Sequence
from pathlib import Path
from types import TracebackType

ROOT = Path(__file__).parents[1]
_PATCH = "WARM_PATCH"
# Libraries whose threads do not survive a fork are kept from having any.
_FORKS = {
    "OPENBLAS_NUM_THREADS": "1",
    "NUMBA_NUM_THREADS": "1",
    "NUMBA_THREADING_LAYER": "workqueue",
}
# Not solved: solving starts threads, and a process with threads must not fork.
_STUDY = """
name = "warm"
particle = {shape = "sphere", diameter = 20.0, material = "gold"}
host = {index = 1.33}
light = {wavelengths = [530]}
accuracy = {cells = 6}
"""


class Warm:
    """The warm process; a context.

    Parameters
    ----------
    patch : str
        Module whose function ``patch()`` is called in every run before it begins, such as one
        that injects failures; "" for none.
    """

    def __init__(self, patch: str = "") -> None:
        self._process = subprocess.Popen(
            [sys.executable, "-m", "validation.warm", patch],
            cwd=ROOT,
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            text=True,
            env={**os.environ, **_FORKS},
        )

    def __enter__(self) -> Warm:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        value: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        assert self._process.stdin is not None
        self._process.stdin.close()
        self._process.wait()

    def start(self, arguments: Sequence[str | Path], said: Path, **environment: str) -> Run:
        """Start ``dda`` with arguments; what it prints goes to a file."""
        words = [str(argument) for argument in arguments]
        pid = self._ask(arguments=words, said=str(said), environment=environment)
        return Run(self, pid, said)

    def _ask(self, **what: object) -> int:
        assert self._process.stdin is not None
        assert self._process.stdout is not None
        self._process.stdin.write(json.dumps(what) + "\n")
        self._process.stdin.flush()
        return int(self._process.stdout.readline())


class Run:
    """One run of ``dda``; ``pid`` is the process and its group."""

    def __init__(self, warm: Warm, pid: int, said: Path) -> None:
        self._warm = warm
        self.pid = pid
        self._said = said
        self.started = time.monotonic()

    def signal(self, number: int, group: bool = True) -> None:
        """Send a signal to the process, or to its workers as well."""
        (os.killpg if group else os.kill)(self.pid, number)

    def wait(self) -> int:
        """Return the exit code, minus the signal's number if one ended it."""
        return self._warm._ask(wait=self.pid)

    def kill_after(self, seconds: float) -> int:
        """Kill the group when the run is so old, and return the exit code."""
        time.sleep(max(0.0, self.started + seconds - time.monotonic()))
        self.signal(signal.SIGKILL)
        return self.wait()

    def until(self, condition: Callable[[], bool], most: float = 60.0) -> None:
        """Wait until something is so; raise TimeoutError if it does not come, or the run ended."""
        deadline = time.monotonic() + most
        while not condition():
            if time.monotonic() > deadline or not (alive(self.pid) or condition()):
                raise TimeoutError(self.said())
            time.sleep(0.005)

    def alive(self) -> bool:
        """Whether it has not ended."""
        return alive(self.pid)

    def workers(self) -> list[int]:
        """Worker processes of the run (Linux)."""
        children = Path(f"/proc/{self.pid}/task/{self.pid}/children").read_text().split()
        return [int(pid) for pid in children if _is_worker(int(pid))]

    def said(self) -> str:
        """All that was printed so far."""
        return self._said.read_text(encoding="utf-8") if self._said.exists() else ""


def alive(pid: int) -> bool:
    """Whether a process is there and has not ended (Linux; elsewhere only whether it is there)."""
    try:
        return Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()[0] != "Z"
    except OSError:
        return False if Path("/proc/self").exists() else _exists(pid)


def _exists(pid: int) -> bool:
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return False
    return True


def _is_worker(pid: int) -> bool:
    try:
        command = Path(f"/proc/{pid}/cmdline").read_text()
    except OSError:  # it has just ended
        return False
    return "spawn_main" in command and "resource_tracker" not in command


def _serve(patch: str) -> None:
    import h5py  # noqa: F401
    import matplotlib.figure  # noqa: F401

    import dda.cli
    import dda.report.folder
    import dda.study.prepare
    from dda.study.reader import study_from_tables

    tables = tomllib.loads(_STUDY)
    dda.study.prepare.prepare(study_from_tables(tables, Path("warm.toml")))  # loads kernels
    for line in sys.stdin:
        asked = json.loads(line)
        if "wait" in asked:
            print(os.waitstatus_to_exitcode(os.waitpid(asked["wait"], 0)[1]), flush=True)
            continue
        pid = os.fork()
        if pid:
            with contextlib.suppress(OSError):  # the child was quicker
                os.setpgid(pid, pid)
            print(pid, flush=True)
            continue
        code = 70
        try:
            os.setpgid(0, 0)
            said = os.open(asked["said"], os.O_WRONLY | os.O_CREAT | os.O_TRUNC)
            os.dup2(os.open(os.devnull, os.O_RDONLY), 0)
            os.dup2(said, 1)
            os.dup2(said, 2)
            os.environ.update(asked["environment"])
            if patch:
                os.environ[_PATCH] = patch  # workers import this module and see it
                importlib.import_module(patch).patch()
            code = dda.cli.main(asked["arguments"])
        except BaseException:
            traceback.print_exc()
        finally:
            sys.stdout.flush()
            sys.stderr.flush()
            os._exit(code)


if __name__ == "__main__":
    _serve(sys.argv[1])
elif __name__ == "__mp_main__" and _PATCH in os.environ:  # a worker of a patched run
    importlib.import_module(os.environ[_PATCH]).patch()
