"""Particles of several parts in a study: what they are, and what is said of each mistake."""

import math
import tomllib
from pathlib import Path

import numpy as np
import pytest

import shapes
from dda.errors import InputError
from dda.study.particle import build_particle
from dda.study.points import points_of
from dda.study.prepare import prepare
from dda.study.reader import read_study, study_from_tables

EXAMPLE = Path(__file__).parent.parent / "dda/study/examples/drilled_cube.toml"
GOOD = EXAMPLE.read_text()


def _particle(text, folder=Path()):
    study = study_from_tables(tomllib.loads(text), folder / "parts.toml", text)
    return build_particle(study.tables.particle, study.folder)


def _refused(tmp_path, old, new):
    assert GOOD.count(old) >= 1
    path = tmp_path / "parts.toml"
    path.write_text(GOOD.replace(old, new, 1))
    with pytest.raises(InputError) as caught:
        prepare(read_study(path))
    return str(caught.value)


def test_volumes_and_place_of_the_drilled_cube():
    cells = shapes.voxelize(_particle(GOOD), spacing=2.0)
    gold, silica = (
        cells.fraction[:, cells.materials.index(name)].sum() * 8 for name in ("gold", "silica")
    )
    cube = shapes.cube(edge=50, rounding=6).volume()
    # The cube's bottom at z = 33 takes a cap of height 2 off the bead of radius 35; below the cube
    # the hole, from 32 to 92, reaches one nm deeper into the bead.
    cap = math.pi * 2**2 * (35 - 2 / 3)
    bead = 4 / 3 * math.pi * 35**3
    assert gold == pytest.approx(cube - math.pi * 8**2 * 50, rel=5e-3)  # cells share surfaces out
    assert silica == pytest.approx(bead - cap - math.pi * 8**2, rel=2e-3)
    low, high = _particle(GOOD).bounds
    np.testing.assert_allclose([low[2], high[2]], [-35, 58 + 25], atol=1e-9)
    assert cells.materials == ("silica", "gold")


def test_the_same_particle_as_when_built_in_python():
    made = shapes.assemble(
        [
            shapes.sphere(70, material="silica"),
            shapes.placed(
                shapes.cube(50, 6, material="gold"), (0, 0, 58), {"angle": 45, "axis": (0, 0, 1)}
            ),
            shapes.cylinder(16, 60).moved((0, 0, 62)),
        ],
        [False, False, True],
    )
    ours, theirs = (shapes.voxelize(p, cells=20) for p in (_particle(GOOD), made))
    np.testing.assert_array_equal(ours.index, theirs.index)
    np.testing.assert_allclose(ours.window, theirs.window, atol=1e-6)  # single precision inside


def test_a_mesh_is_a_part_and_the_table_names_the_material_of_all(tmp_path):
    import trimesh

    trimesh.creation.box((0.02, 0.02, 0.02)).export(tmp_path / "box.stl")
    text = """
name = "bitten box"
particle = {material = "gold", parts = [
  {mesh = "box.stl", unit = "um", position = [10, 0, 0], rotation = {angle = 90}},
  {shape = "cuboid", sides = [10, 20, 20], position = [15, 0, 0], subtract = true},
]}
host = {index = 1.33}
light = {wavelengths = [550]}
accuracy = {cells = 10}
"""
    particle = _particle(text, tmp_path)
    assert particle.materials == ("gold",)
    cells = shapes.voxelize(particle, spacing=2.0)
    # Half of a box of 20 nm is left; its planes lie on cells' faces, so nothing is shared.
    assert cells.fraction.sum() * 8 == pytest.approx(4000, rel=2e-3)


def test_points_of_different_parts_do_not_share_cells():
    keys = set()
    for angle in ("45", "30"):
        text = GOOD.replace("angle = 45", f"angle = {angle}")
        study = study_from_tables(tomllib.loads(text), Path("parts.toml"), text)
        keys.add(points_of(study)[0].geometry_key)
    assert len(keys) == 2


@pytest.mark.parametrize(
    ("old", "new", "key", "words"),
    [
        ("edge = 50.0", "edge = -50.0", "particle.parts[1].edge", "> 0"),
        ("edge = 50.0", "edge = true", "particle.parts[1].edge", "number"),
        ("edge = 50.0", "egde = 50.0", "particle.parts[1].egde", "did you mean 'edge'"),
        ('shape = "cube"', 'shape = "cubee"', "particle.parts[1].shape", "cube"),
        ('shape = "cube"', 'mesh = "cube.stl"', "particle.parts[1]", "a part given by mesh"),
        ('shape = "cube"\n', "", "particle.parts[1]", 'shape = "cube" or mesh'),
        ("[0, 0, 58]", "[0, 58]", "particle.parts[1].position", "three numbers"),
        ("[0, 0, 58]", '[0, 0, "58"]', "particle.parts[1].position[2]", "a number"),
        ("angle = 45", "degrees = 45", "particle.parts[1].rotation.degrees", "angle"),
        ("axis = [0, 0, 1]", "axis = [0, 0, 0]", "particle.parts[1].rotation.axis", "zero"),
        ("subtract = true", 'subtract = "yes"', "particle.parts[2].subtract", "true or false"),
        (
            "subtract = true",
            'subtract = true\nmaterial = "gold"',
            "particle.parts[2]",
            "has no material",
        ),
        (
            'material = "silica"',
            "subtract = true",
            "particle.parts[0].subtract",
            "nothing to subtract from",
        ),
        ('material = "gold"\n', "", "particle.parts[1].material", "missing"),
        ('material = "gold"', 'material = "glod"', "particle.parts[1].material", "gold"),
        (
            'shape = "sphere"\ndiameter = 70.0',
            'mesh = "none.stl"\n#',
            "particle.parts[0].mesh",
            "no file",
        ),
    ],
)
def test_a_mistake_names_part_key_and_line(tmp_path, old, new, key, words):
    message = _refused(tmp_path, old, new)
    assert f": {key}: " in message
    assert words in message
    assert ", line " in message


def test_parts_beside_another_source_are_refused():
    text = GOOD.replace("[[particle.parts]]", '[particle]\nshape = "cube"\n[[particle.parts]]', 1)
    with pytest.raises(InputError, match="shape and parts"):
        _particle(text)
    text = GOOD.replace("[[particle.parts]]", "[particle]\nedge = 4\n[[particle.parts]]", 1)
    with pytest.raises(InputError, match="edge: a particle given by parts"):
        _particle(text)
