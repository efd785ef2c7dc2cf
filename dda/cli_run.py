"""The command ``dda run``: checks, computes, keeps what is finished, says how it went."""

from __future__ import annotations

import argparse
import signal
import sys
import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

from dda.errors import ComputationError

if TYPE_CHECKING:
    from dda.report.folder import RunFolder
    from dda.study.engines import Engine
    from dda.study.prepare import Prepared
    from dda.study.reader import Study

OK, FAILED, INTERRUPTED = 0, 1, 130
#: Lines of changes and of damaged files that are printed at most.
MOST_LINES = 12
# Signals after which a run still writes its tables.
_ENDING = ("SIGINT", "SIGTERM", "SIGHUP")


def add_command(add: Callable[[str, Any, str], argparse.ArgumentParser]) -> None:
    """Add the command to the parser by a call of ``add(name, command, text)``."""
    sub = add("run", run, "compute a study, or go on with it where it stopped")
    sub.add_argument("study", type=Path, metavar="STUDY.toml|RUN")
    sub.add_argument("--out", type=Path, metavar="DIR", help="default: named after the study")
    sub.add_argument(
        "--again", action="store_true", help="compute points that failed or did not converge again"
    )
    sub.add_argument(
        "--reuse",
        type=Path,
        metavar="RUN",
        action="append",
        default=[],
        help="take finished points over from another run; may be given several times",
    )
    sub.add_argument("--scheduler", metavar="ADDRESS", help="of a Dask cluster, tcp://...")


def run(options: argparse.Namespace) -> int:
    """``dda run``."""
    from dda.report.folder import RunFolder
    from dda.report.plan_text import study_lines
    from dda.report.progress import working
    from dda.study.prepare import prepare

    study, out = _study_of(options)
    folder = RunFolder(out, study)
    folder.check()
    with working("checking the study and making the cells"):
        prepared = prepare(study)
    print("\n".join(study_lines(prepared)), flush=True)
    for figure in _cautions(prepared):
        print(figure, file=sys.stderr)
    with _Interruption() as interruption:
        try:
            folder.open(prepared, options.again, options.reuse)
            _tell_what_is_known(folder, prepared)
            engine = _engine(prepared, folder, options.scheduler)
            try:
                _solve(engine, prepared, folder, interruption.check)
            finally:
                folder.finish()
            _summarize(folder)
            near = _near(prepared, folder, options.debug)
        except KeyboardInterrupt:
            _summarize(folder)
            kept = _kept(folder, prepared)
            return _complain(f"interrupted; {kept}, the same command goes on", INTERRUPTED)
        except ComputationError as error:
            kept = _kept(folder, prepared)
            return _complain(f"{error}\ndda: {kept}; the same command goes on", FAILED)
        finally:
            folder.close()
    for complaint in _complaints(folder):
        print(f"dda: {complaint}", file=sys.stderr)
    return near or (OK if all(row.converged for row in folder.rows) else FAILED)


class _Interruption:
    """Turns Ctrl-C, a request to end and a closed terminal into a KeyboardInterrupt.

    An exception raised by a signal can vanish in a callback of a library; the flag stays, and
    `check` raises it again.
    """

    def __init__(self) -> None:
        self.asked = False
        self._before: dict[int, Any] = {}

    def __enter__(self) -> _Interruption:
        if threading.current_thread() is threading.main_thread():
            for name in _ENDING:
                number = getattr(signal, name, None)  # not every system has all of them
                # one that is ignored stays so: nohup, a job in the background
                if number is not None and signal.getsignal(number) != signal.SIG_IGN:
                    self._before[number] = signal.signal(number, self._ask)
        self._unraisable, sys.unraisablehook = sys.unraisablehook, self._without_interrupts
        return self

    def __exit__(self, *_: object) -> None:
        sys.unraisablehook = self._unraisable
        for number, handler in self._before.items():
            signal.signal(number, handler)

    def check(self) -> None:
        """Raise what was asked for."""
        if self.asked:
            raise KeyboardInterrupt

    def _ask(self, *_: object) -> None:
        self.asked = True
        raise KeyboardInterrupt

    def _without_interrupts(self, unraisable: Any) -> None:
        """Say nothing of an interruption that vanished: `check` raises it again."""
        if not issubclass(unraisable.exc_type, KeyboardInterrupt):
            self._unraisable(unraisable)


