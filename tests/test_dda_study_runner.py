"""A point in, an outcome out: tried again with another solver, never an exception."""

import math
from pathlib import Path

import pytest

from dda.errors import ComputationError, InputError
from dda.study import levels, runner
from dda.study.geometry import Geometries
from dda.study.levels import Memory
from dda.study.points import points_of
from dda.study.reader import study_from_text
from dda.study.runner import Budget, compute
from tests.sweeps import SWEEP


def _point(method=None):
    text = SWEEP.replace("TO", "20")
    if method:
        text = text.replace("threads = 1", f'threads = 1\nmethod = "{method}"')
    return points_of(study_from_text(text, Path("study.toml")))[0]


def _compute(point):
    return compute(point, Memory(Geometries()), lambda message, part: None)


@pytest.fixture
def solver(monkeypatch):
    """Replace what solves: a function of the method that raises, or changes the options."""
    settle = levels.settle
    methods = []

    def use(what):
        def replaced(matrix, light, **options):
            methods.append(options["method"])
            return settle(matrix, light, **{**options, **(what(options["method"]) or {})})

        monkeypatch.setattr(levels, "settle", replaced)
        return methods

    return use


def test_a_good_point_is_computed_once(solver):
    methods = solver(lambda method: None)
    outcome = _compute(_point())
    assert (outcome.row.status, outcome.tries, outcome.row.message) == ("converged", 1, "")
    assert set(methods) == {"cocg"}
    assert len(outcome.levels) == outcome.row.levels == 3
    assert outcome.row.c_ext_nm2 == outcome.levels[-1].sections[0]
    assert outcome.row.varied == {"particle.diameter": 20}


@pytest.mark.parametrize(("method", "other"), [("cocg", "bicgstab"), ("bicgstab", "gmres")])
def test_a_point_that_fails_is_tried_with_another_solver(solver, method, other):
    def breaks(used):
        if used == method:
            raise ComputationError("it broke down")

    methods = solver(breaks)
    outcome = _compute(_point(method))
    assert (outcome.row.status, outcome.tries, outcome.row.message) == ("converged", 2, "")
    assert set(methods) == {method, other}


def test_a_point_that_does_not_converge_is_tried_with_another_solver(solver):
    solver(lambda method: {"limit": 2} if method == "cocg" else None)
    outcome = _compute(_point())
    assert (outcome.row.status, outcome.tries) == ("converged", 2)


def test_the_better_of_two_bad_tries_is_recorded_with_its_reason(solver):
    solver(lambda method: {"limit": 2 if method == "cocg" else 12})
    outcome = _compute(_point())
    assert outcome.row.status in ("limit", "stalled")
    assert outcome.tries == 2
    assert outcome.row.message.endswith("; with another solver (bicgstab) as well")
    assert "C_ext" in outcome.row.message
    solver(lambda method: {"limit": 2})
    worse = _compute(_point())
    assert outcome.row.c_ext_solver_error_nm2 < worse.row.c_ext_solver_error_nm2


def test_an_answer_that_did_not_converge_is_better_than_none(solver):
    def bad(method):
        if method == "bicgstab":
            raise ComputationError("it broke down")
        return {"limit": 2}

    solver(bad)
    outcome = _compute(_point())
    assert outcome.row.answered
    assert outcome.row.status in ("limit", "stalled")


@pytest.mark.parametrize(
    ("error", "tries", "said"),
    [
        (ComputationError("it broke down"), 2, "it broke down; with another solver (bicgstab)"),
        (FloatingPointError("overflow"), 2, "overflow; with another solver (bicgstab)"),
        (KeyError("x"), 2, "KeyError: 'x'; with another solver (bicgstab)"),
        (MemoryError(), 1, "out of memory"),
        (InputError("the gap is below one cell"), 1, "the gap is below one cell"),
    ],
)
def test_whatever_a_point_brings_up_is_recorded(solver, error, tries, said):
    def breaks(_):
        raise error

    solver(breaks)
    outcome = _compute(_point())
    assert (outcome.row.status, outcome.tries) == ("failed", tries)
    assert outcome.row.message.startswith(said)
    assert outcome.row.wavelength_nm == 530
    assert outcome.row.seconds > 0
    assert outcome.row.spacing_nm == pytest.approx(20 / 6)
    assert outcome.levels == ()


def test_a_particle_that_fails_is_recorded_too(monkeypatch):
    def broken(_):
        raise ValueError("no such body")

    monkeypatch.setattr("dda.study.geometry.build_particle", lambda *_: broken(0))
    row = _compute(_point()).row
    assert row.status == "failed"
    assert "no such body" in row.message
    assert math.isnan(row.spacing_nm)


def test_an_interruption_is_raised(solver):
    def stop(_):
        raise KeyboardInterrupt

    solver(stop)
    with pytest.raises(KeyboardInterrupt):
        _compute(_point())


def test_minutes_are_shared_out_over_what_is_left(monkeypatch):
    now = 100.0
    monkeypatch.setattr(runner.time, "perf_counter", lambda: now)
    assert Budget(None).share(10) == math.inf
    budget = Budget(2.0)
    assert budget.share(10) == 12
    now = 160.0
    assert budget.share(4) == 15
    assert budget.share(0) == 60
    now = 300.0
    assert budget.share(4) == 0
    now = 100.0
    assert Budget(2.0, workers=3).share(10) == 36
