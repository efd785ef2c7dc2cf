"""Study files are read, and every mistake in one is named with its line and key."""

import tomllib
from pathlib import Path

import pytest

from dda.errors import InputError
from dda.study.lines import line_of
from dda.study.points import points_of
from dda.study.reader import nearest, read_study, study_from_tables

GOOD = """\
name = "gold cubes in water"
[particle]
shape = "cube"
edge = 60.0
rounding = 8.0
material = "gold"
[host]
material = "water"
[light]
wavelengths = {from = 450, to = 850, step = 10}
direction = [0, 0, 1]
polarization = [1, 0, 0]
[accuracy]
cells = 32
"""


def _study(text=GOOD):
    return study_from_tables(tomllib.loads(text), Path("gold.toml"), text)


def _refused(tmp_path, old, new):
    text = GOOD.replace(old, new)
    assert text != GOOD
    path = tmp_path / "gold.toml"
    path.write_text(text)
    with pytest.raises(InputError) as caught:
        read_study(path)
    return str(caught.value)


def test_a_good_study_is_read():
    tables = _study().tables
    assert tables.particle.parameters == {"edge": 60.0, "rounding": 8.0}
    assert tables.light.values()[:2] == (450, 460)
    assert tables.light.values()[-1] == 850
    assert len(tables.light.values()) == 41
    assert tables.accuracy.cells == 32


@pytest.mark.parametrize(
    ("written", "values"),
    [
        ("[700, 500.5]", (700, 500.5)),
        ("633", (633,)),
        ("{from = 500, to = 501, step = 0.1}", tuple(round(500 + i / 10, 9) for i in range(11))),
        ("{from = 500, to = 509, step = 5}", (500, 505)),
        ("{from = 500, to = 500, step = 5}", (500,)),
    ],
)
def test_wavelengths_in_every_form(written, values):
    text = GOOD.replace("{from = 450, to = 850, step = 10}", written)
    assert _study(text).tables.light.values() == values


@pytest.mark.parametrize(
    ("written", "value"),
    [
        ("[1, 0, 0]", (1, 0, 0)),
        ("[[0, 1], 1, 0]", (1j, 1, 0)),
        ('"left"', "left"),
        ('"unpolarized"', "unpolarized"),
    ],
)
def test_polarization_in_every_form(written, value):
    text = GOOD.replace("polarization = [1, 0, 0]", f"polarization = {written}")
    assert _study(text).tables.light.polarization == value


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ("cells = 32", "cels = 32", ["line 14", "accuracy.cels", 'did you mean "cells"?']),
        ("cells = 32", 'cells = "32"', ["line 14", "accuracy.cells", 'not "32"']),
        ("cells = 32", "cells = 32.5", ["accuracy.cells", "whole number"]),
        ("cells = 32", "cells = 32\nspacing = 2.0", ["line 13", "one of the three"]),
        ("cells = 32", "spacing = -2.0", ["line 14", "above zero", "-2.0"]),
        ("[accuracy]\ncells = 32\n", "", ["accuracy", "missing"]),
        ("[accuracy]", "[acuracy]", ["line 13", 'did you mean "accuracy"?']),
        ("name = ", "nmae = ", ["line 1", 'did you mean "name"?']),
        ("from = 450", "form = 450", ["line 10", 'did you mean "from"?']),
        ("from = 450", "from = 950", ["line 10", "950", "850"]),
        ("step = 10", "step = 0", ["light.wavelengths.step", "above zero"]),
        ("step = 10", "step = 1e-7", ["more than 20000 wavelengths"]),
        ("{from = 450, to = 850, step = 10}", "[]", ["empty"]),
        ("{from = 450, to = 850, step = 10}", "[500, 600, 500]", ["500 is listed twice"]),
        ("{from = 450, to = 850, step = 10}", "[500, nan]", ["light.wavelengths[1]", "finite"]),
        ("{from = 450, to = 850, step = 10}", '"red"', ["line 10", "a list of numbers or"]),
        ("[1, 0, 0]", "[0, 0, 1]", ["not at right angles"]),
        ("[1, 0, 0]", "[0, 0, 0]", ["line 12", "length zero"]),
        ("[1, 0, 0]", "[1, 0]", ["three components"]),
        ("[1, 0, 0]", "[[1, 2, 3], 0, 0]", ["[re, im]"]),
        ("[1, 0, 0]", '"lefft"', ['"left", "right", "unpolarized"']),
        ("[0, 0, 1]", "[0, 0, 0]", ["light.direction", "length zero"]),
        ("[0, 0, 1]", "[0, 1]", ["light.direction", "three numbers"]),
        ('material = "water"', 'material = "water"\nindex = 1.3', ["line 7", "one of the two"]),
        ('material = "water"', "index = -1.3", ["host.index", "above zero"]),
        ('shape = "cube"', 'shape = "cube"\nmesh = "a.stl"', ["shape and mesh"]),
        ('shape = "cube"\n', "", ["line 2", "none of them"]),
        ("[host]", "[host", ["not valid TOML", "line 7"]),
        ("[host]", "[solver]\ntolerance = 2.0\n[host]", ["solver.tolerance", "less than 1"]),
        ("[host]", '[solver]\nprecision = "quad"\n[host]', ["double", "single", "quad"]),
        ("[host]", "[materials]\ngold = 5\n[host]", ["materials.gold", "a table"]),
    ],
)
def test_a_mistake_is_named_with_its_place(tmp_path, old, new, said):
    message = _refused(tmp_path, old, new)
    assert "gold.toml" in message
    for words in said:
        assert words in message


