"""How far a run is, in words and as JSON, also while it is written or cannot be."""

import json
import os
import shutil
import time

import pytest

from dda.cli import main
from dda.errors import InputError
from dda.report.status import read_status
from dda.report.status_text import status_text
from dda.study.ledger import Ledger
from dda.study.ledger_records import Answered
from dda.study.lock import HOLDER, Lock, holder_of
from dda.study.rows import Row
from tests.runs import WAVELENGTHS, answer, begin, finished, grid


@pytest.fixture
def run(tmp_path):
    """Six points: one of every kind, and one waiting; the ledger is open."""
    entries = grid()
    ledger = begin(tmp_path / "run", entries)
    kinds = [
        ("converged", ""),
        ("coarse", "3 % left"),
        ("stalled", "no end"),
        ("failed", "too big"),
    ]
    for entry, (status, message) in zip(entries, kinds, strict=False):
        ledger.record(entry.identity, answer(entry, status, message))
    ledger.start(entries[4].identity, "worker 1")
    yield tmp_path / "run", ledger, entries
    ledger.close()


def test_the_points_of_every_kind_are_counted_while_someone_runs_it(run):
    folder, _, _ = run
    with Lock(folder):
        status = read_status(folder)
    assert status.counts == {
        "converged": 1,
        "coarse": 1,
        "not converged": 1,
        "failed": 1,
        "running": 1,
        "waiting": 1,
    }
    assert (status.done, status.total, status.doubtful) == (4, 6, 3)
    assert status.holder["process"] == os.getpid()
    assert status.study == "gold cubes"
    assert status.next == f"dda watch {folder}"
    assert [task.wavelength_nm for task in status.tasks] == [WAVELENGTHS[1]]


def test_what_a_killed_process_was_computing_waits_again(run):
    folder, _, _ = run
    status = read_status(folder)
    assert (status.counts["running"], status.counts["waiting"]) == (0, 2)
    assert status.next == f"dda run {folder}"
    assert "nobody is running it" in status_text(status)


def test_the_time_left_follows_the_pace_so_far_over_the_workers(run):
    folder, ledger, entries = run
    # four points of weight 1 took 2 s each; two points are left, one of them just begun
    with Lock(folder):
        assert 3.5 < read_status(folder).seconds_left <= 4.0
        ledger.start(entries[5].identity, "worker 2")
        assert 1.5 < read_status(folder).seconds_left <= 2.0


def test_no_time_is_promised_before_the_first_answer(tmp_path):
    begin(tmp_path, grid()).close()
    status = read_status(tmp_path)
    assert status.seconds_left is None
    assert "no pace is known yet" in status_text(status)


def test_failed_points_come_first_with_their_reasons_and_the_rest_is_counted(run):
    folder, ledger, entries = run
    ledger.record(entries[5].identity, answer(entries[5], "failed", "out of memory"))
    status = read_status(folder, most=3)
    assert [(d.number, d.kind, d.reason) for d in status.doubts] == [
        (3, "failed", "too big"),
        (5, "failed", "out of memory"),
        (1, "coarse", "3 % left"),
    ]
    text = status_text(status)
    assert "3: particle.edge = 50, 500 nm  failed: too big" in text
    assert "and 1 more" in text


def test_a_finished_run_says_what_there_is_to_do(tmp_path):
    finished(tmp_path / "good", grid())
    status = read_status(tmp_path / "good")
    assert status.seconds_left == 0
    assert status.next == f"dda export {tmp_path / 'good'} --to csv"
    entries = grid()
    with begin(tmp_path / "bad", entries[:1]) as ledger:
        ledger.record(entries[0].identity, answer(entries[0], "failed", "no"))
    assert read_status(tmp_path / "bad").next == f"dda run {tmp_path / 'bad'} --again"


def test_answers_in_advance_are_told_apart(tmp_path):
    from dataclasses import replace

    entries = [replace(entry, preview=f"coarse {entry.number}") for entry in grid()]
    with begin(tmp_path, entries) as ledger:
        ledger.record("coarse 0", answer(entries[0]))
    status = read_status(tmp_path)
    assert (status.previews, status.done) == ((6, 1), 0)
    with Ledger(tmp_path) as ledger:
        assert [there for *_, there in ledger.sets()] == [1, 0]
    assert "coarse answers in advance: 1 of 6" in status_text(status)


