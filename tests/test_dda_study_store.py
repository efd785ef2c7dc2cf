"""A run folder knows what is finished, whatever became of its files and of the study."""

from pathlib import Path

import pytest

from dda.accuracy import Level
from dda.errors import InputError
from dda.study.engines import Done
from dda.study.ledger import Ledger
from dda.study.lock import Lock
from dda.study.point_file import place_of
from dda.study.prepare import prepare
from dda.study.reader import study_from_text
from dda.study.rows import Row
from dda.study.runner import Outcome
from dda.study.store import Store, preview_points, space_for
from tests.sweeps import SWEEP

LEVEL = Level(2.0, (3.0, 2.0, 1.0), (0.1, 0.1, 0.1), 8, 5, 11, 1e-3, "converged", 0.5)


def _prepared(*changes, points=4, folder=Path()):
    text = SWEEP.replace("TO", f"{20 + 0.5 * (points - 1):g}")
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    return prepare(study_from_text(text, folder / "study.toml"))


def _done(task, status="converged"):
    """The made-up outcome of a task."""
    answers = {} if status == "failed" else {"c_ext_nm2": 3.0 + task.number, "spacing_nm": 2.0}
    row = Row(task.point.wavelength, status=status, varied=task.point.varied, **answers)
    return Done(task, Outcome(row, () if status == "failed" else (LEVEL,)), "process 1")


def _tasks(store):
    return [task for chain in store.chains for task in chain]


def _run(folder, prepared, statuses=None, **options):
    """Open a folder, finish the points (with a status a number), return the store."""
    with Store(folder, prepared, **options) as store:
        for task in _tasks(store):
            status = (statuses or {}).get(task.number, "converged")
            if status != "killed":
                store.keep(_done(task, status))
    return store


@pytest.fixture
def run(tmp_path):
    """A finished run."""
    folder = tmp_path / "run"
    folder.mkdir()
    _run(folder, _prepared())
    return folder


def test_a_new_folder_has_everything_left(tmp_path):
    with Store(tmp_path, _prepared()) as store:
        assert [task.number for task in _tasks(store)] == [0, 1, 2, 3]
        assert (store.reused, store.changes, store.damage) == (0, [], [])
        assert (store.ledger.about()["name"]) == "gold spheres"
        with pytest.raises(InputError, match="is running a study in it"):
            Store(tmp_path, _prepared())


def test_what_is_finished_is_not_computed_again(tmp_path):
    _run(tmp_path, _prepared(), {1: "killed", 3: "killed"})
    with Store(tmp_path, _prepared()) as store:
        assert [task.number for task in _tasks(store)] == [1, 3]
        assert (store.reused, store.changes) == (2, [])


def test_a_changed_study_names_the_changes_and_keeps_what_overlaps(run):
    changed = (
        ("index = 1.33", "index = 1.33\n[limits]\nminutes = 3"),
        ("from = 20", "from = 20.5"),
        ('"gold spheres"', '"other"'),
    )
    store = _run(run, _prepared(*changed, points=6))
    assert store.changes == [
        "name: gold spheres -> other",
        "vary.particle.diameter.from: 20 -> 20.5",
        "vary.particle.diameter.to: 21.5 -> 22.5",
        "limits.minutes: (none) -> 3",
    ]
    assert store.reused == 3
    again = _run(run, _prepared())
    assert "name: other -> gold spheres" in again.changes
    assert (again.reused, again.chains) == (4, [])


def test_other_versions_are_named(run, monkeypatch):
    monkeypatch.setattr("dda.study.store.version", lambda name: "99.0")
    store = _run(run, _prepared())
    assert any(line.startswith("numpy: ") and "-> 99.0" in line for line in store.changes)


def test_a_file_of_the_study_that_changed_is_named(tmp_path):
    film = tmp_path / "film.csv"
    film.write_text("wavelength_nm,n,k\n500,0.3,3.0\n600,0.3,3.0\n")
    own = (
        ('"gold"\n', '"mine"\n'),
        ("[host]", '[materials.mine]\ntable = "film.csv"\n[host]'),
    )
    _run(tmp_path, _prepared(*own, folder=tmp_path))
    assert _run(tmp_path, _prepared(*own, folder=tmp_path)).changes == []
    film.write_text("wavelength_nm,n,k\n500,0.3,3.1\n600,0.3,3.1\n")
    store = _run(tmp_path, _prepared(*own, folder=tmp_path))
    assert store.changes == ["film.csv: its content"]
    assert store.reused == 0


def test_lost_and_changed_files_are_found_and_their_points_left(run):
    with Ledger(run) as ledger:
        files = [file for _, file, _ in sorted(ledger.files(), key=lambda f: f[1])]
    (run / files[0]).unlink()
    (run / files[1]).write_bytes(b"x")
    with Store(run, _prepared()) as store:
        assert set(store.damage) == {
            f"{files[0]}: missing",
            f"{files[1]}: changed since it was written",
        }
        assert {place_of(task.identity) for task in _tasks(store)} == set(files[:2])
        for task in _tasks(store):
            store.keep(_done(task))
    assert _run(run, _prepared()).damage == []


