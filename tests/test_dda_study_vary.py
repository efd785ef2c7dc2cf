"""``[vary]``: which combinations it makes, and what it says of mistakes."""

import tomllib
from pathlib import Path

import pytest

from dda.errors import InputError
from dda.study.mistakes import Mistake
from dda.study.points import points_of
from dda.study.prepare import prepare
from dda.study.reader import study_from_tables, study_from_text
from dda.study.vary import MOST_POINTS, Vary, read_vary

STUDY = """\
name = "gold cubes"
[particle]
shape = "cube"
edge = 20.0
material = "gold"
[host]
index = 1.33
[light]
wavelengths = [520, 540]
[accuracy]
cells = 6
"""
PARTS = STUDY.replace(
    'shape = "cube"\nedge = 20.0\nmaterial = "gold"\n',
    'parts = [{shape = "cube", edge = 20.0, material = "gold"}, '
    '{shape = "sphere", diameter = 10.0, material = "silica"}]\n',
)


def _study(vary, text=STUDY):
    return study_from_text(f"{text}[vary]\n{vary}\n", Path("gold.toml"))


def _varied(vary, text=STUDY):
    return [point.varied for point in points_of(_study(vary, text))]


def _refused(vary, text=STUDY):
    with pytest.raises(InputError) as caught:
        points_of(_study(vary, text))
    return str(caught.value)


def test_nothing_varies_without_the_table():
    study = study_from_text(STUDY, Path("gold.toml"))
    assert [point.varied for point in points_of(study)] == [{}, {}]
    assert len(study.vary) == 1


def test_several_keys_form_a_grid_the_last_one_changing_fastest():
    points = points_of(_study("particle.edge = [20, 30]\nhost.index = [1.0, 1.33]"))
    assert [(p.particle.parameters["edge"], p.host.index, p.wavelength) for p in points] == [
        (edge, index, wave) for edge in (20, 30) for index in (1.0, 1.33) for wave in (520, 540)
    ]
    assert points[2].varied == {"particle.edge": 20, "host.index": 1.33}


def test_zipped_keys_go_side_by_side_and_may_repeat():
    vary = "zip = true\nparticle.edge = [20, 20, 30]\nhost.index = [1.0, 1.33, 1.33]"
    assert _varied(vary)[::2] == [
        {"particle.edge": edge, "host.index": index}
        for edge, index in ((20, 1.0), (20, 1.33), (30, 1.33))
    ]


def test_zipped_keys_have_as_many_values():
    said = _refused("zip = true\nparticle.edge = [20, 30]\nhost.index = [1.0, 1.2, 1.33]")
    assert "gold.toml, line 15: vary.host.index: zip = true" in said
    assert "particle.edge has 2 of them and host.index 3" in said


@pytest.mark.parametrize(
    ("written", "values"),
    [
        ("{from = 20, to = 40, step = 10}", [20, 30, 40]),
        ("{from = 20, to = 39, step = 10}", [20, 30]),
        ("{from = 20.0, to = 20.3, step = 0.1}", [20.0, 20.1, 20.2, 20.3]),
        ("{from = 20, to = 20, step = 5}", [20]),
    ],
)
def test_a_range_has_both_ends(written, values):
    assert [varied["particle.edge"] for varied in _varied(f"particle.edge = {written}")[::2]] == (
        values
    )


def test_whole_numbers_stay_whole():
    study = _study("accuracy.cells = {from = 6, to = 8, step = 2}")
    assert [tables.accuracy.cells for _, tables in study.variants()] == [6, 8]
    with pytest.raises(InputError, match="whole number"):
        points_of(_study("accuracy.cells = [6, 6.5]"))


@pytest.mark.parametrize(
    "written",
    [
        "particle.edge = [20, 30]",
        '"particle.edge" = [20, 30]',
        'particle = {"edge" = [20, 30]}',
        "[vary.particle]\nedge = [20, 30]",
    ],
)
def test_a_key_is_dotted_quoted_or_in_a_table(written):
    assert _varied(written)[::2] == [{"particle.edge": 20}, {"particle.edge": 30}]


@pytest.mark.parametrize("key", ["particle.parts[1].diameter", "particle.parts.1.diameter"])
def test_a_part_is_named_by_its_place(key):
    points = points_of(_study(f'"{key}" = [8, 9]', PARTS))
    assert points[0].varied == {"particle.parts[1].diameter": 8}
    assert [p.particle.parts[1].parameters["diameter"] for p in points[::2]] == [8, 9]
    assert {p.particle.parts[0].parameters["edge"] for p in points} == {20}