def test_all_mistakes_are_reported_at_once(tmp_path):
    path = tmp_path / "gold.toml"
    path.write_text(GOOD.replace("cells", "cels").replace("index", "x").replace("step", "stp"))
    with pytest.raises(InputError) as caught:
        read_study(path)
    assert "accuracy.cels" in str(caught.value)
    assert "light.wavelengths.stp" in str(caught.value)


def test_a_file_that_is_no_study(tmp_path):
    (tmp_path / "gold.toml").write_text(GOOD)
    (tmp_path / "bytes.toml").write_bytes(b"\xff\xfe\x00name")
    for name, said in [
        ("gld.toml", 'did you mean "'),
        (".", "a folder"),
        ("bytes.toml", "not a text in UTF-8"),
        ("nowhere/gold.toml", "no such file"),
    ]:
        with pytest.raises(InputError, match=said):
            read_study(tmp_path / name)


def test_lines_of_keys():
    text = (
        'a = 1\n[b]\n"c.d" = 2\ne.f = 3\n[[p.q]]\nx = 1\n[[p.q]]\nx = 2\n'
        't = """\nb = 7\n"""\n[p.r]\ny = 1\n'
    )
    tomllib.loads(text)
    assert line_of(text, ("b", "c.d")) == 3
    assert line_of(text, ("b", "e", "f")) == 4
    assert line_of(text, ("p", "q", 1, "x")) == 8
    assert line_of(text, ("p", "r", "y")) == 13
    assert line_of(text, ("b", "none")) == 2
    assert line_of(text, ("none",)) is None


def test_nearest_key_or_all():
    assert nearest("polarisation", ["polarization", "direction"]).endswith('"polarization"?')
    assert nearest("zzz", ["a", "b"]) == "known: a, b"


def test_points_are_in_order_of_wavelength_and_share_their_geometry():
    text = GOOD.replace("{from = 450, to = 850, step = 10}", "[700, 500]")
    points = points_of(_study(text))
    assert [p.wavelength for p in points] == [500, 700]
    assert points[0].geometry_key == points[1].geometry_key
    other = points_of(_study(text.replace("edge = 60.0", "edge = 61.0")))
    assert other[0].geometry_key != points[0].geometry_key
