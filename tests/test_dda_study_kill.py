"""Runs that are killed, interrupted and robbed of their workers keep what is finished."""

import os
import random
import signal
import time

import pytest

from dda.study.ledger import Ledger
from dda.study.lock import holder_of
from dda.study.point_file import read_point
from tests.sweeps import finished, same_tables, sweep, table
from validation.warm import Warm, alive

pytestmark = pytest.mark.skipif(
    not hasattr(os, "fork"), reason="runs are started by fork, which this system does not have"
)

KILLS = 54
#: Points of the study that is killed again and again.
POINTS = 12


@pytest.fixture(scope="module")
def warm():
    with Warm() as process:
        yield process


@pytest.fixture(scope="module")
def undisturbed(warm, tmp_path_factory):
    """Study and table of a run that nobody disturbed."""
    folder = tmp_path_factory.mktemp("undisturbed")
    study = sweep(folder / "study.toml", POINTS)
    run = warm.start(["run", study, "--out", folder / "out"], folder / "said")
    assert run.wait() == 0, run.said()
    return study, table(folder / "out")


def _count(folder):
    """How many points are finished, while a run goes on."""
    try:
        with Ledger(folder) as ledger:
            return len(ledger.known())
    except ValueError:
        return 0


def test_kills_at_random_times_lose_nothing(warm, undisturbed, tmp_path):
    study, expected = undisturbed
    dice = random.Random(8)
    kills = began = 0
    moments = set()
    while kills < KILLS:
        out = tmp_path / f"run {began}"
        began += 1
        known = set()
        code = None
        while code != 0:
            run = warm.start(["run", study, "--out", out], tmp_path / "said")
            if kills % 3 == 0:  # while it begins
                code = run.kill_after(dice.uniform(0, 0.3))
            elif kills % 3 == 1:  # at any time
                code = run.kill_after(dice.uniform(0, 1.2))
            else:  # a little after some more points
                more = len(known) + dice.randint(1, 4)
                run.until(lambda more=more, out=out: _count(out) >= min(more, POINTS))
                code = run.kill_after(time.monotonic() - run.started + dice.uniform(0, 0.2))
            assert code in (0, -signal.SIGKILL), run.said()
            now = finished(out)
            assert now >= known
            known = now
            if (out / "spectrum.csv").exists():
                assert len(table(out)) <= len(known)
            if code:
                kills += 1
                moments.add(min(len(known), POINTS))
        same_tables(table(out), expected)
        assert len(known) == POINTS
        assert not list(out.glob("**/*.part"))
    assert {0, POINTS} <= moments  # before the first point, and after the last
    assert len(moments) > 5


def test_every_point_file_is_whole_after_a_kill(warm, undisturbed, tmp_path):
    study, _ = undisturbed
    run = warm.start(["run", study, "--out", tmp_path / "out"], tmp_path / "said")
    run.until(lambda: _count(tmp_path / "out") >= 3)
    run.kill_after(0)
    files = [*(tmp_path / "out").glob("points/*/*.h5")]
    assert len(files) >= 3
    for path in files:  # those too that no line in the ledger speaks of yet
        assert read_point(path)["levels/c_ext"].shape == (3,)
    assert holder_of(tmp_path / "out") is None


def test_a_ledger_cut_off_at_birth_is_begun_anew(warm, undisturbed, tmp_path):
    study, expected = undisturbed
    out = tmp_path / "out"
    out.mkdir()
    (out / "ledger.sqlite").touch()
    assert warm.start(["status", out], tmp_path / "said").wait() == 2
    assert "no study was begun" in (tmp_path / "said").read_text()
    run = warm.start(["run", study, "--out", out], tmp_path / "said")
    assert run.wait() == 0, run.said()
    same_tables(table(out), expected)


