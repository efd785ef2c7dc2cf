"""What a study gives of the scattered light: numbers, errors, arrays, mistakes."""

import tomllib
from dataclasses import replace
from functools import cache
from pathlib import Path

import numpy as np
import pytest

import dda
from dda.cli import main
from dda.response.tmatrix_file import load_t_matrix
from dda.study.levels import Memory, answer
from dda.study.plan import make_plan, prepare
from dda.study.point_file import write_point
from dda.study.reader import study_from_tables
from validation.compare import permittivity
from validation.mie import sphere

BALL = """
name = "ball"
particle = {shape = "sphere", diameter = 100, material = "gold"}
host = {index = 1.33}
light = {wavelengths = [560], LIGHT}
accuracy = {cells = 16}
[scattering]
angles = {from = 0, to = 180, step = 45}
multipoles = 2
dichroism = true
"""
AVERAGE = 'orientation = "average"'


def written(text):
    return study_from_tables(tomllib.loads(text), Path("x.toml"), text)


def solved(text):
    prepared = prepare(written(text))
    (point,) = prepared.points
    return answer(point, Memory(prepared.geometries), lambda message, part: None)


@cache
def ball(light):
    return solved(BALL.replace("LIGHT", light))


@cache
def mie():
    return sphere(100, 560, permittivity("gold", 560), 1.33)


LIGHTS = ('polarization = "unpolarized"', "direction = [1, 2, 2], polarization = [2, -1, 0]")
LIGHTS += ('polarization = "left"', AVERAGE)


@pytest.mark.parametrize("light", LIGHTS)
def test_a_sphere_scatters_as_mie_says_within_the_error_bars(light):
    columns, exact = ball(light).more.columns, mie()
    n = np.arange(1, 3)
    factor = 2 * np.pi / exact.k**2 * (2 * n + 1)
    s1, s2 = exact.amplitudes(np.array([0, np.pi]))
    ends = (abs(s1) ** 2 + abs(s2) ** 2) / 2 / exact.k**2
    expected = {
        "asymmetry": exact.asymmetry,
        "c_pr_nm2": exact.c_ext - exact.asymmetry * exact.c_sca,
        "c_forward_nm2_per_sr": ends[0],
        "c_back_nm2_per_sr": ends[1],
        "c_ext_electric_dipole_nm2": factor[0] * exact.a[1].real,
        "c_sca_electric_dipole_nm2": factor[0] * abs(exact.a[1]) ** 2,
        "c_ext_electric_quadrupole_nm2": factor[1] * exact.a[2].real,
        "c_ext_magnetic_dipole_nm2": factor[0] * exact.b[1].real,
    }
    for name, value in expected.items():
        error = columns[name.replace("_nm2", "_error_nm2") if "_nm2" in name else name + "_error"]
        # 16 cells across: the bars are wide, but they say something
        assert abs(columns[name] - value) < 1.5 * error, name
        assert error < 0.3 * abs(value), name


@pytest.mark.parametrize("light", LIGHTS)
def test_a_sphere_is_not_dichroic(light):
    found = ball(light)
    names = [name for name in found.more.columns if "dichroism_nm2" in name]
    assert len(names) == (2 if light == AVERAGE else 4)
    c_ext = found.refined.sections[0]
    # To rounding on average and where the symmetry of the cells exchanges the two linear
    # polarizations solved; with circular ones the solver's tolerance, obliquely the lattice.
    allowed = {LIGHTS[1]: 5e-3, LIGHTS[2]: 1e-3}.get(light, 1e-9)
    for name in names:
        assert abs(found.more.columns[name]) < allowed * c_ext, name


def arrays_of(light):
    return {array.name: array.values for array in ball(light).more.arrays}


