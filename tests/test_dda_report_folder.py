"""`dda run` into a folder: goes on, says what changed, keeps its tables whole and up to date."""

import csv
import json
from pathlib import Path

import pytest

from dda.cli import main
from dda.report import folder as report_folder
from dda.report.folder import RunFolder
from dda.study import levels
from dda.study.engines import Done
from dda.study.ledger import Ledger
from dda.study.prepare import prepare
from dda.study.reader import read_study
from dda.study.rows import Row
from dda.study.runner import Outcome
from tests.sweeps import same_tables, sweep, table


@pytest.fixture
def counted(monkeypatch):
    """How often something was solved."""
    settle = levels.settle
    calls = []
    monkeypatch.setattr(levels, "settle", lambda *a, **o: (calls.append(1), settle(*a, **o))[1])
    return calls


@pytest.fixture
def study(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    return lambda points=3, *changes: str(sweep(tmp_path / "study.toml", points, *changes))


def test_a_finished_run_is_not_computed_again(study, counted, capsys):
    assert main(["run", study(), "--out", "out"]) == 0
    assert counted
    first = table(Path("out"))
    counted.clear()
    assert main(["run", study(), "--out", "out"]) == 0
    assert counted == []
    said = capsys.readouterr()
    assert "3 of 3 points are there already, 0 are left" in said.out
    assert said.err == ""
    assert table(Path("out")) == first


def test_a_run_folder_stands_for_its_study(study, counted, tmp_path, monkeypatch):
    assert main(["run", study(), "--out", "out"]) == 0
    first = table(Path("out"))
    for path in Path("out").glob("points/*/*.h5"):
        path.unlink()
    (tmp_path / "elsewhere").mkdir()
    monkeypatch.chdir(tmp_path / "elsewhere")
    assert main(["run", "../out"]) == 0
    same_tables(table(tmp_path / "out"), first)


def test_a_folder_without_a_run_is_no_study(tmp_path, capsys):
    assert main(["run", str(tmp_path)]) == 2
    assert "no run of a study" in capsys.readouterr().err


def test_varied_keys_are_the_first_columns_and_previews_end_as_answers(study):
    preview = ("cells = 6", "cells = 12\npreview = true")
    assert main(["run", study(2, preview), "--out", "out"]) == 0
    rows = table(Path("out"))
    assert next(iter(rows[0])) == "particle.diameter"
    assert [row["particle.diameter"] for row in rows] == ["20", "20.5"]
    assert {row["status"] for row in rows} == {"converged"}
    assert len({row["cells"] for row in rows}) == 1


def test_a_changed_study_says_what_changed_and_puts_the_old_table_aside(study, counted, capsys):
    assert main(["run", study(), "--out", "out"]) == 0
    counted.clear()
    capsys.readouterr()
    other = ("index = 1.33", "index = 1.4")
    assert main(["run", study(3, other), "--out", "out"]) == 0
    assert len(counted) == 9  # three points at three spacings
    said = capsys.readouterr().out
    assert "changed since the last run in out:\n  host.index: 1.33 -> 1.4\n" in said
    assert len(table(Path("out/earlier-1"))) == 3
    assert "index = 1.33" in Path("out/earlier-1/study.toml").read_text()
    counted.clear()
    assert main(["run", study(), "--out", "out"]) == 0  # back again: all is known
    assert counted == []
    same_tables(table(Path("out")), table(Path("out/earlier-1")))


def test_studies_that_overlap_compute_the_rest_only(study, counted):
    assert main(["run", study(3), "--out", "out"]) == 0
    counted.clear()
    assert main(["run", study(5), "--out", "out"]) == 0
    assert len(counted) == 6
    counted.clear()
    assert main(["run", study(6), "--out", "new", "--reuse", "out"]) == 0
    assert len(counted) == 3
    assert len(table(Path("new"))) == 6
    same_tables(table(Path("new"))[:5], table(Path("out")))


def test_a_run_to_reuse_that_is_not_there_is_told(study, capsys):
    assert main(["run", study(), "--out", "out", "--reuse", "nowhere"]) == 2
    assert "nowhere: no run of a study" in capsys.readouterr().err


def test_failed_points_are_computed_again_when_that_is_asked_for(study, capsys, monkeypatch):
    settle = levels.settle

    def failing(matrix, light, **options):
        if matrix.cells.spacing < 3.4:  # the finest cells of the smallest sphere
            raise RuntimeError("it broke down")
        return settle(matrix, light, **options)

    monkeypatch.setattr(levels, "settle", failing)
    assert main(["run", study(), "--out", "out"]) == 1
    said = capsys.readouterr().err
    assert "no answer at 530 nm (particle.diameter = 20.0): RuntimeError: it broke down" in said
    monkeypatch.setattr(levels, "settle", settle)
    assert main(["run", study(), "--out", "out"]) == 1  # it stays as it is
    assert main(["run", study(), "--out", "out", "--again"]) == 0
    assert {row["status"] for row in table(Path("out"))} == {"converged"}


def test_damaged_files_are_told_and_computed_again(study, counted, capsys):
    assert main(["run", study(), "--out", "out"]) == 0
    first = table(Path("out"))
    one, other, _ = sorted(Path("out").glob("points/*/*.h5"))
    one.unlink()
    other.write_bytes(other.read_bytes()[:-7])
    counted.clear()
    capsys.readouterr()
    assert main(["run", study(), "--out", "out"]) == 0
    assert len(counted) == 6
    said = capsys.readouterr().err
    assert "computed again, because their files are not whole" in said
    assert f"{one.relative_to('out')}: missing" in said
    assert f"{other.relative_to('out')}: changed since it was written" in said
    same_tables(table(Path("out")), first)


def test_a_damaged_ledger_is_told(study, capsys):
    Path("out").mkdir()
    Path("out/ledger.sqlite").write_bytes(b"no ledger" * 1000)
    assert main(["run", study(), "--out", "out"]) == 2
    said = capsys.readouterr().err
    assert "damaged, or no ledger" in said
    assert "Traceback" not in said


def test_versions_and_constants_are_noted(study):
    assert main(["run", study(1), "--out", "out"]) == 0
    about = json.loads(Path("out/about.json").read_text())
    assert {"motelight", "numpy", "python", "answers", "window_cells"} <= set(about)
    with Ledger(Path("out")) as ledger:
        assert ledger.study()[2] == about


# --- the table while a run goes on ------------------------------------------------------------


@pytest.fixture
def opened(study):
    """A folder that is open, its tasks, and how a task is kept with a status."""
    read = read_study(study(4, ("cells = 6", "cells = 12\npreview = true")))
    folder = RunFolder(Path("out"), read)
    folder.open(prepare(read))
    tasks = [task for chain in folder.store.chains for task in chain]

    def keep(task, c_ext=3.0):
        row = Row(530.0, c_ext_nm2=c_ext, status="converged", varied=task.point.varied)
        folder.keep(Done(task, Outcome(row), "process 1"))

    yield folder, tasks, keep
    folder.close()


def test_rows_are_in_the_order_of_the_study_however_they_come(opened):
    folder, tasks, keep = opened
    for task in reversed(tasks[4:]):
        keep(task, c_ext=float(task.number))
    assert [row.c_ext_nm2 for row in folder.rows] == [0, 1, 2, 3]


def test_a_preview_stands_in_until_the_answer_comes(opened):
    folder, tasks, keep = opened
    keep(tasks[1], c_ext=1.0)
    ((row,),) = [folder.rows]
    assert (row.status, row.varied) == ("preview", {"particle.diameter": 20.5})
    keep(tasks[5], c_ext=2.0)
    assert [(row.status, row.c_ext_nm2) for row in folder.rows] == [("converged", 2.0)]
    keep(tasks[1], c_ext=1.0)  # one that comes late replaces nothing
    assert [(row.status, row.c_ext_nm2) for row in folder.rows] == [("converged", 2.0)]
    known = [row for _, row in folder.store.ledger.rows()]
    assert [(row.status, row.c_ext_nm2) for row in known] == [("converged", 2.0)]


def test_the_table_is_written_now_and_then(opened, monkeypatch):
    folder, tasks, keep = opened
    now = 1000.0
    monkeypatch.setattr(report_folder.time, "monotonic", lambda: now)
    folder._next = 0.0
    keep(tasks[4])
    assert len(table(Path("out"))) == 1
    keep(tasks[5])
    assert len(table(Path("out"))) == 1
    now += report_folder.REST + 0.1
    keep(tasks[6])
    assert len(table(Path("out"))) == 3
    folder.finish()
    with Path("out/spectrum.csv").open(newline="") as file:
        assert len(list(csv.reader(file))) == 4


def test_the_table_of_a_folder_without_answers_is_not_written(opened):
    folder, _, _ = opened
    folder.finish()
    assert folder.files == ["study.toml"]
    assert not Path("out/spectrum.csv").exists()