@pytest.mark.parametrize(
    ("number", "times", "processes"),
    [("SIGINT", 1, 1), ("SIGINT", 2, 1), ("SIGTERM", 1, 1), ("SIGINT", 2, 2), ("SIGTERM", 1, 2)],
)
def test_an_interrupted_run_says_what_is_kept_and_goes_on(
    warm, tmp_path, undisturbed, number, times, processes
):
    alone, expected = undisturbed
    study = sweep(
        tmp_path / "study.toml", POINTS, ("threads = 1", f"threads = 1\nprocesses = {processes}")
    )
    out = tmp_path / "out"
    run = warm.start(["run", study, "--out", out], tmp_path / "said")
    run.until(lambda: _count(out) >= 2)
    workers = run.workers()
    assert len(workers) == (processes if processes > 1 else 0)
    for _ in range(times):
        # a terminal sends Ctrl-C to all processes of the group
        run.signal(getattr(signal, number), group=number == "SIGINT")
        time.sleep(0.02)
    assert run.wait() == 130, run.said()
    said = run.said()
    assert "Traceback" not in said
    known = finished(out)
    assert 2 <= len(known) <= POINTS
    if times == 1:
        assert f"interrupted; {len(known)} of {POINTS} points are kept" in said
        assert len(table(out)) == len(known)
    assert not [pid for pid in workers if alive(pid)]
    # alone: that is quicker, and the number of processes is no part of what the points are
    run = warm.start(["run", alone, "--out", out], tmp_path / "said")
    assert run.wait() == 0, run.said()
    assert finished(out) >= known
    same_tables(table(out), expected)


def test_ctrl_c_while_the_workers_start_is_no_traceback(warm, tmp_path):
    study = sweep(tmp_path / "study.toml", POINTS, ("threads = 1", "threads = 1\nprocesses = 2"))
    run = warm.start(["run", study, "--out", tmp_path / "out"], tmp_path / "said")
    run.until(lambda: len(run.workers()) == 2)
    time.sleep(0.1)
    run.signal(signal.SIGINT)
    assert run.wait() == 130
    assert "Traceback" not in run.said()
    assert f"of {POINTS} points are kept" in run.said()


def test_workers_end_with_their_parent(warm, tmp_path):
    study = sweep(tmp_path / "study.toml", POINTS, ("threads = 1", "threads = 1\nprocesses = 2"))
    run = warm.start(["run", study, "--out", tmp_path / "out"], tmp_path / "said")
    run.until(lambda: _count(tmp_path / "out") >= 1)
    workers = run.workers()
    assert len(workers) == 2
    run.signal(signal.SIGKILL, group=False)
    run.wait()
    deadline = time.monotonic() + 15
    while any(map(alive, workers)):
        assert time.monotonic() < deadline
        time.sleep(0.05)


def test_a_killed_worker_is_replaced_and_its_point_computed(warm, undisturbed, tmp_path):
    _, expected = undisturbed
    study = sweep(tmp_path / "study.toml", POINTS, ("threads = 1", "threads = 1\nprocesses = 2"))
    out = tmp_path / "out"
    run = warm.start(["run", study, "--out", out], tmp_path / "said")
    run.until(lambda: _count(out) >= 1)
    victim = run.workers()[0]
    os.kill(victim, signal.SIGKILL)
    assert run.wait() == 0, run.said()
    same_tables(table(out), expected)
    with Ledger(out) as ledger:
        names = {ledger.answer(identity).worker for identity in ledger.known()}
    assert len(names) == 3 or f"process {victim}" not in names


def test_a_second_run_is_told_who_holds_the_folder(warm, undisturbed, tmp_path):
    study, expected = undisturbed
    out = tmp_path / "out"
    first = warm.start(["run", study, "--out", out], tmp_path / "said")
    first.until(lambda: _count(out) >= 1)
    first.signal(signal.SIGSTOP)  # so that it is there for sure
    second = warm.start(["run", study, "--out", out], tmp_path / "said too")
    assert second.wait() == 2
    assert f"process {first.pid} on " in second.said()
    first.signal(signal.SIGCONT)
    assert first.wait() == 0
    same_tables(table(out), expected)