def test_what_a_killed_process_was_writing_is_cleared_away(run):
    (run / ".spectrum.csv.12345678.part").write_text("half")
    place = next(run.glob("points/*"))
    (place / ".abc.h5.12345678.part").write_text("half")
    (run / "notes.part").write_text("the user's own")
    _run(run, _prepared())
    assert [path.name for path in run.glob("**/*.part")] == ["notes.part"]


def test_doubtful_answers_stay_unless_they_are_asked_for_again(tmp_path):
    statuses = {0: "failed", 1: "stalled", 2: "coarse"}
    _run(tmp_path, _prepared(), statuses)
    assert _run(tmp_path, _prepared()).chains == []
    with Store(tmp_path, _prepared(), again=True) as store:
        assert [task.number for task in _tasks(store)] == [0, 1, 2]
        assert store.reused == 1


def test_other_limits_have_targets_tried_again(tmp_path):
    target = ("cells = 6", "target = 0.05\n[limits]\nminutes = 1")
    _run(tmp_path, _prepared(target), {1: "coarse", 2: "failed"})
    assert _run(tmp_path, _prepared(target)).chains == []
    more = ("cells = 6", "target = 0.05\n[limits]\nminutes = 2")
    with Store(tmp_path, _prepared(more)) as store:
        assert [task.number for task in _tasks(store)] == [1]


def test_finished_points_are_taken_over_from_other_runs(run, tmp_path):
    other = tmp_path / "other"
    other.mkdir()
    with Ledger(run) as ledger:
        first, second = (ledger.entry(number).identity for number in (1, 2))
    (run / place_of(first)).write_bytes(b"damaged")
    store = _run(other, _prepared(points=6), dict.fromkeys(range(6), "killed"), others=[run])
    assert store.reused == 3
    assert [task.number for task in _tasks(store)] == [1, 4, 5]
    assert (other / place_of(second)).read_bytes() == (run / place_of(second)).read_bytes()
    with Ledger(other) as ledger:
        assert [row.c_ext_nm2 for _, row in ledger.rows()] == [3.0, 5.0, 6.0]
    assert not [*other.glob("**/*.part")]


def test_doubtful_points_are_not_taken_over(tmp_path):
    one, other = tmp_path / "one", tmp_path / "other"
    one.mkdir()
    other.mkdir()
    _run(one, _prepared(), {0: "failed", 1: "stalled"})
    store = _run(other, _prepared(), dict.fromkeys(range(4), "killed"), others=[one])
    assert [task.number for task in _tasks(store)] == [0, 1]


def test_a_run_to_reuse_that_is_not_there_is_told_and_the_folder_let_go(tmp_path):
    with pytest.raises(InputError, match="no run of a study"):
        Store(tmp_path, _prepared(), others=[tmp_path / "nowhere"])
    with Lock(tmp_path):
        pass


def test_a_point_that_stands_twice_is_computed_once(tmp_path):
    twice = (
        "particle.diameter = {from = 20, to = 21.5, step = 0.5}",
        "zip = true\nparticle.diameter = [20, 20, 21]",
    )
    store = _run(tmp_path, _prepared(twice))
    assert [task.number for task in _tasks(store)] == [0, 2]
    with Ledger(tmp_path) as ledger:
        assert [row.varied["particle.diameter"] for _, row in ledger.rows()] == [20, 20, 21]


PREVIEW = ("cells = 6", "cells = 16\npreview = true")


def test_coarse_answers_of_the_whole_sweep_come_first(tmp_path):
    prepared = _prepared(PREVIEW)
    with Store(tmp_path, prepared) as store:
        tasks = _tasks(store)
        assert [task.number for task in tasks] == [4, 5, 6, 7, 0, 1, 2, 3]
        assert [task.point.accuracy.cells for task in tasks] == [8] * 4 + [16] * 4
        for task in tasks[:5]:
            store.keep(_done(task))
        statuses = [row.status for _, row in store.ledger.rows()]
        assert statuses == ["converged", "preview", "preview", "preview"]
    with Store(tmp_path, prepared) as store:  # no coarse answer where there is a finer one
        assert [task.number for task in _tasks(store)] == [1, 2, 3]


def test_a_coarse_answer_of_a_spacing_or_target():
    (point, *_) = preview_points(_prepared(("cells = 6", "spacing = 1.5\npreview = true")))
    assert point.accuracy.spacing == 3.0
    (point, *_) = preview_points(_prepared(("cells = 6", "target = 0.05\npreview = true")))
    assert (point.accuracy.target, point.accuracy.cells) == (None, 12)
    assert preview_points(_prepared()) == []


def test_a_coarse_answer_that_is_a_points_own_is_computed_once(tmp_path):
    cells = ("[vary]\n", "[vary]\naccuracy.cells = [8, 16]\n")
    prepared = _prepared(PREVIEW, cells, points=1)
    with Store(tmp_path, prepared) as store:
        tasks = _tasks(store)
        assert len({task.identity for task in tasks}) == len(tasks) == 3
        for task in tasks:
            store.keep(_done(task))
        assert [row.status for _, row in store.ledger.rows()] == ["converged", "converged"]
    assert _run(tmp_path, prepared).chains == []


def test_a_disk_that_is_too_small_is_told(tmp_path):
    assert space_for(tmp_path, 10, 1000) is None
    said = space_for(tmp_path, 10**9, 1e9)
    assert "MiB are free" in said
    assert str(tmp_path) in said
