"""A run as labelled arrays: dimensions, units, what is missing."""

import json
import subprocess
import sys

import numpy as np
import pytest

import dda
from dda.accuracy import Level
from dda.errors import InputError
from dda.report.columns import attributes_of, plain_name
from dda.report.key_units import unit_of
from dda.study.ledger_records import Answered, Entry
from dda.study.more import Array
from dda.study.rows import Row
from tests.runs import EDGES, WAVELENGTHS, answer, begin, finished, grid, section, with_file


def test_a_sweep_is_a_grid_of_its_keys_and_the_wavelength(tmp_path):
    entries = grid()
    run = dda.open_run(finished(tmp_path / "run", entries))
    assert dict(run.sizes) == {"particle.edge": 2, "wavelength": 3}
    assert run["particle.edge"].values.tolist() == list(EDGES)
    assert run["particle.edge"].units == run.wavelength.units == "nm"
    for entry in entries:
        at = run.sel({"particle.edge": entry.varied["particle.edge"]}).sel(
            wavelength=entry.wavelength_nm
        )
        assert float(at.c_ext) == section(entry)
        assert int(at.number) == entry.number
    assert run.c_ext.units == "nm^2"
    assert run.c_ext.long_name == "extinction cross section"
    assert run.c_ext.ancillary_variables == "c_ext_error status"
    assert run.c_ext_error.long_name == "estimated error of the extinction cross section"
    assert run.seconds.units == "s"
    assert run.cells.dtype == int
    assert set(run.status.values.ravel()) == {"converged"}
    assert run.attrs["title"] == "gold cubes"


def test_every_column_of_the_table_is_a_variable(tmp_path):
    from dda.study.rows import COLUMNS

    run = dda.open_run(finished(tmp_path / "run", grid()))
    names = {plain_name(column) for column in COLUMNS} - {"wavelength"}
    assert set(run.data_vars) == names | {"number"}
    assert all(variable.attrs["long_name"] for variable in run.data_vars.values())


def test_what_is_not_there_yet_is_not_a_number_and_waits(tmp_path):
    entries = grid()
    with begin(tmp_path, entries) as ledger:
        ledger.record(entries[4].identity, answer(entries[4]))
        ledger.record(entries[5].identity, answer(entries[5], "failed", "too big"))
    run = dda.open_run(tmp_path)
    assert np.isfinite(run.c_ext.values).tolist() == [[False] * 3, [False, True, False]]
    assert run.status.values.tolist() == [["waiting"] * 3, ["waiting", "converged", "failed"]]
    assert str(run.message.values[1, 2]) == "too big"
    assert (run.attrs["finished_points"], run.attrs["points"]) == (2, 6)


def test_keys_that_vary_side_by_side_are_coordinates_of_points(tmp_path):
    pairs = [(40.0, "water"), (50.0, "glycerol"), (60.0, "water")]
    sets = [{"particle.edge": edge, "host.material": host} for edge, host in pairs]
    entries = [
        Entry(n, f"id{n}", None, wave, varied, 1.0)
        for n, (varied, wave) in enumerate((v, w) for v in sets for w in (500.0, 510.0))
    ]
    run = dda.open_run(finished(tmp_path / "run", entries))
    assert dict(run.sizes) == {"point": 3, "wavelength": 2}
    assert run["host.material"].dims == ("point",)
    assert run["host.material"].values.tolist() == ["water", "glycerol", "water"]
    assert run.c_ext.values[2, 1] == section(entries[5])


def test_points_that_fill_no_grid_stand_in_a_row(tmp_path):
    entries = grid()[:5]
    run = dda.open_run(finished(tmp_path / "run", entries))
    assert run.c_ext.dims == run.wavelength.dims == run["particle.edge"].dims == ("point",)
    assert run.c_ext.values.tolist() == [section(entry) for entry in entries]


def test_a_study_without_varied_keys_has_the_wavelength_alone(tmp_path):
    run = dda.open_run(finished(tmp_path / "run", grid(edges=())))
    assert run.c_ext.dims == ("wavelength",)


def test_keys_keep_the_order_and_kind_of_their_values(tmp_path):
    values = ["water", "air", "glycerol"]
    entries = grid(edges=values, key="host.material")
    run = dda.open_run(finished(tmp_path / "texts", entries))
    assert run["host.material"].values.tolist() == values
    directions = [[0, 0, 1], [1, 0, 0]]
    entries = grid(edges=directions, key="light.direction")
    run = dda.open_run(finished(tmp_path / "lists", entries))
    assert [json.loads(text) for text in run["light.direction"].values] == directions
    run = dda.open_run(finished(tmp_path / "counts", grid(edges=(8, 12), key="accuracy.cells")))
    assert run["accuracy.cells"].dtype == int
    assert run["accuracy.cells"].units == "1"


