"""Who computes: this process in order, or several where that is quicker and fits."""

import os
from dataclasses import replace
from pathlib import Path

import pytest

from dda.study import engines
from dda.study.crew import Crew
from dda.study.engines import Here, Task, choose
from dda.study.prepare import prepare
from dda.study.reader import study_from_text
from tests.sweeps import SWEEP


def _prepared(*changes, points=3):
    text = SWEEP.replace("TO", f"{20 + 0.5 * (points - 1):g}").replace("threads = 1\n", "")
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    return prepare(study_from_text(text, Path("study.toml")))


def _chains(prepared):
    return [
        [Task(n, prepared.identities[n], prepared.points[n]) for n in chain]
        for chain in prepared.chains
    ]


def test_this_process_computes_every_task_once_and_in_order():
    prepared = _prepared(("wavelengths = [530]", "wavelengths = [520, 530, 540]"), points=2)
    begun, watched = [], []
    chains = _chains(prepared)
    tasks = [task for chain in chains for task in chain]
    engine = Here(prepared.geometries)
    assert engine.workers == 1
    found = list(
        engine.run(
            chains,
            lambda task, worker: begun.append((task.number, worker)),
            lambda message, part: watched.append(part),
        )
    )
    assert [done.task for done in found] == tasks
    assert [number for number, _ in begun] == [task.number for task in tasks]
    assert {worker for _, worker in begun} == {f"process {os.getpid()}"}
    assert all(done.outcome.row.converged for done in found)
    assert all(0 <= part <= 1 for part in watched)
    assert list(engine.run([], None, None)) == []


def test_one_point_that_fails_leaves_the_others(monkeypatch):
    from dda.study import levels

    settle = levels.settle

    def failing(matrix, light, **options):
        if matrix.wavelength == 530:
            raise RuntimeError("nobody expected this")
        return settle(matrix, light, **options)

    monkeypatch.setattr(levels, "settle", failing)
    prepared = _prepared(("wavelengths = [530]", "wavelengths = [520, 530, 540]"), points=1)
    found = Here().run(_chains(prepared), lambda *_: None, lambda *_: None)
    rows = {done.outcome.row.wavelength_nm: done.outcome.row for done in found}
    assert [rows[w].status for w in (520, 530, 540)] == ["converged", "failed", "converged"]
    assert "RuntimeError: nobody expected this" in rows[530].message


@pytest.fixture
def cores(monkeypatch):
    """Four cores, and a step of the solver that takes as long as one says."""

    def use(one, all_, count=4):
        monkeypatch.setattr(engines, "available_threads", lambda: count)
        monkeypatch.setattr(engines, "_step", lambda _, threads: one if threads == 1 else all_)

    return use


def _long(prepared):
    """The same, with so much to do that processes may pay."""
    return replace(prepared, weights=tuple(1e10 for _ in prepared.weights))


def test_the_user_may_say_how_many_processes_there_are(cores):
    cores(1.0, 1.0)
    one = _prepared(("[solver]", "[solver]\nprocesses = 1"))
    assert isinstance(choose(one, _chains(one)), Here)
    many = _prepared(("[solver]", "[solver]\nprocesses = 8"))
    crew = choose(many, _chains(many))
    assert isinstance(crew, Crew)
    assert (crew.workers, crew.threads) == (3, 1)  # no more than there are points
    two = _prepared(("[solver]", "[solver]\nprocesses = 2"))
    assert (choose(two, _chains(two)).workers, choose(two, _chains(two)).threads) == (2, 2)
    own = _prepared(("[solver]", "[solver]\nprocesses = 2\nthreads = 3"))
    assert choose(own, _chains(own)).threads == 3


def test_what_is_quicker_is_taken(cores):
    prepared = _long(_prepared(points=8))
    cores(one=1.0, all_=0.9)  # four threads hardly help
    crew = choose(prepared, _chains(prepared))
    assert isinstance(crew, Crew)
    assert (crew.workers, crew.threads) == (4, 1)
    cores(one=1.0, all_=0.25)  # they help as much as there are of them
    assert isinstance(choose(prepared, _chains(prepared)), Here)


def test_little_to_do_is_done_here(cores):
    cores(one=1.0, all_=1.0)
    prepared = _prepared()
    assert isinstance(choose(prepared, _chains(prepared)), Here)
    assert isinstance(choose(_long(prepared), []), Here)
    assert isinstance(choose(_long(prepared), _chains(prepared)[:1]), Here)


def test_processes_that_do_not_fit_in_the_memory_are_not_taken(cores, monkeypatch):
    cores(one=1.0, all_=1.0)
    prepared = _long(_prepared(points=8))
    fits = prepared.memory + engines.PROCESS_BYTES
    for count, workers in ((1, 1), (2, 2), (3, 3), (100, 4)):
        monkeypatch.setattr(engines, "usable_memory", lambda _, n=count: n * fits + 1)
        assert choose(prepared, _chains(prepared)).workers == workers


def test_one_core_computes_here(cores):
    cores(one=1.0, all_=1.0, count=1)
    prepared = _long(_prepared(points=8))
    assert isinstance(choose(prepared, _chains(prepared)), Here)
