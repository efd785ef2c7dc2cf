"""The command line: what it writes, what it says, how it ends."""

import csv
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest

from dda.cli import main
from dda.study.engines import Here, Task

STUDY = """\
name = "small gold sphere"
[particle]
shape = "sphere"
diameter = 20.0
material = "gold"
[host]
index = 1.33
[light]
wavelengths = [480, 520, 560]
[accuracy]
cells = 8
"""


@pytest.fixture
def study(tmp_path, monkeypatch):
    """Write a study, with replacements, in a working directory of its own."""
    monkeypatch.chdir(tmp_path)

    def write(*changes, name="gold.toml"):
        text = STUDY
        for old, new in changes:
            assert old in text
            text = text.replace(old, new)
        Path(name).write_text(text)
        return name

    return write


#: What a run folder holds.
FILES = {
    "about.json",
    "ledger.sqlite",
    "lock.sqlite",
    "points",
    "spectrum.csv",
    "spectrum.png",
    "study.toml",
}


def _rows(folder):
    with Path(folder, "spectrum.csv").open(newline="") as file:
        return list(csv.DictReader(file))


def test_run_writes_a_spectrum_a_picture_and_a_copy(study, capsys):
    name = study()
    assert main(["run", name, "--out", "results/one"]) == 0
    rows = _rows("results/one")
    assert [float(row["wavelength_nm"]) for row in rows] == [480, 520, 560]
    assert {row["status"] for row in rows} == {"converged"}
    c_ext, c_abs, c_sca, q_ext = (
        np.array([float(row[key]) for row in rows])
        for key in ("c_ext_nm2", "c_abs_nm2", "c_sca_nm2", "q_ext")
    )
    np.testing.assert_allclose(c_ext, c_abs + c_sca, rtol=1e-7)  # nine digits are written
    np.testing.assert_allclose(c_ext / q_ext, np.pi * 10**2, rtol=1e-6)
    assert c_ext.argmax() == 1  # the plasmon of a small gold sphere in water lies near 520 nm
    assert set(os.listdir("results/one")) == FILES
    assert Path("results/one/study.toml").read_text() == STUDY
    assert Path("results/one/spectrum.png").read_bytes().startswith(b"\x89PNG")
    printed = capsys.readouterr()
    assert "extinction  peak at 5" in printed.out
    assert printed.err == ""


def test_the_default_folder_is_named_after_the_study(study):
    assert main(["run", study(name="tiny.toml")]) == 0
    assert Path("tiny/spectrum.csv").exists()


def test_results_of_another_study_are_put_aside(study):
    assert main(["run", study(), "--out", "out"]) == 0
    assert main(["run", study(), "--out", "out"]) == 0
    assert not Path("out/earlier-1").exists()
    assert main(["run", study(("[480, 520, 560]", "[500]")), "--out", "out"]) == 0
    assert len(_rows("out")) == 1
    assert len(_rows("out/earlier-1")) == 3


def test_unpolarized_light_is_the_mean_of_two_polarizations(study):
    brick = ('shape = "sphere"\ndiameter = 20.0', 'shape = "cuboid"\nsides = [20, 12, 12]')
    light = "wavelengths = [480, 520, 560]"
    for out, polarization in [("x", "[1, 0, 0]"), ("y", "[0, 1, 0]"), ("u", '"unpolarized"')]:
        one = (light, f"wavelengths = [600]\npolarization = {polarization}")
        assert main(["run", study(brick, one), "--out", out]) == 0
    x, y, u = (float(_rows(out)[0]["c_ext_nm2"]) for out in "xyu")
    assert x > 1.3 * y  # along the brick's length the resonance is to the red
    assert u == pytest.approx((x + y) / 2, rel=1e-3)  # the solver's tolerance


def test_plan_says_what_would_run_and_solves_nothing(study, capsys):
    assert main(["plan", study()]) == 0
    said = capsys.readouterr().out
    for words in ("cells", "memory", "time", "|m| k d", "thinnest part", "480 to 560 nm"):
        assert words in said
    assert os.listdir() == ["gold.toml"]


