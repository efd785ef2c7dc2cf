"""The fingerprint of a point: the same for the same answer, another for another one."""

from pathlib import Path

import pytest

import shapes
from dda.errors import InputError
from dda.study.identity import files_of, fingerprints, near_fingerprint
from dda.study.points import points_of
from dda.study.reader import study_from_text
from dda.study.rows import Row

STUDY = """\
name = "gold cubes"
[particle]
shape = "cube"
edge = 20
material = "gold"
[host]
index = 1.33
[light]
wavelengths = [520, 540]
[accuracy]
cells = 6
"""
MESH = STUDY.replace('shape = "cube"\nedge = 20', 'mesh = "body.stl"')
PARTS = STUDY.replace(
    'shape = "cube"\nedge = 20\nmaterial = "gold"\n',
    'parts = [{mesh = "body.stl", material = "gold"}, {mesh = "other.stl", material = "silver"}]\n',
)


def _of(text=STUDY, *changes, folder=Path()):
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    return fingerprints(points_of(study_from_text(text, folder / "study.toml")))


@pytest.mark.parametrize(
    "change",
    [
        ('"gold cubes"', '"another name"'),
        ("edge = 20", "edge = 20.0"),
        ("cells = 6", "cells = 6\n[solver]\nthreads = 1\nprocesses = 2"),
        ("cells = 6", "cells = 6\n[limits]\nmemory_gib = 1\nminutes = 3"),
        ("cells = 6", "cells = 6\npreview = true"),
        ("cells = 6", "cells = 6\n[solver]\ntolerance = 1e-3"),
        ("[520, 540]", "[520, 540]\ndirection = [0, 0, 1]"),
        ("[520, 540]", "{from = 520, to = 540, step = 20}"),
        ("[520, 540]", "[540, 520]"),
        ("cells = 6", "cells = 6\n[vary]\nparticle.edge = [20]"),
        ("cells = 6", "cells = 6\n[materials.film]\nindex = 2.0"),
        (
            "cells = 6",
            'cells = 6\n[near_field]\nregion = "surface"\nwavelengths = [520]',
        ),
    ],
)
def test_what_changes_no_answer_leaves_the_fingerprints(change):
    assert _of(STUDY, change) == _of()


@pytest.mark.parametrize(
    "change",
    [
        ("edge = 20", "edge = 20.001"),
        ("edge = 20", "edge = 20\nrounding = 2"),
        ('"cube"\nedge = 20', '"sphere"\ndiameter = 20'),
        ('"gold"', '"silver"'),
        ('"gold"', '"main/Au/Yakubovsky-25nm"'),
        ("index = 1.33", "index = 1.3300001"),
        ("[520, 540]", "[520.001, 540.001]"),
        ("[520, 540]", "[520, 540]\npolarization = [0, 1, 0]"),
        ("[520, 540]", '[520, 540]\norientation = "average"'),
        ("cells = 6", "cells = 7"),
        ("cells = 6", "spacing = 3.0"),
        ("cells = 6", "target = 0.05"),
        ("cells = 6", "cells = 6\n[solver]\ntolerance = 1e-4"),
        ("cells = 6", 'cells = 6\n[solver]\nmethod = "gmres"'),
        ("cells = 6", 'cells = 6\n[solver]\nprecision = "single"'),
        ("cells = 6", "cells = 6\n[scattering]\nmultipoles = 1"),
    ],
)
def test_what_changes_an_answer_changes_the_fingerprints(change):
    assert not set(_of(STUDY, change)) & set(_of())


def test_points_of_a_study_have_their_own():
    found = _of(STUDY, ("cells = 6", "cells = 6\n[vary]\nparticle.edge = [20, 30]"))
    assert len(set(found)) == 4
    assert found[:2] == _of()
    assert all(len(one) == 32 and set(one) <= set("0123456789abcdef") for one in found)


def _mesh(path, edge):
    shapes_cube = shapes.cube(edge=edge, material="gold")
    low, high = shapes_cube.bounds
    import trimesh

    trimesh.creation.box(extents=high - low).export(path)


def test_the_content_of_a_mesh_counts_and_its_name_does_not(tmp_path):
    _mesh(tmp_path / "body.stl", 20)
    _mesh(tmp_path / "copy.stl", 20)
    before = _of(MESH, folder=tmp_path)
    assert _of(MESH, ("body.stl", "copy.stl"), folder=tmp_path) == before
    (tmp_path / "deeper").mkdir()
    (tmp_path / "body.stl").rename(tmp_path / "deeper" / "body.stl")
    assert _of(MESH, folder=tmp_path / "deeper") == before
    _mesh(tmp_path / "deeper" / "body.stl", 21)
    assert not set(_of(MESH, folder=tmp_path / "deeper")) & set(before)


def test_two_meshes_that_change_places_are_another_particle(tmp_path):
    _mesh(tmp_path / "body.stl", 20)
    _mesh(tmp_path / "other.stl", 10)
    before = _of(PARTS, folder=tmp_path)
    swapped = (("body.stl", "x.stl"), ("other.stl", "body.stl"), ("x.stl", "other.stl"))
    assert not set(_of(PARTS, *swapped, folder=tmp_path)) & set(before)


def test_a_file_that_is_missing_is_told(tmp_path):
    with pytest.raises(InputError, match=r"body\.stl: cannot be read"):
        _of(MESH, folder=tmp_path)


def test_permittivities_count_wherever_they_come_from(tmp_path):
    own = ('"gold"', '"mine"'), ("cells = 6", 'cells = 6\n[materials.mine]\ntable = "film.csv"')
    film = tmp_path / "film.csv"
    film.write_text("wavelength_nm,n,k\n500,0.3,3.0\n530,0.3,3.0\n600,0.3,3.0\n")
    before = _of(STUDY, *own, folder=tmp_path)
    film.rename(tmp_path / "other.csv")
    other = (own[0], (own[1][0], own[1][1].replace("film", "other")))
    assert _of(STUDY, *other, folder=tmp_path) == before
    # 540 nm lies between the last two lines alone
    film.write_text("wavelength_nm,n,k\n500,0.3,3.0\n530,0.3,3.0\n600,0.4,3.0\n")
    after = _of(STUDY, *own, folder=tmp_path)
    assert after[1] != before[1]


def test_files_of_a_study_are_known_by_their_content(tmp_path):
    _mesh(tmp_path / "body.stl", 20)
    study = study_from_text(MESH, tmp_path / "study.toml")
    before = files_of(study)
    assert set(before) == {"body.stl"}
    _mesh(tmp_path / "body.stl", 21)
    assert files_of(study)["body.stl"] != before["body.stl"]
    assert files_of(study_from_text(STUDY, tmp_path / "study.toml")) == {}


def test_a_near_field_depends_on_its_table_and_on_the_spectrum():
    near = (
        "cells = 6",
        'cells = 6\n[near_field]\nregion = "surface"\nwavelengths = ["peak"]',
    )

    def of(*changes, c_ext=1.0):
        text = STUDY
        for old, new in (near, *changes):
            text = text.replace(old, new)
        point = points_of(study_from_text(text, Path("study.toml")))[0]
        return near_fingerprint(point, [Row(520.0, c_ext_nm2=c_ext, spacing_nm=2.0)])

    assert of() == of(('"gold cubes"', '"another"'))
    assert (
        len({of(), of(c_ext=1.1), of(('["peak"]', "[520]")), of(("edge = 20", "edge = 21"))}) == 4
    )
