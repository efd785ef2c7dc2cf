"""The memory a run may take is kept: a real process is watched by the system."""

import csv
import os
import subprocess
import sys
from pathlib import Path

import pytest

from dda.cli import main

# Skew light on an ellipsoid: no mirror plane helps, so lattices soon fill the memory.
STUDY = """
name = "an ellipsoid in little memory"
[particle]
shape = "ellipsoid"
axes = [80, 60, 40]
material = "gold"
[host]
material = "water"
[light]
wavelengths = [530]
direction = [0, 1, 2]
polarization = [1, 0, 0]
[accuracy]
target = 0.0001
[limits]
memory_gib = 0.4
"""


@pytest.fixture
def study(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    Path("s.toml").write_text(STUDY)
    return "s.toml"


@pytest.mark.skipif(sys.platform != "linux", reason="the unit of ru_maxrss is that of Linux")
def test_the_peak_stays_under_the_limit(study):
    process = subprocess.Popen(
        [sys.executable, "-m", "dda.cli", "run", study, "--out", "out"],
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
    )
    _, status, usage = os.wait4(process.pid, 0)
    process.returncode = os.waitstatus_to_exitcode(status)
    assert process.returncode == 1  # the target was not reached
    with open("out/spectrum.csv", newline="") as file:
        rows = list(csv.DictReader(file))
    assert {row["status"] for row in rows} == {"coarse"}
    assert all("would not fit in the memory" in row["message"] for row in rows)
    peak = usage.ru_maxrss / 2**20  # KiB -> GiB
    assert peak < 0.4
    # and it is used: refinement went on beyond the three spacings that are solved in any case
    assert all(int(row["levels"]) > 3 for row in rows)


def test_a_limit_below_the_program_itself_is_refused(study, capsys):
    Path(study).write_text(STUDY.replace("0.4", "0.2"))
    assert main(["run", study, "--out", "out"]) == 2
    said = capsys.readouterr().err
    assert "limits.memory_gib: the program itself takes 300 MiB" in said
    assert "line 16" in said
