"""A disk that fills up ends a run with a sentence; what was finished before stays."""

import errno
import os
import subprocess
import sys

import pytest

from dda.cli import main
from dda.errors import ComputationError
from dda.files import write_aside
from dda.study.ledger import Ledger
from dda.study.lock import Lock
from dda.study.point_file import write_point
from tests.sweeps import finished, same_tables, sweep, table

POINTS = 24


@pytest.fixture
def disk(tmp_path):
    """A file system of its own, of 700 KiB; room for some points only."""
    path = tmp_path / "disk"
    path.mkdir()
    command = ["mount", "-t", "tmpfs", "-o", "size=700k", "tmpfs", str(path)]
    if not sys.platform.startswith("linux"):
        pytest.skip("file systems are mounted by Linux's own means here")
    mounted = subprocess.run(command, capture_output=True, text=True, check=False)
    if mounted.returncode:
        pytest.skip(f"no file system may be mounted here: {mounted.stderr.strip()}")
    yield path
    subprocess.run(["umount", "-l", str(path)], check=True)


def _fill(disk, leave=0):
    """Fill a disk but for some bytes; the file that does it."""
    ballast = disk / "ballast"
    free = os.statvfs(disk).f_bavail * os.statvfs(disk).f_frsize
    with ballast.open("ab") as file:
        file.write(b"\0" * max(0, free - leave))
    return ballast


@pytest.mark.parametrize("processes", [1, 2])
def test_a_sweep_fills_the_disk_and_goes_on_when_there_is_space(disk, tmp_path, capsys, processes):
    study = sweep(
        tmp_path / "study.toml", POINTS, ("threads = 1", f"threads = 1\nprocesses = {processes}")
    )
    ballast = _fill(disk, leave=400_000)
    command = ["run", str(study), "--out", str(disk / "out")]
    assert main(command) == 1
    said = capsys.readouterr().err
    assert "cannot be written: the disk is full" in said
    assert str(disk / "out") in said
    assert "Traceback" not in said
    assert "mistake" not in said
    known = finished(disk / "out")
    assert 1 <= len(known) < POINTS
    assert f"{len(known)} of {POINTS} points are kept; the same command goes on" in said
    if (disk / "out" / "spectrum.csv").exists():
        assert 1 <= len(table(disk / "out")) <= len(known)

    # it is still full
    assert main(command) == 1
    said = capsys.readouterr().err
    assert "the disk is full" in said
    assert "mistake" not in said
    assert "points" in said
    assert finished(disk / "out") >= known

    ballast.unlink()
    subprocess.run(["mount", "-o", "remount,size=8m", str(disk)], check=True)
    assert main(command) == 0
    assert finished(disk / "out") > known
    assert len(table(disk / "out")) == POINTS
    assert not [*(disk / "out").glob("**/*.part")]
    main(["run", str(study), "--out", str(tmp_path / "undisturbed")])
    same_tables(table(disk / "out"), table(tmp_path / "undisturbed"))


@pytest.mark.parametrize("leave", [0, 4096, 20_000, 60_000, 100_000])
def test_a_disk_that_is_full_from_the_start_is_told(disk, tmp_path, capsys, leave):
    study = sweep(tmp_path / "study.toml", 2)
    ballast = _fill(disk, leave)
    assert main(["run", str(study), "--out", str(disk / "out")]) == 1
    said = capsys.readouterr().err
    assert "the disk is full" in said
    assert str(disk / "out") in said
    assert "mistake" not in said
    ballast.unlink()
    assert main(["run", str(study), "--out", str(disk / "out")]) == 0
    assert len(table(disk / "out")) == 2


def test_nothing_is_half_written(disk):
    write_aside(disk / "table.csv", b"old" * 1000)
    folder = disk / "run"
    folder.mkdir()
    write_point(folder, "ab" * 16, {}, [], [])
    ledger = Ledger(folder, write=True)
    ledger.begin("", {}, {})
    _fill(disk)
    with pytest.raises(ComputationError, match=r"table\.csv: cannot be written: the disk is full"):
        write_aside(disk / "table.csv", b"new" * 100_000)
    assert (disk / "table.csv").read_bytes() == b"old" * 1000
    with pytest.raises(ComputationError, match=r"\.h5: cannot be written: the disk is full"):
        write_point(folder, "cd" * 16, {}, [], [])
    assert [path.name for path in folder.glob("points/*/*")] == ["ab" * 16 + ".h5"]
    with pytest.raises(ComputationError, match=r"ledger\.sqlite: cannot be written: the disk is"):
        ledger.note("a long word", "x" * 1_000_000)
    known = ledger.about()
    assert "a long word" not in known
    ledger.close()
    with Ledger(folder) as again:
        assert again.about() == known


def test_a_folder_is_held_on_a_full_disk_too(disk):
    _fill(disk, leave=8192)
    with Lock(disk), pytest.raises(ValueError, match="is running a study in it"):
        Lock(disk)


@pytest.mark.parametrize("code", [errno.ENOSPC, errno.EDQUOT])
@pytest.mark.parametrize("written", [0, 1, 2, 3, 5])
def test_a_disk_that_refuses_after_some_files_ends_the_run(
    tmp_path, capsys, monkeypatch, written, code
):
    study = sweep(tmp_path / "study.toml", 3)
    left = written
    fsync = os.fsync

    def refuse(file):
        nonlocal left
        left -= 1
        if left < 0:
            raise OSError(code, os.strerror(code))
        fsync(file)

    monkeypatch.setattr(os, "fsync", refuse)
    out = tmp_path / "out"
    assert main(["run", str(study), "--out", str(out)]) == 1
    said = capsys.readouterr().err
    assert "cannot be written: the disk is full" in said
    assert f"{len(finished(out))} of 3 points are kept; the same command goes on" in said
    assert not [*out.glob("**/*.part")]
    monkeypatch.undo()
    assert main(["run", str(study), "--out", str(out)]) == 0
    assert len(table(out)) == 3