def test_the_command_prints_words_or_json(run, capsys):
    folder, _, _ = run
    assert main(["status", str(folder)]) == 0
    assert "4 of 6 points done" in capsys.readouterr().out
    assert main(["status", str(folder), "--json", "--list", "1"]) == 0
    found = json.loads(capsys.readouterr().out)
    assert found["counts"]["failed"] == 1
    assert [doubt["reason"] for doubt in found["doubts"]] == ["too big"]


def test_a_folder_without_a_run_is_told(tmp_path, capsys):
    assert main(["status", str(tmp_path)]) == 2
    assert "no run of a study" in capsys.readouterr().err


def test_every_state_of_a_run_that_is_written_meanwhile_is_consistent(run):
    folder, ledger, entries = run
    for entry in entries:
        ledger.record(entry.identity, answer(entry))
        assert sum(read_status(folder).counts.values()) == 6
    assert read_status(folder).counts["converged"] == 6


def test_the_holder_is_seen_by_two_who_ask_at_once(tmp_path):
    assert holder_of(tmp_path) is None
    with Lock(tmp_path):
        assert holder_of(tmp_path) == holder_of(tmp_path) != {}
        (tmp_path / HOLDER).unlink()
        assert holder_of(tmp_path) == {}
    assert holder_of(tmp_path) is None


@pytest.fixture
def unprivileged():
    """Root may write anywhere: be someone else meanwhile."""
    if not hasattr(os, "geteuid"):
        pytest.skip("permissions of this system are not tested")
    if os.geteuid() == 0:
        os.seteuid(65534)
        yield
        os.seteuid(0)
    else:
        yield


@pytest.fixture
def elsewhere(tmp_path_factory):
    """A folder whose parents anyone may pass; the tests' own is for its owner alone."""
    import tempfile
    from pathlib import Path

    path = Path(tempfile.mkdtemp())
    path.chmod(0o755)
    yield path
    for folder in [path, *path.glob("*/")]:
        folder.chmod(0o755)
    shutil.rmtree(path)


def _lock_up(folder):
    for path in folder.iterdir():
        path.chmod(0o444)
    folder.chmod(0o555)


@pytest.mark.parametrize("log", ["closed", "with its log", "log without index"])
def test_a_folder_that_cannot_be_written_is_read(elsewhere, request, log):
    folder = elsewhere / "run"
    entries = grid()
    ledger = begin(folder, entries)
    ledger.record(entries[0].identity, answer(entries[0]))
    if log == "closed":
        ledger.close()
    with Lock(folder):
        pass
    # a copy, as of a run that was killed: nobody has the files open
    copy = shutil.copytree(folder, elsewhere / "copy")
    ledger.close()
    assert (copy / "ledger.sqlite-wal").exists() == (log != "closed")
    if log == "log without index":
        (copy / "ledger.sqlite-shm").unlink()
    _lock_up(copy)
    request.getfixturevalue("unprivileged")
    with pytest.raises(PermissionError):
        (copy / "file").write_text("")
    status = read_status(copy)
    assert status.counts["converged"] == 1
    assert status.holder is None


def test_tallies_add_up(tmp_path):
    entries = grid()
    with begin(tmp_path, entries) as ledger:
        ledger.record(entries[0].identity, answer(entries[0]))
        ledger.record(entries[1].identity, Answered(Row(520.0, status="failed", seconds=7.0)))
        assert ledger.counts() == {"converged": 1, "failed": 1, "waiting": 4}
        assert ledger.work() == (2.0, 9.0, 6.0)
        assert ledger.sets() == [
            ({"particle.edge": 40.0}, 3, 2, 2),
            ({"particle.edge": 50.0}, 3, 0, 0),
        ]
        assert [n for n, _ in ledger.rows({"particle.edge": 40.0})] == [0, 1]
        assert list(ledger.rows({"particle.edge": 50.0})) == []
        assert ledger.entry(3) == ledger.entry(entries[3].identity) == entries[3]
        assert ledger.entry(6) is None


def test_a_run_that_has_just_begun_has_a_holder_with_a_date(run):
    folder, _, _ = run
    with Lock(folder):
        year = time.strftime("%Y-")
        assert f"is running it since {year}" in status_text(read_status(folder))


def test_a_damaged_ledger_is_told(tmp_path):
    (tmp_path / "ledger.sqlite").write_bytes(b"no ledger" * 1000)
    with pytest.raises(InputError, match="damaged"):
        Ledger(tmp_path)
