"""Worker processes: the same answers, whatever becomes of a worker."""

import os
from pathlib import Path

import pytest

from dda.study.crew import Crew
from dda.study.engines import Here, Task
from dda.study.points import Point
from dda.study.prepare import prepare
from dda.study.reader import study_from_text
from tests.sweeps import SWEEP


class Deadly(Point):
    """A point that kills the process that reads it, the first time or always."""

    def __reduce__(self):
        path = self.folder / "died"
        if self.folder.name == "always" or not path.exists():
            return _die, (path,)
        return Point, (self.tables, self.wavelength, self.folder, self.varied)


def _die(path):
    path.touch()
    os._exit(9)


def _chains(*changes, points=3):
    text = SWEEP.replace("TO", f"{20 + 0.5 * (points - 1):g}")
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    prepared = prepare(study_from_text(text, Path("study.toml")))
    return [
        [Task(n, prepared.identities[n], prepared.points[n]) for n in chain]
        for chain in prepared.chains
    ]


def _run(engine, chains):
    begun = []
    found = list(
        engine.run(chains, lambda task, worker: begun.append(task.number), lambda *_: None)
    )
    return {done.task.number: done for done in found}, begun


def test_processes_give_what_one_process_gives():
    chains = _chains(("wavelengths = [530]", "wavelengths = [520, 530, 540]"))
    here, _ = _run(Here(), chains)
    crew, begun = _run(Crew(2, 1), chains)
    assert sorted(begun) == sorted(here) == sorted(crew) == list(range(9))
    assert {done.worker for done in crew.values()}.isdisjoint({f"process {os.getpid()}"})
    for number, done in here.items():
        one, other = done.outcome, crew[number].outcome
        assert other.row.status == "converged"
        assert other.row.varied == one.row.varied
        assert [level.cells for level in other.levels] == [level.cells for level in one.levels]
        # each leaves an error of 1e-3; first guesses come from other points, where a chain is split
        assert other.row.c_ext_nm2 == pytest.approx(one.row.c_ext_nm2, rel=1e-3)
        assert other.row.c_abs_nm2 == pytest.approx(one.row.c_abs_nm2, rel=1e-3)


def _deadly(task, folder):
    folder.mkdir()
    point = task.point
    return Task(
        task.number, task.identity, Deadly(point.tables, point.wavelength, folder, point.varied)
    )


def test_a_lost_worker_is_replaced_and_a_point_that_kills_twice_given_up(tmp_path):
    (one,), (two,), (three,) = _chains()
    chains = [[_deadly(one, tmp_path / "once")], [_deadly(two, tmp_path / "always"), three]]
    found, begun = _run(Crew(1, 1), chains)
    assert begun == [0, 0, 1, 1, 2]
    assert [found[n].outcome.row.status for n in range(3)] == ["converged", "failed", "converged"]
    lost = found[1].outcome
    assert "worker process was lost 2 times (exit code 9)" in lost.row.message
    assert (lost.tries, lost.levels) == (2, ())
    assert lost.row.varied == {"particle.diameter": 20.5}


def test_nothing_to_do_starts_nothing(monkeypatch):
    monkeypatch.setattr(Crew, "_hire", lambda *_: pytest.fail("a process was started"))
    assert list(Crew(2, 1).run([], lambda *_: None, lambda *_: None)) == []


def test_a_watch_that_interrupts_ends_the_workers():
    import multiprocessing

    def interrupt(*_):
        raise KeyboardInterrupt

    run = Crew(1, 1).run(_chains(points=1), lambda *_: None, interrupt)
    with pytest.raises(KeyboardInterrupt):
        list(run)
    assert multiprocessing.active_children() == []
