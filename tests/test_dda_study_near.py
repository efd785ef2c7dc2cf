"""Near fields of a study: what is written, what is said, and what is refused."""

import csv
from pathlib import Path

import h5py
import numpy as np
import pytest
from matplotlib.image import imread

import dda.report.near_run
from dda.cli import main
from dda.errors import ComputationError
from dda.materials import find
from dda.study.near_levels import peak_of
from dda.study.rows import Row
from validation.mie import sphere

STUDY = """\
name = "small gold sphere"
[particle]
shape = "sphere"
diameter = 40.0
material = "gold"
[host]
index = 1.33
[light]
wavelengths = [530]
[accuracy]
cells = 10
[near_field]
wavelengths = 530
"""
LINE = 'region = "line"\nstart = [24, 0, 0]\nend = [44, 0, 0]\nstep = 4\n'


@pytest.fixture
def near(tmp_path, monkeypatch):
    """Run a study with these lines in [near_field]; give the exit code and the folder."""
    monkeypatch.chdir(tmp_path)

    def run(lines, *changes, command="run"):
        text = STUDY + lines
        for old, new in changes:
            assert old in text
            text = text.replace(old, new)
        Path("gold.toml").write_text(text)
        folder = [] if command == "plan" else ["--out", "out"]
        return main([command, "gold.toml", *folder]), Path("out")

    return run


def _read(path):
    with path.open(newline="") as file:
        return list(csv.DictReader(file))


def _column(rows, name):
    return np.array([float(row[name]) for row in rows])


def _numbers(folder, where):
    rows = _read(folder / "near_field_numbers.csv")
    return {row["quantity"]: row for row in rows if row["where"] == where}


def test_a_points_file_gives_the_field_of_mie_within_the_stated_errors(near):
    Path("places.csv").write_text("x_nm,y_nm,z_nm\n30,0,0\n0,30,0\n0,0,-34\n0,0,0\n20.5,0,0\n")
    code, folder = near('points = "places.csv"\n')
    assert code == 0
    rows = _read(folder / "near_field.csv")
    points = np.stack([_column(rows, f"{axis}_nm") for axis in "xyz"], axis=1)
    eps = complex(find("gold").permittivity(np.array([530.0]))[0])
    exact = (np.abs(sphere(40.0, 530.0, eps, 1.33).fields(points)[0]) ** 2).sum(axis=1)
    e2, error = _column(rows, "e2"), _column(rows, "e2_error")
    # Ten cells across, two cells from the surface and more: within 8 % and twice the error bar.
    assert np.all(np.abs(e2 - exact)[:4] < 0.08 * exact[:4])
    assert np.all(np.abs(e2 - exact)[:4] < 2 * error[:4])
    assert [row["trusted"] for row in rows] == ["true"] * 4 + ["false"]
    assert [row["material"] for row in rows] == ["host", "host", "host", "gold", "host"]
    assert set(_column(rows, "wavelength_nm")) == {530.0}


def test_components_add_up_and_magnetic_fields_come_when_asked_for(near):
    code, folder = near(LINE + "magnetic = true\n")
    assert code == 0
    rows = _read(folder / "near_field.csv")
    e, scattered, h = (
        np.stack(
            [_column(rows, f"{v}_re") + 1j * _column(rows, f"{v}_im") for v in names.split()],
            axis=1,
        )
        for names in ("ex ey ez", "ex_scattered ey_scattered ez_scattered", "hx hy hz")
    )
    # the incident wave is exp(i k z) along x, and the line lies at z = 0; seven digits are written
    np.testing.assert_allclose(e - scattered, np.tile([1, 0, 0], (len(e), 1)), atol=1e-6)
    # e2 is the extrapolated value, the components those of ten cells: they differ by their error
    np.testing.assert_allclose((np.abs(e) ** 2).sum(axis=1), _column(rows, "e2"), rtol=0.1)
    assert 0.5 < np.abs(h[:, 1]).max() < 2  # a small sphere hardly changes H


