"""Runs in the formats of other programs, read back by those programs' libraries."""

import csv
import os
from pathlib import Path

import h5py
import numpy as np
import pytest
import pyvista
import xarray

from dda.cli import main
from dda.errors import InputError
from dda.report.export import export
from tests.runs import answer, begin, finished, grid, section

STUDY = """\
name = "small gold spheres"
[particle]
shape = "sphere"
diameter = 20.0
material = "gold"
[host]
index = 1.33
[light]
wavelengths = [520, 560]
[accuracy]
cells = 8
[near_field]
wavelengths = [520]
region = "box"
size = [40, 36, 32]
step = 4
[vary]
particle.diameter = [16, 20]
"""


@pytest.fixture(scope="module")
def spheres(tmp_path_factory):
    """A real run of two spheres with the near field in a box, and in a plane."""
    folder = tmp_path_factory.mktemp("spheres")
    (folder / "box.toml").write_text(STUDY)
    plane = 'region = "plane"\nnormal = "y"\nsize = [40, 32]\n'
    text = STUDY.replace('region = "box"\nsize = [40, 36, 32]\n', plane).replace(", 20]", "]")
    (folder / "plane.toml").write_text(text)
    for name in ("box", "plane"):
        assert main(["run", str(folder / f"{name}.toml"), "--out", str(folder / name)]) == 0
    return folder


@pytest.fixture
def run(tmp_path, monkeypatch):
    """A made-up run in a working directory of its own."""
    monkeypatch.chdir(tmp_path)
    return finished(tmp_path / "run", grid())


def test_csv_is_the_whole_table(run):
    assert main(["export", "run", "--to", "csv"]) == 0
    with Path("run.csv").open(newline="") as file:
        rows = list(csv.DictReader(file))
    assert [float(row["particle.edge"]) for row in rows] == [40, 40, 40, 50, 50, 50]
    # nine digits are written
    assert [float(row["c_ext_nm2"]) for row in rows] == pytest.approx(
        [section(entry) for entry in grid()], rel=1e-8
    )


def test_netcdf_is_the_dataset_of_the_run_with_its_texts_and_units(run):
    import dda

    assert main(["export", "run", "--to", "netcdf", "--out", "there/all"]) == 0
    with xarray.open_dataset("there/all.nc", engine="h5netcdf") as read:
        xarray.testing.assert_equal(read, dda.open_run("run"))
        assert read.c_ext.units == "nm^2"
        assert read["particle.edge"].units == "nm"
        assert read.status.values.tolist() == [["converged"] * 3] * 2
        assert read.attrs["title"] == "gold cubes"


def test_what_is_in_the_way_stays_unless_it_may_be_replaced(run, capsys):
    Path("run.csv").write_text("mine")
    assert main(["export", "run", "--to", "csv"]) == 2
    assert "is there already" in capsys.readouterr().err
    assert Path("run.csv").read_text() == "mine"
    assert main(["export", "run", "--to", "csv", "--replace"]) == 0
    assert Path("run.csv").read_text().startswith("particle.edge,")
    Path("folder.nc").mkdir()
    with pytest.raises(InputError, match="a folder of that name is in the way"):
        export(run, "netcdf", Path("folder.nc"), replace=True)
    with pytest.raises(InputError, match="no folder that an export has made"):
        export(run, "vtk", run, replace=True)
    assert sorted(os.listdir()) == ["folder.nc", "run", "run.csv"]
    assert (run / "ledger.sqlite").is_file()


def test_mistakes_are_told(run, tmp_path):
    with pytest.raises(InputError, match='"xlsx" is no format; it is one of csv, netcdf, vtk'):
        export(run, "xlsx")
    with pytest.raises(InputError, match=r"\.nc is the ending of --to netcdf; --to csv has \.csv"):
        export(run, "csv", Path("run.nc"))
    with pytest.raises(InputError, match=r"--to vtk makes a folder"):
        export(run, "vtk", Path("run.csv"))
    with pytest.raises(InputError, match="a point is chosen for --to vtk"):
        export(run, "csv", point=1)
    with pytest.raises(InputError, match="no run of a study"):
        export(tmp_path, "csv")
    begin(tmp_path / "begun", grid()).close()
    with pytest.raises(InputError, match="no point is finished yet"):
        export(tmp_path / "begun", "csv")


def test_a_run_that_goes_on_is_exported_as_far_as_it_is(tmp_path):
    entries = grid()
    with begin(tmp_path / "run", entries) as ledger:
        ledger.record(entries[0].identity, answer(entries[0]))
        path = export(tmp_path / "run", "csv", tmp_path / "part")
    assert path == tmp_path / "part.csv"
    assert len(path.read_text().splitlines()) == 2


