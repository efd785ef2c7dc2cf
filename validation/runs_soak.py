"""A long sweep that is killed and made to fail, against one that is left in peace."""

from __future__ import annotations

import math
import os
import random
import signal
import sys
import tempfile
import time
from collections import Counter
from collections.abc import Mapping
from dataclasses import asdict
from pathlib import Path
from typing import Any

from dda.study.ledger import Ledger
from dda.study.point_file import damaged
from validation.injected import ALWAYS, ASKED, DEADLY, ONCE
from validation.results import Table, group, number, verdict
from validation.warm import Run, Warm

# One wavelength a particle: where solutions of neighbouring wavelengths are first guesses, answers
# depend on the order within the solver's tolerance.
STUDY = """\
name = "soak"
[particle]
shape = "sphere"
diameter = 20.0
material = "gold"
[host]
index = 1.33
[light]
wavelengths = [530]
[accuracy]
cells = 6
[solver]
threads = 1
processes = {processes}
[vary]
particle.diameter = {{from = 20, to = {last:.2f}, step = 0.02}}
"""
POINTS, QUICK = 2000, 60
TOLERANCE = 1e-10
#: Runs live this long on average before something happens to them, seconds.
LIFE = 12.0
_SEED = 2026


@group("soak", rank=98)
def soak(quick: bool) -> Table:
    """A sweep that is killed and made to fail all the time, against an undisturbed one."""
    points, life = (QUICK, 3.0) if quick else (POINTS, LIFE)
    text = f"""
{points} gold spheres, 6 cells across, computed in runs that are ended at random times (on average
after {life:g} s): the whole process group or the parent alone killed with SIGKILL, Ctrl-C, or a
worker killed, which the run must survive. One process and two take turns. The usual solver fails at
{100 * ALWAYS:g} % of the lattices in every run, so that another one takes over; {100 * ONCE:g} % of
the lattices fail in one process with every solver (as a failed computation, want of memory, or a
mistake of the program), and {100 * DEADLY:g} % kill the worker that computes them. After each end
every answer that was there before must still be there, with its file whole. At the end
`--again` without these failures must lead to the numbers of an undisturbed run: all of the ledger
but times, relative difference at most {TOLERANCE:g} (of errors: relative to the cross section).
"""
    with tempfile.TemporaryDirectory() as place, Warm("validation.injected") as warm:
        folder = Path(place)
        studies = {}
        for processes in (1, 2):
            studies[processes] = folder / f"{processes}.toml"
            last = 20 + 0.02 * (points - 1)
            studies[processes].write_text(STUDY.format(processes=processes, last=last))
        started = time.monotonic()
        peaceful = warm.start(["run", studies[2], "--out", folder / "peace"], folder / "said")
        code = peaceful.wait()
        took = time.monotonic() - started
        if code != 0:
            raise RuntimeError(f"the undisturbed run ended with {code}: {peaceful.said()}")
        trouble = _Trouble(warm, studies, folder, points, life)
        trouble.go()
        with Ledger(folder / "peace") as one, Ledger(folder / "trouble") as other:
            difference = _difference(_numbers(one), _numbers(other))
            finished = other.counts()
    count = trouble.count
    rows = [
        ["points finished", f"{finished.get('converged', 0)} of {points}", f"all {points}",
         verdict(finished == {"converged": points})],
        ["runs", str(count["runs"]), "-", "-"],
        ["group killed / parent alone killed / Ctrl-C / worker killed",
         " / ".join(str(count[k]) for k in ("group", "parent", "interrupt", "worker")), "-", "-"],
        ["failed points that were computed again", str(count["failed"]), "-", "-"],
        ["workers lost by themselves, their points given up", str(count["given up"]), "-", "-"],
        ["answers lost", str(count["lost"]), "0", verdict(count["lost"] == 0)],
        ["files not whole", str(count["damaged"]), "0", verdict(count["damaged"] == 0)],
        ["exit codes that are wrong", str(count["wrong"]), "0", verdict(count["wrong"] == 0)],
        ["largest relative difference", number(difference, 2), f"{TOLERANCE:g}",
         verdict(difference <= TOLERANCE)],
        ["undisturbed run, s", f"{took:.0f}", "-", "-"],
    ]  # fmt: skip
    return Table("Soak: kills and failures", text, ("what", "found", "allowed", "verdict"), rows)