def test_a_plane_is_drawn_and_its_numbers_are_those_of_the_surface_too(near, capsys):
    code, folder = near(
        'region = "plane"\nnormal = "y"\nsize = 80\nstep = 4\nheight = 6\n'
        "sers = {laser_nm = 532, shift_per_cm = 1000}\n",
        ("530\nregion", '[530, "peak"]\nregion'),
        ("[530]", "[510, 530, 550]"),
    )
    assert code == 0
    printed = capsys.readouterr()
    names = {path.name for path in folder.iterdir()}
    assert {"spectrum.csv", "near_field.csv", "near_field_530.png"} <= names
    assert not [name for name in names if name.endswith(".part")]
    wavelengths = set(_column(_read(folder / "near_field.csv"), "wavelength_nm"))
    assert len(wavelengths) == 2
    assert max(abs(w - 527) for w in wavelengths) < 5  # the plasmon of this sphere
    surface = _numbers(folder, "surface")
    assert int(surface["hot spots"]["value"]) == 2  # the two ends of the dipole
    place = [float(surface["|E|^2, maximum"][f"{axis}_nm"]) for axis in "xyz"]
    assert abs(place[0]) == pytest.approx(26, abs=0.5)
    assert np.hypot(*place[1:]) < 4  # a piece of the surface
    mean, top = (float(surface[f"|E|^2, {name}"]["value"]) for name in ("mean", "maximum"))
    assert mean < top
    # Each factor of SERS is about |E|^2 at the peak: both wavelengths lie near the resonance.
    sers = float(surface["SERS factor, mean"]["value"])
    assert 0.5 < sers / float(surface["|E|^4, mean"]["value"]) < 1.5
    assert "Lasers can blind" in printed.out
    assert "hot spots      2" in printed.out


def test_a_box_is_written_with_its_axes_and_units(near):
    code, folder = near('region = "box"\nsize = [60, 60, 40]\nstep = 10\n')
    assert code == 0
    assert not (folder / "near_field.csv").exists()
    with h5py.File(folder / "near_field.h5") as file:
        group = file["530_nm"]
        assert group["e"].shape == (7, 7, 5, 3)
        assert group["x_nm"][0] == -30
        assert group["x_nm"].attrs["unit"] == "nm"
        e2 = (np.abs(group["e"][()]) ** 2).sum(axis=-1)
        np.testing.assert_allclose(group["e2"][()], e2, rtol=0.3)  # extrapolated against fine
        assert group["material"][3, 3, 2] == 0  # the centre is gold
        assert "Im eps > 0" in file.attrs["time_dependence"]


def test_unpolarized_light_gives_the_mean_of_two_waves(near):
    code, folder = near(LINE, ("[530]", '[530]\npolarization = "unpolarized"'))
    assert code == 0
    rows = _read(folder / "near_field.csv")
    total = sum(
        _column(rows, f"{wave}_e{axis}_{part}") ** 2
        for wave in ("first", "second")
        for axis in "xyz"
        for part in ("re", "im")
    )
    np.testing.assert_allclose(total / 2, _column(rows, "e2"), rtol=0.1)  # extrapolated


def test_a_target_uses_the_finest_cells_of_the_spectrum(near, capsys):
    code, folder = near(LINE, ("cells = 10", "target = 0.3"))
    assert code == 0
    spacing = float(_read(folder / "spectrum.csv")[0]["spacing_nm"])
    assert f"cells of {spacing:.3g} and" in capsys.readouterr().out


@pytest.mark.parametrize(
    ("error", "code", "said"),
    [
        (ComputationError("no luck"), 1, "the spectrum is kept"),
        (KeyboardInterrupt(), 130, "1 of 1 points are kept"),
    ],
)
def test_the_spectrum_stays_when_the_near_field_fails(near, monkeypatch, capsys, error, code, said):
    def fail(*_):
        raise error

    monkeypatch.setattr(dda.report.near_run, "NearRun", fail)
    found, folder = near(LINE)
    assert found == code
    assert len(_read(folder / "spectrum.csv")) == 1
    assert said in capsys.readouterr().err


def test_look_draws_the_hot_spots_of_a_run(near, capsys):
    assert near('region = "surface"\n')[0] == 0
    assert main(["look", "out"]) == 0
    image = imread("out/hot_spots_530.png")[..., :3]
    # yellow of the strongest field and the dark of the weakest are both there, at both views
    yellow = (image[..., 0] > 0.9) & (image[..., 1] > 0.7) & (image[..., 2] < 0.6)
    half = image.shape[1] * 46 // 100
    assert yellow[:, :half].sum() > 200
    assert yellow[:, half : 2 * half].sum() > 200
    assert ((image.max(axis=2) < 0.35) & (image[..., 2] > image[..., 1] + 0.05)).sum() > 200
    Path("empty").mkdir()
    assert main(["look", "empty"]) == 2
    assert "holds no near field" in capsys.readouterr().err