def test_plan_warns_of_cells_too_coarse_for_a_gap(study, capsys):
    dimer = ('shape = "sphere"\n', 'shape = "dimer"\ngap = 4.0\n[particle.of]\nshape = "sphere"\n')
    assert main(["plan", study(dimer)]) == 2  # cells of 5.5 nm close a gap of 4 nm
    assert "below one cell (5.5 nm)" in capsys.readouterr().err
    assert main(["plan", study(dimer, ("cells = 8", "spacing = 2.0"))]) == 0
    said = capsys.readouterr().out
    assert "4 nm, 2.0 cells: CAUTION" in said


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ('"sphere"', '"spehre"', ["line 3", "did you mean sphere"]),
        ("diameter = 20.0", "diametre = 20.0", ["line 4", "diameter"]),
        ("diameter = 20.0", "diameter = -20.0", ["line 4", "diameter", "> 0"]),
        ("diameter = 20.0", 'diameter = "big"', ["line 4", "a number"]),
        ("diameter = 20.0\n", "", ["diameter"]),
        ('material = "gold"\n', "", ["particle.material", "missing"]),
        ('material = "gold"', 'material = "glod"', ["line 5", "did you mean", "gold"]),
        ("[480, 520, 560]", "[480, 5200]", ["line 9", "gold", "5200"]),
        ("index = 1.33", 'material = "gold"', ["line 6", "absorbs"]),
        ("index = 1.33", 'material = "watr"', ["line 7", "water"]),
        ("cells = 8", "spacing = 50.0", ["line 11", "larger than the whole particle"]),
        ("cells = 8", "spacing = 0.004", ["line 11", "GiB", "a spacing of", "would fit"]),
        ('shape = "sphere"\ndiameter = 20.0', 'mesh = "no.stl"', ["line 3", "there is no file"]),
        ("[host]", '[materials.gold]\ntable = "no.csv"\n[host]', ["line 6", "no.csv"]),
        ("[host]", '[materials.gold]\nmodel = "drud"\n[host]', ["materials.gold", "drude"]),
    ],
)
def test_a_mistake_ends_with_one_message_and_code_2(study, capsys, old, new, said):
    name = study((old, new))
    assert main(["run", name]) == 2
    printed = capsys.readouterr()
    for words in ("gold.toml", *said):
        assert words in printed.err
    assert "Traceback" not in printed.err
    assert printed.out == ""
    assert os.listdir() == ["gold.toml"]


def test_a_table_with_nan_is_refused(study, capsys):
    Path("film.csv").write_text("wavelength_nm,n,k\n400,1.0,1.0\n500,nan,1.0\n600,1.0,1.0\n")
    name = study(("[host]", '[materials.gold]\ntable = "film.csv"\n[host]'))
    assert main(["run", name]) == 2
    assert "film.csv" in capsys.readouterr().err


def test_own_materials_and_paths_start_at_the_study(study, tmp_path, monkeypatch):
    folder = tmp_path / "deeper"
    folder.mkdir()
    (folder / "film.csv").write_text("wavelength_nm,n,k\n400,0.3,3.0\n600,0.3,3.0\n")
    name = study(
        ('"gold"', '"mine"'),
        (
            "[host]",
            '[materials.film]\ntable = "film.csv"\n[materials.mine]\nmaterial = "film"\n[host]',
        ),
        ("[480, 520, 560]", "[500]"),
        name="deeper/own.toml",
    )
    assert main(["run", name, "--out", "out"]) == 0
    assert _rows("out")[0]["status"] == "converged"


def test_a_folder_that_cannot_be_written_is_refused_before_the_run(study, capsys):
    name = study()
    Path("taken").write_text("a file")
    assert main(["run", name, "--out", "taken"]) == 2
    assert "in the way" in capsys.readouterr().err