class _Trouble:
    """Runs a study to its end through all kinds of trouble."""

    def __init__(
        self, warm: Warm, studies: Mapping[int, Path], folder: Path, points: int, life: float
    ) -> None:
        self._warm, self._studies, self._folder = warm, studies, folder
        self._points = points
        self._life = life
        self._out = folder / "trouble"
        self._dice = random.Random(_SEED)
        self._known: set[str] = set()
        self.count: Counter[str] = Counter()

    def go(self) -> None:
        """Run, disturb and check until all is finished."""
        while len(self._known) < 0.98 * self._points:
            self._once()
        for _ in range(5):  # what failed, and what is left, in peace
            run = self._start("--again", **{ASKED: "no"})
            code = run.wait()
            self._check()
            if code == 0:
                return
        self._wrong(run, code)

    def _once(self) -> None:
        again = ["--again"] if self._dice.random() < 0.3 else []
        run = self._start(*again, **{ASKED: "yes"})
        end = self._dice.choice(("group", "group", "parent", "interrupt"))
        self._wait(run, self._dice.expovariate(1 / self._life))
        if self._dice.random() < 0.5 and (workers := run.workers()):
            os.kill(self._dice.choice(workers), signal.SIGKILL)
            self.count["worker"] += 1
            self._wait(run, self._dice.expovariate(1 / self._life))
        number = signal.SIGINT if end == "interrupt" else signal.SIGKILL
        run.signal(number, group=end != "parent")
        code = run.wait()
        if code in (-signal.SIGKILL, 130):
            self.count[end] += 1
        elif code not in (0, 1):  # finished before, perhaps with failed points
            self._wrong(run, code)
        # a worker that is about to start when its parent is killed says so
        if code != -signal.SIGKILL and "Traceback" in run.said():
            self._wrong(run, code)
        self._check()

    def _start(self, *options: str, **environment: str) -> Run:
        self.count["runs"] += 1
        study = self._studies[1 + self.count["runs"] % 2]
        words = ["run", study, "--out", self._out, *options]
        said = self._folder / f"said {self.count['runs']}"
        return self._warm.start(words, said, **environment)

    def _wrong(self, run: Run, code: int) -> None:
        self.count["wrong"] += 1
        print(f"exit code {code}: {run.said()}", file=sys.stderr)

    def _wait(self, run: Run, seconds: float) -> None:
        end = time.monotonic() + seconds
        while time.monotonic() < end and run.alive():
            time.sleep(0.02)

    def _check(self) -> None:
        if not (self._out / "ledger.sqlite").exists():
            return
        try:
            ledger = Ledger(self._out)
        except ValueError:  # it was ended before the first word in the ledger
            self.count["lost"] += len(self._known)
            return
        with ledger:
            statuses = ledger.known()
            now = {identity for identity, status in statuses.items() if status != "failed"}
            self.count["lost"] += len(self._known - now)
            self.count["damaged"] += len(damaged(self._out, ledger.files()))
            failed = ledger.doubtful(self._points, failed=True)
            self.count["failed"] = max(self.count["failed"], len(failed))
            given_up = sum("was lost 2 times" in message for _, _, message in failed)
            self.count["given up"] = max(self.count["given up"], given_up)
            self._known |= now


def _numbers(ledger: Ledger) -> list[dict[str, Any]]:
    rows = [asdict(row) for _, row in ledger.rows()]
    for row in rows:
        row.pop("seconds")
    return rows


def _difference(one: list[dict[str, Any]], other: list[dict[str, Any]]) -> float:
    """The largest relative difference; infinity where something is there in one of them only.

    Errors count relative to their cross sections, and the balance as it is: both are differences
    of large numbers.
    """
    if len(one) != len(other):
        return math.inf
    largest = 0.0
    for a, b in zip(one, other, strict=True):
        for key, value in a.items():
            if value == b[key] or (value != value and b[key] != b[key]):
                continue
            if not isinstance(value, float):
                return math.inf
            largest = max(largest, abs(value - b[key]) / _scale(a, key))
    return largest


def _scale(row: dict[str, Any], key: str) -> float:
    if key == "balance":
        return 1.0
    return abs(row[f"{key[:5]}_nm2" if key.endswith("_error_nm2") else key]) or math.inf