def _study_of(options: argparse.Namespace) -> tuple[Study, Path]:
    """The study and the folder it runs in; a run folder stands for the study it holds."""
    from dda.study.ledger import Ledger
    from dda.study.reader import read_study, study_from_text

    path = options.study
    if not path.is_dir():
        return read_study(path), options.out or Path(path.stem)
    with Ledger(path) as ledger:
        found, about = ledger.study(), ledger.about()
    if found is None:
        from dda.errors import InputError

        raise InputError(f"{path}: no study was begun in it")
    return study_from_text(found[0], Path(about["study file"])), options.out or path


def _tell_what_is_known(folder: RunFolder, prepared: Prepared) -> None:
    store = folder.store
    left = sum(len(chain) for chain in store.chains)
    if store.changes:
        print(f"\nchanged since the last run in {folder.path}:")
        _print_some(f"  {line}" for line in store.changes)
    if store.damage:
        print("dda: computed again, because their files are not whole:", file=sys.stderr)
        _print_some((f"  {line}" for line in store.damage), sys.stderr)
    if store.reused:
        print(
            f"\n{store.reused} of {len(prepared.points)} points are there already, {left} are left"
        )


def _print_some(lines: Iterator[str], file: Any = None) -> None:
    found = list(lines)
    for line in found[:MOST_LINES]:
        print(line, file=file)
    if len(found) > MOST_LINES:
        print(f"  and {len(found) - MOST_LINES} more", file=file)


def _engine(prepared: Prepared, folder: RunFolder, scheduler: str | None) -> Engine:
    from dda.study.engines import choose, worth_measuring
    from dda.study.estimate import POINT_BYTES
    from dda.study.store import space_for

    chains = folder.store.chains
    left = sum(len(chain) for chain in chains)
    caution = space_for(folder.path, left, POINT_BYTES)
    if caution:
        print(f"dda: caution: {caution}", file=sys.stderr)
    if scheduler is not None:
        from dda.study.cluster import Cluster

        return Cluster(scheduler)
    engine = choose(prepared, chains)
    if worth_measuring(prepared, chains):
        print(_foretold(engine, prepared, chains, folder), flush=True)
    return engine


def _foretold(engine: Engine, prepared: Prepared, chains: Any, folder: RunFolder) -> str:
    """Say who computes what is left and how long that may take, measured now."""
    from dda.report.progress import duration_text
    from dda.study.plan import cost_of

    cost, numbers = cost_of(prepared), [task.number for chain in chains for task in chain]
    part = sum(prepared.weights[n] for n in numbers if n < len(prepared.points))
    share = part / sum(prepared.weights) / engine.workers
    low, high = (duration_text(share * seconds) for seconds in cost.seconds_between)
    who = f"{engine.workers} processes" if engine.workers > 1 else "this process"
    return (
        f"\n{len(numbers)} points, computed by {who}: between {low} and {high}; "
        f"`dda status {folder.path}` knows better after a minute"
    )


def _solve(
    engine: Engine, prepared: Prepared, folder: RunFolder, check: Callable[[], None]
) -> None:
    """Compute what is left. What is finished is on disk, however this ends."""
    from dda.report.progress import ProgressBar

    chains = folder.store.chains
    count = len(prepared.points)
    weights = {  # a coarse answer takes an eighth or less of a whole one
        task.number: prepared.weights[task.number % count] / (1 if task.number < count else 8)
        for chain in chains
        for task in chain
    }
    mean = sum(weights.values()) / max(1, len(weights))
    shares = {number: weight / mean for number, weight in weights.items()}
    with ProgressBar(len(weights)) as bar:

        def watch(message: str, part: float) -> None:
            check()
            bar.watch(message, part)

        with _closing(engine.run(chains, folder.begin, watch)) as outcomes:
            for done in outcomes:
                folder.keep(done)
                bar.advance(shares[done.task.number])
                check()


