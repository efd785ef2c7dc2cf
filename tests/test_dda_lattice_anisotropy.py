"""Anisotropic materials: against isotropic ones, electrostatics, and turned with the light."""

import tomllib
from pathlib import Path

import numpy as np
import pytest

import dda
import shapes
from dda.errors import InputError
from dda.lattice import relative_system
from dda.lattice.anisotropy import kept_mirrors, mixed_across
from dda.lattice.sectors import sectors
from dda.materials import find
from dda.materials.anisotropic import anisotropic, rotation_matrix
from dda.response.symmetry import find_sectors
from dda.study.prepare import prepare
from dda.study.reader import study_from_tables

BENT = np.diag([2.4 + 0.1j, 3.1 + 0.2j, 4.2 + 0.3j])
TURN = rotation_matrix((1, 2, 2), 37)


def _sphere(cells=12, diameter=20.0):
    return shapes.voxelize(shapes.sphere(diameter, material="it"), cells=cells)


def _turned(eps, turn):
    return (turn @ eps @ turn.T)[None]


def _c_ext(system, direction=(0, 0, 1), polarization=(1, 0, 0)):
    light = dda.plane_wave(direction=direction, polarization=polarization)
    return dda.cross_sections(dda.solve(system, light, tolerance=1e-9)).c_ext


@pytest.mark.parametrize("surface", ["window", "cell", "whole"])
@pytest.mark.parametrize("kind", ["fcd-corners", "fcd", "rr"])
def test_an_isotropic_tensor_is_the_scalar(surface, kind):
    particle = shapes.core_shell(of=shapes.sphere(14, material="silica"), thickness=4)
    cells = shapes.voxelize(particle, cells=10)
    options = {"surface": surface, "polarizability": kind}
    eps = np.array([-4 + 2j, 1.2]) if cells.materials[0] == "gold" else np.array([1.2, -4 + 2j])
    scalar = relative_system(cells, 560.0, 1.33, eps, **options)
    tensor = relative_system(cells, 560.0, 1.33, eps[:, None, None] * np.eye(3), **options)
    v = np.random.default_rng(3).normal(size=(scalar.n, 3)) + 0j
    for name in ("alpha", "alpha_inverse"):
        one, other = (getattr(s, name).apply(v, np.empty_like(v)) for s in (scalar, tensor))
        # rounding; inverting a tensor loses a digit or two near a resonance of a cell
        np.testing.assert_allclose(other, one, rtol=0, atol=1e-11 * abs(one).max())


def test_an_axis_of_an_interior_cell_has_the_polarizability_of_its_principal_value():
    whole = relative_system(_sphere(8), 560.0, 1.0, BENT[None], surface="whole")
    full = whole.alpha_inverse.full[0]
    for axis, eps in enumerate(np.diag(BENT)):
        scalar = relative_system(_sphere(8), 560.0, 1.0, np.array([eps]), surface="whole")
        assert full[axis] == pytest.approx(scalar.alpha_inverse.scalar[0], rel=1e-12)  # rounding
    np.testing.assert_allclose(full[3:], 0, atol=1e-15)


@pytest.mark.parametrize("turn", [np.eye(3), TURN], ids=["along the lattice", "turned"])
def test_a_small_sphere_has_the_electrostatic_polarizability_of_each_axis(turn):
    # alpha_i = a^3 (eps_i - 1)/(eps_i + 2) (Bohren & Huffman 1983, section 5.6); at 2 pi a / lambda
    # = 0.006 retardation is far below the error of 24 cells across.
    wavelength, radius = 10_000.0, 10.0
    system = relative_system(_sphere(24, 2 * radius), wavelength, 1.0, _turned(BENT, turn))
    exact = radius**3 * turn @ np.diag((np.diag(BENT) - 1) / (np.diag(BENT) + 2)) @ turn.T
    found = np.empty((3, 3), complex)
    for axis, direction in ((0, (0, 0, 1)), (1, (0, 0, 1)), (2, (1, 0, 0))):
        light = dda.plane_wave(direction=direction, polarization=np.eye(3)[axis])
        found[:, axis] = dda.solve(system, light, tolerance=1e-7).p.sum(axis=0)
    # The sphere's cells are off by 8e-5, along the lattice and turned alike.
    assert abs(found - exact).max() < 3e-4 * abs(exact).max()


def test_material_and_light_turned_together_by_a_symmetry_of_the_lattice():
    quarter = rotation_matrix((1, 1, 1), 120)  # x to y to z
    cells = _sphere()
    eps = _turned(BENT, TURN)
    before = _c_ext(relative_system(cells, 560.0, 1.33, eps))
    after = _c_ext(
        relative_system(cells, 560.0, 1.33, quarter @ eps @ quarter.T),
        quarter @ (0, 0, 1),
        quarter @ (1, 0, 0),
    )
    # Cells of a sphere after an exchange of axes agree to a few 1e-4 of a surface cell.
    assert after == pytest.approx(before, rel=1e-4)


def test_material_and_light_turned_together_by_any_angle():
    cells = _sphere(16)
    before = _c_ext(relative_system(cells, 560.0, 1.33, BENT[None]))
    system = relative_system(cells, 560.0, 1.33, _turned(BENT, TURN))
    after = _c_ext(system, TURN @ (0, 0, 1), TURN @ (1, 0, 0))
    assert after == pytest.approx(before, rel=1e-4)  # the lattice itself: 3e-6
    # and the axes matter: turned alone, the same material absorbs another amount
    assert abs(_c_ext(system) / before - 1) > 0.05