def test_a_part_that_is_not_there_is_told():
    said = _refused('"particle.parts[2].diameter" = [8, 9]', PARTS)
    assert "the study has no such entry" in said
    assert "line 11" in said


def test_a_label_of_an_image_is_a_key():
    vary = read_vary({"particle.materials.1": [["gold"], ["silver"]]})
    tables = vary.applied({"particle": {"materials": {"1": "x", "2": "y"}}}, ("gold",))
    assert tables == {"particle": {"materials": {"1": "gold", "2": "y"}}}


def test_tables_that_are_missing_are_made():
    study = _study("solver.tolerance = [1e-3, 1e-4]")
    assert [tables.solver.tolerance for _, tables in study.variants()] == [1e-3, 1e-4]


def test_lists_and_texts_are_values_too():
    varied = _varied('light.direction = [[0, 0, 1], [0, 0, -1]]\nparticle.material = ["gold"]')
    assert varied[2] == {"light.direction": [0, 0, -1], "particle.material": "gold"}


def test_the_study_itself_is_not_changed():
    study = _study("particle.edge = [20, 30]")
    before = repr(study.data)
    list(study.variants())
    assert repr(study.data) == before


@pytest.mark.parametrize(
    ("vary", "said"),
    [
        ("particle.edge = 20", ["line 13: vary.particle.edge", "a list of values or a range"]),
        ("particle.edge = []", ["line 13: vary.particle.edge", "empty"]),
        ("particle.edge = [20, 30, 20]", ["line 13: vary.particle.edge", "20 is listed twice"]),
        ("particle.edge = {from = 20, to = 30}", ["line 13", "step should be a number"]),
        ("particle.edge = {from = 30, to = 20, step = 1}", ["line 13", "from below to"]),
        ("particle.edge = {from = 20, to = 30, step = 0}", ["line 13", "step above zero"]),
        ("particle.edge = {from = 20, to = 30, step = 1e-9}", ["line 13", "more than"]),
        ("particle.edge = {from = 20, to = 30, step = true}", ["line 13", "step should be a"]),
        ("edge = [20, 30]", ["line 13: vary.edge", "with its table, such as particle.edge"]),
        ("name.x = [1]", ["name.x cannot be varied: it names the whole study"]),
        ("limits.minutes = [1]", ["limits.minutes cannot be varied"]),
        ("light.wavelengths = [[500], [520]]", ["light.wavelengths cannot be varied", "a list or"]),
        ("solver.threads = [1, 2]", ["solver.threads cannot be varied: it changes no answer"]),
        ("zip = 1", ["line 13: vary.zip", "true or false"]),
        ("zip = true", ["line 12", "no key is varied"]),
        ('particle.edge = [20]\n"particle.edge" = [30]', ["particle.edge is varied twice"]),
        ("particle.edge = [20, -30]", ["line 13", "edge", "(with particle.edge = -30)"]),
        ("host.index = [1.0, 0]", ["line 13: host.index", "above zero", "host.index = 0"]),
        ("hosst.index = [1.0]", ["hosst", "unknown key", "host"]),
        ("host.name = [1.0]", ["host.name", "unknown key"]),
        ("host.index.x = [1.0]", ["there is no such table in the study"]),
        ("particle.edgee = [20, 30]", ["line 13", "edgee", "edge"]),
    ],
)
def test_a_mistake_is_named_with_file_line_and_key(vary, said):
    with pytest.raises(InputError) as caught:
        prepare(_study(vary))
    for words in ("gold.toml", *said):
        assert words in str(caught.value)


def test_too_many_combinations_are_a_slip_of_the_pen():
    values = list(range(1001))
    with pytest.raises(Mistake, match=f"at most {MOST_POINTS}"):
        read_vary({"particle.edge": values, "host.index": values})
    assert len(read_vary({"particle.edge": values, "host.index": values[:999]})) == 999_999


def test_vary_that_is_no_table_is_told():
    data = tomllib.loads(f"vary = 3\n{STUDY}")
    with pytest.raises(InputError, match="vary: should be a table"):
        study_from_tables(data, Path("gold.toml"), f"vary = 3\n{STUDY}")


def test_no_axes_have_one_empty_combination():
    assert list(Vary().combinations()) == [()]
    assert Vary().applied({"a": 1}, ()) == {"a": 1}