def test_finished_wavelengths_are_kept_when_one_fails(study, capsys, monkeypatch):
    from dda.errors import ComputationError
    from dda.study import levels

    settle = levels.settle

    def failing(matrix, light, **options):
        if matrix.wavelength == 520:
            raise ComputationError("it broke down")
        return settle(matrix, light, **options)

    monkeypatch.setattr(levels, "settle", failing)
    assert main(["run", study(), "--out", "out"]) == 1
    rows = _rows("out")
    assert [row["status"] for row in rows] == ["converged", "failed", "converged"]
    assert rows[1]["c_ext_nm2"] == ""
    assert rows[1]["message"] == "it broke down; with another solver (bicgstab) as well"
    assert "no answer at 520 nm: it broke down" in capsys.readouterr().err


def test_an_unconverged_wavelength_says_so(study, capsys, monkeypatch):
    from dda.study import levels

    settle = levels.settle
    monkeypatch.setattr(levels, "settle", lambda m, w, **o: settle(m, w, **{**o, "limit": 2}))
    assert main(["run", study(), "--out", "out"]) == 1
    assert {row["status"] for row in _rows("out")}.isdisjoint({"converged"})
    assert "did not converge at 480, 520, 560 nm" in capsys.readouterr().err


def test_a_mistake_of_the_program_ends_no_sweep(study, capsys, monkeypatch):
    from dda.study import levels

    def broken(*_, **__):
        raise KeyError("nothing a user did")

    monkeypatch.setattr(levels, "settle", broken)
    assert main(["run", study(), "--out", "out"]) == 1
    said = capsys.readouterr().err
    assert "KeyError" in said
    assert "Traceback" not in said
    assert [row["status"] for row in _rows("out")] == ["failed"] * 3


def test_a_mistake_of_the_program_is_no_traceback(study, capsys, monkeypatch):
    def broken(*_, **__):
        raise KeyError("nothing a user did")

    monkeypatch.setattr("dda.study.prepare.prepare", broken)
    assert main(["run", study(), "--out", "out"]) == 1
    said = capsys.readouterr().err
    assert "a mistake in the program" in said
    assert "KeyError" in said
    with pytest.raises(KeyError):
        main(["--debug", "run", study(), "--out", "out"])


def test_a_target_is_reached_and_stated(study, capsys):
    name = study(("cells = 8", "target = 0.05"))
    assert main(["run", name, "--out", "out"]) == 0
    for row in _rows("out"):
        assert row["status"] == "converged"
        assert int(row["levels"]) >= 3
        for part in ("ext", "abs"):
            error = float(row[f"c_{part}_error_nm2"])
            assert 0 < error <= 0.05 * float(row[f"c_{part}_nm2"])
            parts = (float(row[f"c_{part}_{kind}_error_nm2"]) for kind in ("spacing", "solver"))
            assert error == pytest.approx(sum(parts), rel=1e-6)
    assert "±" in capsys.readouterr().out


@pytest.mark.parametrize(
    ("limit", "said"), [("minutes = 1e-6", "in the time"), ("memory_gib = 0.314", "in the memory")]
)
def test_limits_stop_refinement_and_say_so(study, capsys, limit, said):
    name = study(("cells = 8", f"target = 0.0005\n[limits]\n{limit}"))
    assert main(["run", name, "--out", "out"]) == 1
    rows = _rows("out")
    assert {row["status"] for row in rows} == {"coarse"}
    assert all(float(row["c_ext_error_nm2"]) > 0 for row in rows)
    assert said in rows[0]["message"]
    assert "target was not reached at 480, 520, 560 nm" in capsys.readouterr().err


def test_given_cells_carry_an_error_bar(study):
    assert main(["run", study(), "--out", "out"]) == 0
    for row in _rows("out"):
        assert float(row["c_ext_spacing_error_nm2"]) > 0
        assert float(row["c_ext_error_nm2"]) < 0.5 * float(row["c_ext_nm2"])