@pytest.mark.parametrize("light", LIGHTS)
def test_mueller_matrix_and_pattern_of_a_sphere(light):
    arrays = arrays_of(light)
    angles = arrays["scattering/angles"]
    assert angles.tolist() == [0, 45, 90, 135, 180]
    matrix = arrays["scattering/mueller"][0]
    s1, s2 = mie().amplitudes(np.deg2rad(angles))
    s11, s12 = (abs(s2) ** 2 + abs(s1) ** 2) / 2, (abs(s2) ** 2 - abs(s1) ** 2) / 2
    # 16 cells across overestimate the dipole by 3 %
    assert np.allclose(matrix[:, 0, 0], s11, rtol=0.1)
    assert np.allclose(matrix[:, 0, 1] / matrix[:, 0, 0], s12 / s11, atol=0.02)
    phase = arrays["scattering/phase_function"][0]
    assert np.allclose(phase, 4 * np.pi * s11 / (mie().k ** 2 * mie().c_sca), rtol=0.03)
    if light == LIGHTS[1]:  # in the plane of the polarization: parallel only
        whole = abs(s2) ** 2 / mie().k ** 2
        assert np.allclose(arrays["scattering/dc_sca"][0], whole, rtol=0.1, atol=0.01 * whole[0])
        assert np.allclose(arrays["scattering/reference_axis"], np.array([2, -1, 0]) / 5**0.5)
    else:
        assert np.allclose(arrays["scattering/dc_sca"][0], s11 / mie().k ** 2, rtol=0.1)


def test_columns_agree_with_one_another():
    for light in LIGHTS:
        found = ball(light)
        columns, (c_ext, _, c_sca) = found.more.columns, found.refined.sections
        # c_sca of a row is C_ext - C_abs, that of the far field differs by the balance
        pressure = c_ext - columns["asymmetry"] * c_sca * (1 + found.balance * c_ext / c_sca)
        assert columns["c_pr_nm2"] == pytest.approx(pressure, rel=1e-3)
        parts = [v for k, v in columns.items() if k.startswith("c_sca_") and "error" not in k]
        assert sum(parts) == pytest.approx(c_sca, rel=5e-3)


HELIX = """
name = "helix"
particle = {shape = "helix", diameter = 40, pitch = 30, turns = 1.5, thickness = 16, hand = "HAND"
material = "gold"}
host = {index = 1.33}
light = {wavelengths = [560], LIGHT}
accuracy = {cells = 12}
scattering = {dichroism = true}
""".replace("\nmaterial", ", material")


@pytest.mark.parametrize("light", [AVERAGE, "direction = [0, 0, 1]"])
def test_dichroism_changes_its_sign_with_the_hand(light):
    hands = [
        solved(HELIX.replace("HAND", hand).replace("LIGHT", light)).more.columns
        for hand in ("right", "left")
    ]
    for name in ("c_ext_circular_dichroism_nm2", "c_abs_circular_dichroism_nm2", "dissymmetry"):
        right, left = (columns[name] for columns in hands)
        # the cells of the one are the mirror image of those of the other, to rounding of voxels
        assert right == pytest.approx(-left, rel=0.02)
    assert abs(hands[0]["dissymmetry"]) > 0.01


def test_the_given_polarization_is_the_axis_of_linear_dichroism():
    text = BALL.replace('"sphere", diameter', '"rod", axis = "z", length = 40, diameter')
    text = text.replace("diameter = 100", "diameter = 16").replace("cells = 16", "cells = 10")
    along, across = (
        solved(text.replace("LIGHT", f"direction = [1, 0, 0], polarization = {p}"))
        for p in ([0, 0, 1], [0, 1, 0])
    )
    # the two are solved for in both studies, each to 1e-3
    difference = along.refined.sections[0] - across.refined.sections[0]
    name = "c_ext_linear_dichroism_nm2"
    assert abs(difference) > 0.2 * across.refined.sections[0]
    assert along.more.columns[name] == pytest.approx(difference, rel=0.01)
    assert across.more.columns[name] == pytest.approx(-difference, rel=0.01)


def test_a_target_extrapolates():
    text = BALL.replace("LIGHT", LIGHTS[0]).replace("cells = 16", "target = 0.1")
    found = solved(text)
    assert len(found.refined.levels) >= 3
    columns = found.more.columns
    # the spacing's error of 16 cells is gone: within half a per cent of Mie
    pressure = mie().c_ext - mie().asymmetry * mie().c_sca
    assert columns["c_pr_nm2"] == pytest.approx(pressure, rel=5e-3)