@contextmanager
def _closing(outcomes: Any) -> Iterator[Any]:
    """End a generator now, not when it is collected: its processes end with it."""
    try:
        yield outcomes
    finally:
        outcomes.close()


def _kept(folder: RunFolder, prepared: Prepared) -> str:
    if not folder.opened:
        return "all points that were finished before are kept"
    return f"{len(folder.rows)} of {len(prepared.points)} points are kept"


def _summarize(folder: RunFolder) -> None:
    from dda.report.sweep_text import sweep_text
    from dda.report.table import spectrum_text

    if not folder.rows:
        return
    varied = any(row.varied for row in folder.rows)
    print()
    print(sweep_text(folder.rows) if varied else spectrum_text(folder.rows))
    print(f"\nwritten to {folder.path}: {', '.join(folder.files)}")


def _near(prepared: Prepared, folder: RunFolder, debug: bool) -> int:
    """Near fields, if they are asked for; the spectra are safe on disk whatever happens here."""
    if prepared.study.tables.near_field is None:
        return OK
    from dda.cli import report_error
    from dda.report.near_run import run_near

    code = OK
    for point, rows, path, title in folder.near_units(prepared):
        try:
            good = run_near(point, rows, prepared.geometries, path, title)
        except Exception as error:  # the other combinations go on
            if debug:
                raise
            code = max(code, report_error(error))
            where = f" of {title}" if point.varied else ""
            _complain(f"the near field{where} failed; the spectrum is kept", FAILED)
        else:
            folder.near_done(point, rows)
            code = code if good else max(code, FAILED)
    folder.gather_near(prepared)
    return code


def _cautions(prepared: Prepared) -> list[str]:
    from dda.study.plan import validity

    return [
        f"dda: caution: {figure.name} {figure.value}: {figure.remark}"
        for figure in validity(prepared)
        if not figure.good
    ]


def _complaints(folder: RunFolder) -> list[str]:
    """Return a line for the failed points and one for those that did not converge."""
    rows = folder.rows
    failed = [row for row in rows if not row.answered]
    coarse = [row for row in rows if row.status == "coarse"]
    doubtful = [
        row
        for row in rows
        if row.answered and not row.converged and row.status not in ("coarse", "preview")
    ]
    lines = []
    if failed:
        lines.append(f"no answer at {_places(failed)}: {failed[0].message}")
    if coarse:
        lines.append(
            f"the target was not reached at {_places(coarse)}; at {_place(coarse[0])} "
            f"{coarse[0].message}. The error bars hold all the same"
        )
    if doubtful:
        lines.append(
            f"the solver did not converge at {_places(doubtful)}: {doubtful[0].message} at "
            f"{_place(doubtful[0])}. These rows are marked in the table and ringed in "
            "the figure; do not rely on them"
        )
    return lines


def _places(rows: list[Any]) -> str:
    """Say where rows are, the first of them if there are many."""
    if not any(row.varied for row in rows) and len(rows) <= 40:
        return ", ".join(f"{row.wavelength_nm:g}" for row in rows) + " nm"
    shown = "; ".join(_place(row) for row in rows[:3])
    return shown if len(rows) <= 3 else f"{len(rows)} points ({shown}; ...)"


def _place(row: Any) -> str:
    at = ", ".join(f"{key} = {value}" for key, value in row.varied.items())
    return f"{row.wavelength_nm:g} nm" + (f" ({at})" if at else "")


def _complain(message: str, code: int) -> int:
    print(f"dda: {message}", file=sys.stderr)
    return code
