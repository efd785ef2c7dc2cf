"""Points on a cluster: a real scheduler and real worker processes on this machine."""

import contextlib
import csv
import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from dda.cli import main

STUDY = """
name = "small spheres"
[particle]
shape = "sphere"
diameter = 20.0
material = "gold"
[host]
material = "water"
[light]
wavelengths = [520]
[accuracy]
cells = 6
[vary]
particle.diameter = {from = 20, to = 49, step = 1}
"""


def _start(*arguments):
    command = [sys.executable, "-m", "distributed.cli.dask_" + arguments[0], *arguments[1:]]
    return subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)


def _worker(file):
    return _start(
        "worker", "--scheduler-file", file, "--nthreads", "1", "--no-nanny", "--no-dashboard"
    )


@pytest.fixture
def cluster(tmp_path, monkeypatch):
    """A scheduler's address and two workers, which end with the test."""
    monkeypatch.chdir(tmp_path)
    file = str(tmp_path / "scheduler.json")
    started = [_start("scheduler", "--port", "0", "--no-dashboard", "--scheduler-file", file)]
    started += [_worker(file), _worker(file)]
    deadline = time.monotonic() + 60
    while not Path(file).exists() and time.monotonic() < deadline:
        time.sleep(0.05)
    yield json.loads(Path(file).read_text())["address"], started, file
    for process in started:
        process.kill()
        process.wait()


def _rows(folder):
    with open(f"{folder}/spectrum.csv", newline="") as file:
        return list(csv.DictReader(file))


def _run(address, out):
    return subprocess.Popen(
        [sys.executable, "-m", "dda.cli", "run", "s.toml", "--out", out, "--scheduler", address],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )


def test_a_killed_worker_loses_no_point_and_the_answers_are_the_same(cluster):
    """The same to 1e-10: every combination has one wavelength, so no solution is recycled."""
    address, started, file = cluster
    Path("s.toml").write_text(STUDY)
    run = _run(address, "out")
    deadline = time.monotonic() + 90
    while not Path("out/spectrum.csv").exists() and time.monotonic() < deadline:
        time.sleep(0.02)
    os.kill(started[1].pid, signal.SIGKILL)
    started.append(_worker(file))
    _, err = run.communicate(timeout=120)
    assert run.returncode == 0, err
    assert main(["run", "s.toml", "--out", "here"]) == 0
    there, here = _rows("out"), _rows("here")
    assert len(there) == len(here) == 30
    for a, b in zip(there, here, strict=True):
        assert a["particle.diameter"] == b["particle.diameter"]
        for key in ("c_ext_nm2", "c_abs_nm2", "c_ext_error_nm2"):
            assert float(a[key]) == pytest.approx(float(b[key]), rel=1e-8)  # nine digits


def test_a_lost_scheduler_ends_the_run_with_what_is_finished(cluster):
    address, started, _ = cluster
    Path("s.toml").write_text(STUDY.replace("to = 49", "to = 2000"))
    run = _run(address, "out")
    deadline = time.monotonic() + 90
    while not Path("out/spectrum.csv").exists() and time.monotonic() < deadline:
        time.sleep(0.02)
    started[0].kill()
    _, err = run.communicate(timeout=120)
    assert run.returncode == 1
    assert "scheduler" in err
    assert "points are kept; the same command goes on" in err
    assert "Traceback" not in err
    assert len(_rows("out")) >= 1


@pytest.mark.parametrize("address", ["tcp://127.0.0.1:9", "nonsense://x"])
def test_no_scheduler_there(address, tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    monkeypatch.setattr("dda.study.cluster._ANSWER", 2)
    Path("s.toml").write_text(STUDY)
    assert main(["run", "s.toml", "--out", "out", "--scheduler", address]) == 2
    said = capsys.readouterr().err
    assert "no Dask scheduler answers there" in said
    with contextlib.suppress(FileNotFoundError):
        assert not Path("out/holder.json").exists()