def test_the_t_matrix_of_a_points_file_is_read_again(tmp_path):
    found = solved(BALL.replace("LIGHT", AVERAGE) + "t_matrix = true\n")
    arrays = found.more.arrays
    name, _ = write_point(tmp_path, "0123abcd", {}, found.refined.levels, arrays)
    t = load_t_matrix(tmp_path / name, "t_matrix")
    trace = -2 * np.pi / t.k**2 * np.trace(t.matrix).real
    assert trace == pytest.approx(found.refined.sections[0], rel=1e-12)
    assert all(array.about for array in arrays)


def test_without_the_table_there_is_nothing():
    text = BALL.replace("LIGHT", LIGHTS[0])
    more = solved(text[: text.index("[scattering]")].replace("cells = 16", "cells = 6")).more
    assert (more.columns, more.arrays) == ({}, ())


@pytest.mark.parametrize(
    ("line", "said"),
    [
        ("angles = {from = 0, to = 200, step = 10}", "between 0"),
        ("angles = {from = 90, to = 0, step = 10}", "above to"),
        ("angles = {from = 0, to = 180, step = 0}", "step"),
        ("angles = {from = 0, to = 180, step = 0.01}", "more than"),
        ("angles = {from = 0, until = 180, step = 5}", "takes from, to and step"),
        ('angles = "all"', "list of angles"),
        ("angles = [0, 30, 30]", "twice"),
        ("angles = []", "list of angles"),
        ("azimuths = [0, 90]", "give angles too"),
        ("multipoles = 9", "multipoles"),
        ("multipoles = true", "multipoles"),
        ('dichroism = "circular"', "dichroism"),
        ("t_matrix = true", 'orientation = "average"'),
        ("asymetry = true", "asymetry"),
    ],
)
def test_mistakes(line, said, tmp_path, capsys):
    study = tmp_path / "ball.toml"
    text = BALL.replace("LIGHT", LIGHTS[0])
    study.write_text(text[: text.index("angles")] + line + "\n")
    assert main(["run", str(study), "--out", str(tmp_path / "out")]) == 2
    error = capsys.readouterr().err
    assert said in error
    assert "line 8" in error or "line 7: scattering:" in error  # of the key, or of the table
    assert not (tmp_path / "out").exists()


def test_mistakes_that_the_light_shows(tmp_path, capsys):
    study = tmp_path / "ball.toml"
    for light, said in (
        (AVERAGE, "all azimuths are alike"),
        ("beam = {waist_nm = 400}", "plane wave"),
    ):
        study.write_text(BALL.replace("LIGHT", light) + "azimuths = [0, 90]\n")
        assert main(["plan", str(study)]) == 2
        assert said in capsys.readouterr().err


def test_the_other_polarization_is_orthogonal():
    from dda.study.scattering import partner

    for light in LIGHTS[1:3]:
        (point,) = prepare(written(BALL.replace("LIGHT", light))).points
        wave = dda.plane_wave(point.direction, point.polarization)
        (other,) = partner(point, [wave])
        assert abs(np.vdot(wave.polarization, other.polarization)) < 1e-12
        assert abs(other.polarization @ wave.direction) < 1e-12
        assert np.isclose(np.linalg.norm(other.polarization), 1)
    bare = replace(point, tables=point.tables.model_copy(update={"scattering": None}))
    assert partner(bare, [wave]) == ()


def test_the_plan_counts_the_other_polarization_and_the_columns():
    def steps(text):
        return sum(make_plan(written(text)).cost.steps)

    text = BALL.replace("cells = 16", "cells = 8")
    single = text.replace("LIGHT", "polarization = [1, 0, 0]")
    alone = steps(single[: single.index("[scattering]")])
    both = steps(single)
    assert 1.2 * alone < both < 2 * alone  # the lattice is set up once
    assert steps(text.replace("LIGHT", LIGHTS[0])) == pytest.approx(both)
    # a sphere's cells have every symmetry: orders 1 to 3 take 1 + 2 + 3 waves of either kind at
    # most, and there is one electric dipole at least
    assert 0.5 * alone < steps(text.replace("LIGHT", AVERAGE)) < 12 * alone
