"""Beams, emitters, heat and averaged SERS factors of a study."""

import csv
from pathlib import Path

import h5py
import numpy as np
import pytest

import dda.study.near
from dda.cli import main
from dda.design.sers import stokes_wavelength
from dda.materials import find
from dda.report.near_run import run_near
from dda.response.far_field import sphere_quadrature
from dda.study.levels import Memory
from dda.study.prepare import prepare
from dda.study.reader import read_study
from dda.study.runner import compute
from validation.dipole_sphere import dipole_near_sphere
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
wavelengths = [550]
BEAM
[accuracy]
cells = 14
NEAR
"""
EPS = complex(find("gold").permittivity(np.array([550.0]))[0])
MIE = sphere(40.0, 550.0, EPS, 1.33)


@pytest.fixture
def work(tmp_path, monkeypatch):
    """Run a study with this beam and these lines; give the exit code and the folder."""
    monkeypatch.chdir(tmp_path)

    def run(beam="", near="", command="run", cells=14):
        if near:
            near = "[near_field]\nwavelengths = 550\n" + near
        text = STUDY.replace("BEAM", beam).replace("NEAR", near)
        Path("gold.toml").write_text(text.replace("cells = 14", f"cells = {cells}"))
        folder = [] if command == "plan" else ["--out", "out"]
        return main([command, "gold.toml", *folder]), Path("out")

    return run


def _read(path):
    with path.open(newline="") as file:
        return list(csv.DictReader(file))


def _numbers(folder, where):
    rows = _read(folder / "near_field_numbers.csv")
    return {
        row["quantity"]: (float(row["value"]), float(row["error"] or "nan"))
        for row in rows
        if row["where"] == where
    }


@pytest.mark.parametrize(
    "beam",
    [
        "beam = {waist_nm = 3000}",
        "beam = {waist_nm = 3000, focus = [100, 50, 20]}\npolarization = [0, 1, 0]",
        "beam = {position = [0, 0, 9000], moment = [5, 0, 0]}",
        # brighter at the particle than at the place whose intensity is 1, by the distance squared
        "beam = {position = [0, 0, 9000], moment = [5, 0, 0], reference = [0, 0, -9000]}",
    ],
)
def test_wide_beams_and_distant_dipoles_are_plane_waves(work, beam):
    code, folder = work(beam)
    assert code == 0
    (row,) = _read(folder / "spectrum.csv")
    nearer = 4 if "reference" in beam else 1
    # 14 cells: 2 %; the waves' curvature is nothing here
    assert float(row["c_ext_nm2"]) == pytest.approx(nearer * MIE.c_ext, rel=0.02)
    assert float(row["c_abs_nm2"]) == pytest.approx(nearer * MIE.c_abs, rel=0.02)


def test_the_plan_says_what_a_cross_section_is_and_what_the_near_field_takes(work, capsys):
    near = "heat = {power_mw = 2}\n[near_field.sers]\nlaser_nm = 540\nshift_per_cm = 900\n"
    assert work("beam = {waist_nm = 400}", near, "plan")[0] == 0
    said = " ".join(capsys.readouterr().out.split())
    assert "powers over the intensity at the focus" in said
    assert "near field 6 solves more on two lattices" in said  # three wavelengths, two lattices


def test_emitters_have_the_decay_rates_of_the_exact_sphere_within_their_bars(work):
    code, folder = work(
        near="""