def test_a_tumbling_sphere_is_a_sphere(study, capsys):
    assert main(["run", study(), "--out", "fixed"]) == 0
    light = ("[light]", '[light]\norientation = "average"')
    no_direction = [
        ("direction = [0, 0, 1]\n", ""),
        ("polarization = [1, 0, 0]\n", ""),
    ]
    text = Path(study()).read_text()
    asked = [light, *(pair for pair in no_direction if pair[0] in text)]
    assert main(["run", study(*asked, name="average.toml"), "--out", "average"]) == 0
    for one, other in zip(_rows("fixed"), _rows("average"), strict=True):
        # The cells of a sphere are a cube's in symmetry: its dipole answers alike in all
        # orientations; what is left is the two ways' own tolerance of 1e-3.
        assert float(other["c_ext_nm2"]) == pytest.approx(float(one["c_ext_nm2"]), rel=5e-3)
        assert float(other["c_ext_orientation_error_nm2"]) > 0
        assert float(one["c_ext_orientation_error_nm2"]) == 0
    assert "averaged over all orientations" in capsys.readouterr().out


def test_interrupting_keeps_what_is_finished(study):
    many = ("[480, 520, 560]", "{from = 450, to = 650, step = 0.05}")
    finer = ("cells = 8", "cells = 20")
    process = subprocess.Popen(
        [sys.executable, "-m", "dda.cli", "run", study(many, finer), "--out", "out"],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )
    table = Path("out/spectrum.csv")
    deadline = time.monotonic() + 120
    while not table.exists() and process.poll() is None and time.monotonic() < deadline:
        time.sleep(0.05)
    process.send_signal(signal.SIGINT)
    out, err = process.communicate(timeout=60)
    assert process.returncode == 130
    assert "Traceback" not in err
    assert "of 4001 points are kept" in err
    assert 1 <= len(_rows("out")) < 4001
    assert "written to out" in out
    assert set(os.listdir("out")) == FILES


def test_the_runner_yields_a_row_at_a_time(study):
    from dda.study.prepare import prepare
    from dda.study.reader import read_study

    prepared = prepare(read_study(study()))
    seen = []
    tasks = [Task(n, prepared.identities[n], point) for n, point in enumerate(prepared.points)]
    done = Here().run([tasks], lambda *_: None, lambda message, part: seen.append((message, part)))
    first = next(done).outcome.row
    assert first.wavelength_nm == 480
    assert all("480 nm" in message for message, _ in seen)
    assert all(0 <= part <= 1 for _, part in seen)


def test_material_prints_the_source_and_draws(study, capsys):
    assert main(["material", "gold", "--out", "gold.png"]) == 0
    said = capsys.readouterr().out
    assert "Johnson" in said
    assert Path("gold.png").read_bytes().startswith(b"\x89PNG")
    assert main(["material"]) == 0
    assert "silver" in capsys.readouterr().out
    assert main(["material", "glod"]) == 2


def test_shapes_lists_the_catalogue(study, capsys):
    assert main(["shapes"]) == 0
    assert "cube          edge" in capsys.readouterr().out
    assert main(["shapes", "cubee"]) == 2
    assert "cube" in capsys.readouterr().err


def test_help_is_fast_because_nothing_heavy_is_imported():
    code = (
        "import sys, dda.cli\n"
        "try: dda.cli.main(['--help'])\n"
        "except SystemExit: pass\n"
        "heavy = {'pyvista', 'matplotlib', 'trimesh', 'pydantic', 'rich'}\n"
        "sys.exit(', '.join(sorted(heavy & set(sys.modules))) or 0)"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, timeout=60, check=False
    )
    assert done.returncode == 0, done.stderr


@pytest.mark.parametrize(
    "arguments", [["run"], ["walk", "x.toml"], ["run", "x.toml", "--oot", "d"]]
)
def test_a_wrong_command_line_ends_with_code_2(arguments, capsys):
    with pytest.raises(SystemExit) as caught:
        main(arguments)
    assert caught.value.code == 2
    assert "usage:" in capsys.readouterr().err