def test_further_columns_have_their_unit_from_their_name(tmp_path):
    entries = grid(edges=())
    more = {"g": 0.5, "rise_kelvin": 12.0, "c_back_nm2": 3.0}
    with begin(tmp_path, entries) as ledger:
        row = Row(entries[1].wavelength_nm, c_ext_nm2=1.0, status="converged", more=more)
        ledger.record(entries[1].identity, Answered(row))
    run = dda.open_run(tmp_path)
    assert (run.rise.units, run.c_back.units, run.g.units) == ("K", "nm^2", "1")
    assert run.rise.values[1] == 12.0
    assert np.isnan(run.rise.values[0])


def test_a_run_that_has_not_begun_is_told(tmp_path):
    with pytest.raises(InputError, match="no run of a study"):
        dda.open_run(tmp_path)
    begin(tmp_path, []).close()
    with pytest.raises(InputError, match="no study has been run"):
        dda.open_run(tmp_path)


LEVELS = [
    Level(d, (100 / d, 70 / d, 30 / d), (0.1, 0.1, 0.1), 100, 10, 20, 1e-5, "converged", 1.0)
    for d in (4.0, 3.0, 2.0)
]


def test_a_point_has_its_levels_and_arrays_with_units(tmp_path):
    entries = grid()
    values = np.arange(6.0).reshape(2, 3) * (1 + 1j)
    arrays = [Array("far/amplitude", values, "nm", "angle, component")]
    with begin(tmp_path, entries) as ledger:
        with_file(tmp_path, ledger, entries[4], LEVELS, arrays)
    for which in (4, entries[4].identity):
        point = dda.open_point(tmp_path, which)
        assert point["levels.spacing"].dims == point["levels.c_ext"].dims == ("level",)
        assert point["levels.spacing"].values.tolist() == [4.0, 3.0, 2.0]
        assert point["levels.c_ext"].units == "nm^2"
        assert point["far.amplitude"].units == "nm"
        assert point["far.amplitude"].long_name == "angle, component"
        assert np.array_equal(point["far.amplitude"], values)
        assert point.attrs["particle.edge"] == 50.0
        assert point.attrs["wavelength_nm"] == 520.0


def test_points_without_arrays_are_told_apart(tmp_path):
    entries = grid()
    with begin(tmp_path, entries) as ledger:
        ledger.record(entries[0].identity, answer(entries[0], "failed", "too big"))
        file = with_file(tmp_path, ledger, entries[1], LEVELS)
    with pytest.raises(InputError, match="point 0 has no file: too big"):
        dda.open_point(tmp_path, 0)
    with pytest.raises(InputError, match="point 2 has no answer yet"):
        dda.open_point(tmp_path, 2)
    with pytest.raises(InputError, match="numbers go from 0 to 5"):
        dda.open_point(tmp_path, 6)
    content = bytearray((tmp_path / file).read_bytes())
    content[len(content) // 2] ^= 1
    (tmp_path / file).write_bytes(content)
    with pytest.raises(InputError, match="changed since it was written"):
        dda.open_point(tmp_path, 1)


@pytest.mark.parametrize(
    ("name", "tables", "unit"),
    [
        ("particle.edge", {"particle": {"shape": "cube"}}, "nm"),
        ("particle.parts[1].diameter", {"particle": {"parts": [{}, {"shape": "sphere"}]}}, "nm"),
        ("particle.parts[0].rotation.angle", {"particle": {"parts": [{}]}}, "degree"),
        ("particle.parts[0].position", {"particle": {"parts": [{}]}}, "nm"),
        ("particle.diameter", {"vary": {"particle": {"shape": ["sphere", "disk"]}}}, "nm"),
        ("particle.diameter", {"vary": {"particle.shape": ["sphere", "disk"]}}, "nm"),
        ("host.index", {}, "1"),
        ("host.material", {}, None),
        ("particle.nonsense", {"particle": {"shape": "cube"}}, None),
        ("materials.mine.index", {"particle": {"shape": "cube"}}, None),
    ],
)
def test_the_units_of_keys(name, tables, unit):
    assert unit_of(name, tables) == unit


def test_a_name_that_is_a_unit_stays():
    assert plain_name("_nm") == "_nm"
    assert attributes_of("asymmetry") == {"units": "1", "long_name": "asymmetry"}


def test_importing_the_package_imports_nothing_heavy():
    code = (
        "import sys, dda; "
        "print([m for m in ('numpy', 'numba', 'scipy', 'xarray', 'shapes') if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
    assert set(dda.__all__) <= set(dir(dda))
    for name in dda.__all__:
        assert getattr(dda, name).__name__ == name
    with pytest.raises(AttributeError, match="nonsense"):
        dda.nonsense  # noqa: B018


def test_wavelengths_are_sorted_however_the_ledger_lists_them(tmp_path):
    entries = grid(edges=(), wavelengths=WAVELENGTHS[::-1])
    run = dda.open_run(finished(tmp_path / "run", entries))
    assert run.wavelength.values.tolist() == list(WAVELENGTHS)
    assert run.c_ext.values.tolist() == [section(e) for e in reversed(entries)]
