"""The memory a run may take is kept: the system tells the peak of a real process."""

import csv
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


# The peak of this process alone: what wait4 gives counts that of the parent before it starts.
RUN = """
import sys
from dda.cli import main
code = main(["run", "s.toml", "--out", "out"])
status = dict(line.split(":", 1) for line in open("/proc/self/status"))
print("peak", status["VmHWM"].split()[0])
sys.exit(code)
"""


@pytest.mark.skipif(not Path("/proc/self/status").exists(), reason="the system tells no peak")
def test_the_peak_stays_under_the_limit(study):
    done = subprocess.run([sys.executable, "-c", RUN], capture_output=True, text=True)
    assert done.returncode == 1  # the target was not reached
    with open("out/spectrum.csv", newline="") as file:
        rows = list(csv.DictReader(file))
    assert {row["status"] for row in rows} == {"coarse"}
    assert all("would not fit in the memory" in row["message"] for row in rows)
    peak = int(done.stdout.split()[-1]) / 2**20  # KiB -> GiB
    assert peak < 0.4
    # and it is used: refinement went on beyond the three spacings that are solved in any case
    assert all(int(row["levels"]) > 3 for row in rows)


def test_a_limit_below_the_program_itself_is_refused(study, capsys):
    Path(study).write_text(STUDY.replace("0.4", "0.2"))
    assert main(["run", study, "--out", "out"]) == 2
    said = capsys.readouterr().err
    assert "limits.memory_gib: the program itself takes 300 MiB" in said
    assert "line 16" in said