[[near_field.emitters]]
position = [0, 36, 0]
orientation = [0, 2, 0]
[[near_field.emitters]]
position = [0, 0, -36]
quantum_yield = 0.4
"""
    )
    assert code == 0
    radial, tangential = dipole_near_sphere(40.0, 16.0, 550.0, EPS, 1.33)
    found = _numbers(folder, "emitter 1")
    value, error = found["radiative decay rate over that in the host"]
    assert abs(value - radial.radiative) < error < 0.02 * value
    value, error = found["total decay rate over that in the host"]
    assert abs(value - radial.total) < error < 0.1 * value
    value, error = found["quantum yield"]
    assert abs(value - radial.quantum_yield) < error < 0.1 * value
    total = (radial.total + 2 * tangential.total) / 3
    radiative = (radial.radiative + 2 * tangential.radiative) / 3
    found = _numbers(folder, "emitter 2")
    value, error = found["quantum yield"]
    # an excitation is lost in the emitter itself at 1/0.4 - 1 times the radiative rate
    assert abs(value - radiative / (total + 1.5)) < error
    value, error = found["total decay rate over that in the host"]
    assert abs(value - (0.4 * total + 0.6)) < error


def test_heat_is_that_of_mie(work):
    Path("places.csv").write_text("x_nm,y_nm,z_nm\n0,0,0\n0,4,3\n60,0,0\n")
    code, folder = work(near='points = "places.csv"\nheat = {intensity_w_per_cm2 = 1e5}\n')
    assert code == 0
    found = _numbers(folder, "particle")
    power, error = found["absorbed power"]
    assert abs(power - MIE.c_abs * 1e-18 * 1e9) < error < 0.05 * power
    rows = _read(folder / "near_field.csv")
    density = [float(row["heat_w_per_m3"]) for row in rows]
    e2 = (np.abs(MIE.fields(np.array([[0.0, 0, 0], [0, 4, 3]]))[0]) ** 2).sum(axis=1)
    k = 2 * np.pi * 1.33 / 550
    exact = 1e9 * k * (EPS / 1.33**2).imag * e2 * 1e9
    assert density[:2] == pytest.approx(exact, rel=0.05)  # fields inside, 14 cells
    assert density[2] == 0
    with h5py.File(folder / "near_field_heat.h5") as file:
        group = file["550_nm"]
        inside = group["material"][()] == 0
        spacing = group.attrs["spacing_nm"]
        total = group["heat"][()][inside].sum() * (spacing * 1e-9) ** 3
        assert group["heat"].attrs["unit"] == "W/m^3"
    # a sum over cells whose middles are inside: rough at the surface
    assert total == pytest.approx(power, rel=0.1)


def test_power_of_a_beam_is_spread_over_its_focus(work, capsys):
    near = 'region = "plane"\nnormal = "y"\nsize = 60\nstep = 5\nheat = {power_mw = 1}\n'
    assert work("beam = {waist_nm = 2000}", near)[0] == 0
    intensity, _ = _numbers(Path("out"), "particle")["incident intensity"]
    # 2 P/(pi w^2), to a per cent at this waist
    assert intensity == pytest.approx(2e-3 / (np.pi * (2e-6) ** 2), rel=0.01)
    assert Path("out/near_field_heat_550.png").stat().st_size > 10_000
    assert not list(Path("out").glob(".*"))
    assert "Lasers can blind" in capsys.readouterr().out


def test_the_average_over_orientations_of_a_sphere_is_the_mean_over_its_surface(work, capsys):
    near = (
        "height = 6\nstep = 8\n"
        "sers = {laser_nm = 550, shift_per_cm = 500, height_nm = 6, orientation = 'average'}\n"
    )
    assert work(near=near, cells=10)[0] == 0
    value, error = _numbers(Path("out"), "surface")["SERS factor of all orientations, mean"]
    directions, weights = sphere_quadrature(10)
    exact = np.ones(len(directions))
    for wavelength in (550.0, stokes_wavelength(550.0, 500.0)):
        eps = complex(find("gold").permittivity(np.array([wavelength]))[0])
        fields = sphere(40.0, wavelength, eps, 1.33).fields(26 * directions)[0]
        exact *= (np.abs(fields) ** 2).sum(axis=1)
    assert abs(value - np.average(exact, weights=weights)) < error < 0.3 * value
    assert "mean over all orientations" in capsys.readouterr().out


def test_one_call_writes_the_near_field_of_any_point_into_its_own_folder(work, tmp_path):
    assert work(near="step = 8\n", command="plan")[0] == 0
    prepared = prepare(read_study("gold.toml"))
    (point,) = prepared.points
    smaller = point.particle.model_validate({**point.particle.model_dump(), "diameter": 30.0})
    other = point.at(550.0, particle=smaller)
    rows = [compute(other, Memory(prepared.geometries), lambda *_: None).row]
    assert run_near(other, rows, prepared.geometries, tmp_path / "second", "another")
    with h5py.File(tmp_path / "second/near_field_surface.h5") as file:
        group = file["550_nm"]
        reach = np.linalg.norm(group["points_nm"][()], axis=1)
        height = group.attrs["height_nm"]
    assert reach == pytest.approx(15 + height, abs=0.1)


def test_a_near_field_that_ends_early_leaves_nothing(work, monkeypatch, capsys):
    near = "step = 8\nsers = {laser_nm = 550, shift_per_cm = 500}\n"

    def fail(*_):
        raise KeyboardInterrupt

    monkeypatch.setattr(dda.study.near, "sers_answer", fail)
    assert work(near=near)[0] == 130
    assert not list(Path("out").glob("near_field*"))
    assert not list(Path("out").glob(".near*"))
    capsys.readouterr()


@pytest.mark.parametrize(
    ("beam", "near", "words"),
    [
        ("beam = {waist_nm = 100}", "", "waist_nm: at 550 nm: a waist of 100 nm is tighter"),
        ("beam = {waist_nm = 400, position = [0, 0, 1]}", "", "a beam is either {waist_nm"),
        ("beam = {waist = 400}", "", 'did you mean "waist_nm"?'),
        ("beam = {position = [0, 0, 24], moment = [0, 0, 1]}", "", "can be told from"),
        ("beam = {position = [0, 0, 0], moment = [0, 0, 1]}", "", "as reference"),
        ("beam = {position = [0, 0, 60]}", "", "needs its moment as well"),
        (
            'beam = {waist_nm = 400}\norientation = "average"',
            "",
            'orientation = "average" is for plane waves',
        ),
        (
            "polarization = [1, 0, 0]\nbeam = {position = [0, 0, 60], moment = [0, 1, 0]}",
            "",
            "polarization would mean nothing",
        ),
        ("", "emitters = [{position = [0, 0, 22]}]", "emitters[0].position: the emitter at"),
        ("", "emitters = {position = [0, 0, 60]}", "[[near_field.emitters]]"),
        ("", 'emitters = [{position = [0, 0, 60], orientation = "x"}]', "is no orientation"),
        ("", "emitters = [{position = [0, 0, 60], quantum_yield = 2}]", "quantum_yield"),
        ("", "emitters = [{position = [0, 0, 60], wavelength_nm = 20}]", "wavelength_nm"),
        ("", "heat = {power_mw = 1}", "only a focused beam has a power"),
        ("", "heat = {}", "one of the two"),
        (
            "beam = {position = [0, 0, 60], moment = [0, 0, 1]}",
            'region = "line"\nstart = [0, 0, 30]\nend = [0, 0, 70]\nstep = 5',
            "where the field is infinite",
        ),
        (
            "beam = {waist_nm = 400}",
            'sers = {laser_nm = 530, shift_per_cm = 1000, orientation = "average"}',
            "leave out light.beam",
        ),
    ],
)
def test_mistakes_are_told_with_their_line_before_anything_is_solved(
    work, capsys, beam, near, words
):
    assert work(beam, near) == (2, Path("out"))
    said = capsys.readouterr().err.strip()
    assert len(said.splitlines()) == 1
    assert "gold.toml, line " in said
    assert words in said
    assert not Path("out").exists()


def test_the_dipole_that_lights_the_particle_is_no_hot_spot(work):
    beam = "beam = {position = [0, 0, 45], moment = [0, 0, 1]}"
    assert work(beam, 'region = "plane"\nnormal = "y"\nsize = 140\nstep = 4\n')[0] == 0
    rows = _read(Path("out/near_field_numbers.csv"))
    (top,) = [r for r in rows if (r["where"], r["quantity"]) == ("plane", "|E|^2, maximum")]
    # between the dipole and the sphere, some nm from the dipole
    assert 20 < float(top["z_nm"]) < 38
    assert abs(float(top["x_nm"])) <= 8


def test_near_fields_of_anisotropic_materials_are_refused_first(work, capsys, monkeypatch):
    crystal = '[materials.crystal]\naxes = ["silica", "silica", "1.7"]\n[near_field]\n'
    text = STUDY.replace("BEAM", "").replace("NEAR", crystal + "wavelengths = 550\n")
    Path("crystal.toml").write_text(text.replace('"gold"', '"crystal"'))
    assert main(["run", "crystal.toml", "--out", "out"]) == 2
    said = capsys.readouterr().err
    assert "crystal.toml, line " in said
    assert 'anisotropic materials such as "crystal"' in said