def test_near_fields_of_a_sweep_have_their_folders_and_are_not_computed_twice(near, capsys):
    vary = 'region = "surface"\n[vary]\nparticle.diameter = [30, 40]\n'
    assert near(vary)[0] == 0
    assert Path("out/near/diameter=40/near_field_surface.h5").exists()
    rows = _read(Path("out/near_field_numbers.csv"))
    assert {row["particle.diameter"] for row in rows} == {"30", "40"}
    capsys.readouterr()
    assert near(vary)[0] == 0
    assert "near field at" not in capsys.readouterr().out
    Path("out/near/diameter=40/near_field_numbers.csv").unlink()
    assert near(vary)[0] == 0
    assert capsys.readouterr().out.count("near field at") == 1
    assert main(["look", "out"]) == 2
    assert "near fields of 2 combinations; give one of them" in capsys.readouterr().err


def test_particles_of_every_orientation_have_no_near_field(near, capsys):
    assert near(LINE, ("[530]", '[530]\norientation = "average"'))[0] == 2
    assert 'leave out orientation = "average"' in capsys.readouterr().err


def test_near_fields_of_another_study_are_put_aside(near):
    assert near(LINE)[0] == 0
    assert near("", ("[near_field]\nwavelengths = 530\n", "")) == (0, Path("out"))
    assert not Path("out/near_field.csv").exists()
    assert Path("out/earlier-1/near_field.csv").exists()


@pytest.mark.parametrize(
    ("lines", "words"),
    [
        (LINE + 'points = "a.csv"\n', 'near_field: give either region = "plane"'),
        ('region = "plane"\n', 'region = "plane" needs normal, size, step as well'),
        (LINE + "size = 3\n", 'size: not for region = "line"; it takes start, end, step'),
        (LINE + "magnetik = true\n", 'unknown key; did you mean "magnetic"?'),
        (
            LINE + "sers = {laser_nm = 633, shift_per_cm = 1, hight_nm = 2}\n",
            'sers.hight_nm: unknown key; did you mean "height_nm"?',
        ),
        (LINE.replace("24", "44"), "start and end are the same point"),
        (LINE.replace("line", "lime"), "should be 'plane', 'box', 'line' or 'surface'"),
        (LINE.replace("4\n", "-4\n"), "near_field.step: should be above zero"),
        ('points = "nowhere.csv"\n', "points file"),
        ('region = "surface"\nstep = 30\n', "do not suit a surface 40 nm across"),
        ('region = "plane"\nnormal = "z"\nsize = [1, 2, 3]\nstep = 1\n', "a plane has 2 edges"),
        (LINE + "sers = {laser_nm = 5000, shift_per_cm = 3000}\n", "leaves no light"),
    ],
)
def test_mistakes_of_the_table_are_told_before_anything_is_solved(near, capsys, lines, words):
    assert near(lines) == (2, Path("out"))
    said = capsys.readouterr().err.strip()
    assert len(said.splitlines()) == 1
    assert "gold.toml, line " in said
    assert words in said
    assert not Path("out").exists()


@pytest.mark.parametrize(
    ("value", "words"),
    [
        ("[]", "the list of wavelengths is empty"),
        ('"top"', "is no wavelength"),
        ("[530, 530]", "is listed twice"),
        ("30", "gold"),  # outside the table of the material
    ],
)
def test_wavelengths_that_cannot_be_are_refused(near, capsys, value, words):
    assert near(LINE, ("wavelengths = 530\n", f"wavelengths = {value}\n"))[0] == 2
    said = capsys.readouterr().err
    assert "near_field.wavelengths" in said
    assert words in said


def test_the_peak_of_a_spectrum_that_only_falls_is_its_highest_row():
    rows = [Row(w, c_ext_nm2=c) for w, c in ((500, 3.0), (510, 2.0), (520, float("nan")))]
    assert peak_of(rows) == 500
    with pytest.raises(ComputationError, match="no peak"):
        peak_of(rows[2:])