def test_mirrors_that_the_axes_break_are_not_used():
    cells = _sphere(8)
    about_z = rotation_matrix((0, 0, 1), 30)
    straight = relative_system(cells, 560.0, 1.33, BENT[None])
    tilted = relative_system(cells, 560.0, 1.33, _turned(BENT, about_z))
    askew = relative_system(cells, 560.0, 1.33, _turned(BENT, TURN))
    assert [len(sectors(s)) for s in (straight, tilted, askew)] == [8, 2, 1]
    assert tilted.mirrors == (False, False, True)
    # with the sectors as without: the sum of both mirror images is no other particle
    light = dda.plane_wave(direction=(1, 0, 0), polarization=(0, 1, 0))
    with_, without = (
        dda.solve(tilted, light, tolerance=1e-10, mirrors=m).p for m in (None, (False,) * 3)
    )
    np.testing.assert_allclose(with_, without, atol=1e-8 * abs(without).max())  # of the solver
    with pytest.raises(ValueError, match="not symmetric"):
        sectors(tilted, (True, False, False))


def test_axes_that_differ_a_little_are_not_exchanged():
    weak = np.diag([2.40, 2.40, 2.41])[None]  # less than what exchanged cells may differ by
    plain = find_sectors(relative_system(_sphere(8), 560.0, 1.33, np.array([2.4])))
    bent = find_sectors(relative_system(_sphere(8), 560.0, 1.33, weak))
    assert (len(plain.group), len(bent.group)) == (48, 16)


def test_tensors_across_a_surface_keep_both_continuities():
    # Layers of fractions f in series across n: one E_t, one D_n, the others averaged.
    rng = np.random.default_rng(5)
    normal = np.array([[0.6, 0.0, 0.8]])
    eps = np.stack([_turned(BENT, TURN)[0], _turned(BENT[::-1, ::-1], TURN.T)[0]])
    shares = np.array([0.3, 0.5])
    mixed = mixed_across(shares[None] + 0j, np.array([0.2]), normal, eps)[0]
    np.testing.assert_allclose(mixed, mixed.T, atol=1e-14)
    n = normal[0]
    field, d_normal = rng.normal(size=3), 1.7
    e_t = field - (field @ n) * n
    mean_e, mean_d = np.zeros(3, complex), np.zeros(3, complex)
    for share, one in zip([*shares, 0.2], [*eps, np.eye(3)], strict=True):
        e = e_t + n * (d_normal - n @ one @ e_t) / (n @ one @ n)
        mean_e, mean_d = mean_e + share * e, mean_d + share * one @ e
    np.testing.assert_allclose(mixed @ mean_e, mean_d, rtol=1e-12)


def test_kept_mirrors_look_at_every_material():
    both = np.stack([BENT, _turned(BENT, rotation_matrix((1, 0, 0), 20))[0]])
    assert kept_mirrors(both) == (True, False, False)


STUDY = """
name = "crystal"
particle = {shape = "sphere", diameter = 30, material = "crystal"}
host = {material = "water"}
light = {wavelengths = [560]}
accuracy = {cells = 6}
[materials.lined]
index = 1.9
[materials.crystal]
axes = ["silica", "lined", "1.76"]
rotation = {angle = 90, axis = [0, 0, 1]}
"""


def _prepared(text=STUDY):
    return prepare(study_from_tables(tomllib.loads(text), Path("crystal.toml"), text))


def test_a_study_names_the_axes_and_turns_them():
    media = _prepared().media
    eps = media.particle["crystal"].tensor(560.0)
    silica = find("silica").permittivity(560.0)
    # a quarter turn about z brings the first axis to y and the second one to -x
    np.testing.assert_allclose(eps, np.diag([1.9**2, silica, 1.76**2]), atol=1e-12)
    index = media.relative_index(560.0)
    assert list(index) == [f"crystal, axis {k}" for k in (1, 2, 3)]
    system = dda.system(_prepared().cells, 560.0, media.host, materials=dict(media.particle))
    np.testing.assert_allclose(system.tensors[0] * system.n_host**2, eps)


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('["silica", "lined", "1.76"]', '["silica", "lined"]', "three principal axes"),
        ('"lined"', '"linde"', "linde"),
        ("angle = 90", "degrees = 90", "'rotation.degrees'"),
        ("axis = [0, 0, 1]", "axis = [0, 0, 0]", "length zero"),
        ('{material = "water"}', '{material = "crystal"}', "a host must be isotropic"),
        ('"silica"', "{axes = [1.5, 1.6, 1.7]}", "a principal axis must be isotropic"),
        ("index = 1.9", "axes = [1.5, 1.6, 1.7]", "a principal axis must be isotropic"),
    ],
)
def test_mistakes_in_the_axes_are_explained(old, new, words):
    assert old in STUDY
    with pytest.raises(InputError) as caught:
        _prepared(STUDY.replace(old, new))
    assert words in str(caught.value)


def test_an_axis_with_the_hosts_permittivity_is_refused():
    with pytest.raises(InputError, match="along one of its axes"):
        relative_system(_sphere(6), 560.0, 1.33, _turned(np.diag([1.0, 2.0, 3.0]), TURN))


def test_the_axes_are_those_of_a_rotation():
    with pytest.raises(InputError, match="rotation matrix"):
        anisotropic([find(1.5)] * 3, 2 * np.eye(3))