@pytest.mark.skipif(os.name == "nt", reason="permissions")
def test_a_place_that_cannot_be_written_is_told(run, tmp_path):
    (tmp_path / "file").write_text("")
    with pytest.raises(InputError, match="cannot be written"):
        export(run, "csv", tmp_path / "file" / "run.csv")


def test_vtk_holds_the_cells_of_the_particle(spheres, tmp_path):
    folder = export(spheres / "box", "vtk", tmp_path / "spheres")
    cells = pyvista.read(folder / "particle.vtu")
    about = "\n".join(cells.field_data["about"])
    assert "point: 0: particle.diameter = 16, 520 nm" in about
    assert "unit of the points: nm" in about
    assert "material: 0 gold" in about
    # cells of 2 nm, filled to the sphere's volume: the sum over cells of what they hold
    filled = (cells["fraction of gold"] * 8).sum()
    assert filled == pytest.approx(np.pi / 6 * 16**3, rel=0.01)
    assert np.allclose(cells.compute_cell_sizes()["Volume"], 8)
    assert np.allclose(np.add(cells.bounds[::2], cells.bounds[1::2]), 0, atol=1e-9)
    chosen = export(spheres / "box", "vtk", tmp_path / "second", point=2)
    # a layer of surface cells around 8 across: ten cells of 2.5 nm, then of 2 nm
    assert pyvista.read(chosen / "particle.vtu").bounds[1] == pytest.approx(12.5)
    with pytest.raises(InputError, match="no such point"):
        export(spheres / "box", "vtk", tmp_path / "none", point=9)
    assert not (tmp_path / "none").exists()
    assert export(spheres / "box", "vtk", chosen, replace=True) == chosen
    assert pyvista.read(chosen / "particle.vtu").bounds[1] == pytest.approx(10.0)
    assert sorted(os.listdir(tmp_path)) == ["second", "spheres"]


def test_vtk_holds_the_near_field_of_a_box_at_its_places(spheres, tmp_path):
    folder = export(spheres / "box", "vtk", tmp_path / "spheres")
    for diameter in (16, 20):
        inner = Path(f"near/diameter={diameter}")
        mesh = pyvista.read(folder / inner / "box_520_nm.vtr")
        with h5py.File(spheres / "box" / inner / "near_field.h5") as file:
            (group,) = file.values()
            axes = [group[f"{axis}_nm"][()] for axis in "xyz"]
            e2, e = group["e2"][()], group["e"][()]
        for i, j, k in ((0, 0, 0), (3, 1, 2), (7, 8, 4)):
            place = [axes[0][i], axes[1][j], axes[2][k]]
            at = mesh.find_closest_point(place)
            assert np.allclose(mesh.points[at], place)
            assert mesh["e2"][at] == e2[i, j, k]
            assert np.allclose(mesh["e_re"][at] + 1j * mesh["e_im"][at], e[i, j, k])
        assert any("unit of e2: incident |E|^2" in text for text in mesh.field_data["about"])
        surface = pyvista.read(folder / inner / "surface_520_nm.vtp")
        reach = np.linalg.norm(surface.points, axis=1)
        # a closed surface 1.5 cells outside the sphere, in pieces
        assert np.allclose(reach, diameter / 2 + 1.5 * diameter / 8, rtol=0.1)
        assert surface.cell_data["e2"].max() > 2


def test_vtk_holds_the_near_field_of_a_plane_at_its_places(spheres, tmp_path):
    folder = export(spheres / "plane", "vtk", tmp_path / "spheres")
    (path,) = folder.rglob("points_520_nm.vtr")
    mesh = pyvista.read(path)
    (table,) = (spheres / "plane").rglob("near_field.csv")
    with table.open(newline="") as file:
        rows = list(csv.DictReader(file))
    assert mesh.n_points == len(rows)
    for row in rows[:: len(rows) // 7]:
        place = [float(row[f"{axis}_nm"]) for axis in "xyz"]
        at = mesh.find_closest_point(place)
        assert np.allclose(mesh.points[at], place)
        assert mesh["e2"][at] == float(row["e2"])
        assert np.allclose(mesh["e_im"][at], [float(row[f"e{axis}_im"]) for axis in "xyz"])
        assert bool(mesh["trusted"][at]) == (row["trusted"] == "true")


def test_points_that_make_no_grid_stay_points():
    from dda.report.vtk_folder import _grid_or_points

    points = np.random.default_rng(1).normal(size=(9, 3))
    mesh, order = _grid_or_points(points)
    assert np.array_equal(mesh.points, points)
    assert order.tolist() == list(range(9))
