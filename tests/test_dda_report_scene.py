"""Pictures of particles: what they are made of, and that they hold what they should."""

import itertools

import numpy as np
import pytest

import shapes
from dda.errors import ComputationError, InputError
from dda.report.colours import PALETTE, lightness, material_colours, rgb
from dda.report.scene import cell_mesh, draw_particle, drawing, show_particle, surface_meshes
from dda.report.sheet import cell_notes, surface_notes

GOLD_ON_SILICA = shapes.core_shell(
    of=shapes.sphere(diameter=40, material="silica"), thickness=10, material="gold"
)


def test_materials_differ_in_lightness_so_that_grey_will_do():
    for one, other in itertools.combinations(PALETTE, 2):
        assert abs(lightness(one) - lightness(other)) > 12  # a step that is seen at once
    assert len(set(material_colours(["a", "b", "c"]).values())) == 3


def test_surfaces_hold_the_volume_of_their_materials():
    meshes = surface_meshes(GOLD_ON_SILICA)
    # The contour of a smoothed field loses about the curvature times a sample squared: 1 %.
    silica = 4 / 3 * np.pi * 20**3
    assert meshes["silica"].volume == pytest.approx(silica, rel=0.01)
    assert meshes["gold"].volume == pytest.approx(4 / 3 * np.pi * 30**3 - silica, rel=0.01)


def test_the_cut_takes_a_quarter_away_and_closes_the_sections():
    whole, cut = surface_meshes(GOLD_ON_SILICA), surface_meshes(GOLD_ON_SILICA, cut=True)
    for name in ("gold", "silica"):
        assert cut[name].volume == pytest.approx(0.75 * whole[name].volume, rel=0.01)
        assert cut[name].n_open_edges == 0


def test_cells_are_drawn_where_they_are_in_the_colour_of_what_fills_them():
    cells = shapes.voxelize(GOLD_ON_SILICA, cells=12)
    mesh = cell_mesh(cells, {"gold": "#FF0000", "silica": "#0000FF"})
    assert mesh.volume == pytest.approx(cells.n * cells.spacing**3, rel=1e-6)
    low, high = np.array(mesh.bounds[::2]), np.array(mesh.bounds[1::2])
    np.testing.assert_allclose(low, cells.origin - cells.spacing / 2, atol=1e-6)
    np.testing.assert_allclose(high - low, cells.extent, atol=1e-6)
    red, green, blue = np.asarray(mesh.cell_data["colour"], float).T
    assert (red > blue).all()  # only gold is outside
    assert (green == blue).all()  # pale, not another hue


def test_what_is_written_under_the_pictures():
    cells = shapes.voxelize(GOLD_ON_SILICA, cells=12)
    assert surface_notes(GOLD_ON_SILICA, cut=True).startswith("surface: 60 × 60 × 60 nm")
    assert f"{cells.n} cells of 5 nm" in cell_notes(cells, GOLD_ON_SILICA)
    assert "thinnest part 10 nm = 2.0 cells" in cell_notes(cells, GOLD_ON_SILICA)


def test_the_picture_shows_both_materials(tmp_path):
    path = tmp_path / "look.png"
    cells = shapes.voxelize(GOLD_ON_SILICA, cells=12)
    try:
        draw_particle(path, GOLD_ON_SILICA, cells, "gold on silica")
    except ComputationError as error:
        pytest.skip(str(error))
    from matplotlib.image import imread

    picture = imread(path)[:, :, :3]
    left, right = np.split(picture, 2, axis=1)
    for half in (left, right):
        for colour in material_colours(GOLD_ON_SILICA.materials).values():
            # Shading changes the lightness; the share of each primary stays near.
            wanted = np.array(rgb(colour)) / sum(rgb(colour))
            total = half.sum(axis=2)
            share = half / np.maximum(total, 1e-6)[..., None]
            alike = (np.abs(share - wanted).max(axis=2) < 0.05) & (total < 2.6)
            assert alike.mean() > 0.01


def test_missing_graphics_libraries_are_named():
    with pytest.raises(ComputationError, match="libgl1"), drawing():
        raise ImportError("libGL.so.1: cannot open shared object file")


def test_a_window_without_a_display_is_refused(monkeypatch):
    monkeypatch.delenv("DISPLAY", raising=False)
    monkeypatch.setattr("sys.platform", "linux")
    with pytest.raises(InputError, match="no display"):
        show_particle(GOLD_ON_SILICA, shapes.voxelize(GOLD_ON_SILICA, cells=6), "gold on silica")
