"""Maps of the near field: they are written, and show what they should."""

import numpy as np
import pytest

import shapes
from dda.report.field_map import draw_field_map, outline_values, scale_bar
from dda.response.near_points import line, plane


@pytest.fixture
def region():
    return plane("y", size=(60, 40), step=1.0, centre=(0, 0, 0))


def read(path):
    from matplotlib.image import imread

    return imread(path)[..., :3]


def test_map_shows_where_the_field_is(tmp_path, region):
    hot = np.exp(-((region.points - [15, 0, 10]) ** 2).sum(axis=1) / 20)
    draw_field_map(tmp_path / "map.png", region, hot, logarithmic=False)
    image = read(tmp_path / "map.png")
    dark = image.sum(axis=2) < 0.4  # the cold part of the map; the paper is white
    # letters are dark too, but rows and columns through the map are dark for the most part
    rows, columns = (np.flatnonzero(dark.mean(axis=axis) > 0.4) for axis in (1, 0))
    inner = image[rows.min() : rows.max(), columns.min() : columns.max()]
    # the hottest colour is a bright yellow; bar and letters of the scale are grey
    warm = inner[..., :2].sum(axis=2) * (inner[..., 0] - inner[..., 2] > 0.25)
    row, column = np.unravel_index(np.argmax(warm), warm.shape)
    # the spot is in the right upper quarter: z up, x to the right
    assert row < 0.4 * len(inner)
    assert column > 0.6 * inner.shape[1]


def test_outline_and_marks_change_the_picture(tmp_path, region):
    values = 1 + np.abs(region.points[:, 0])
    particle = shapes.sphere(20, "gold")
    trusted = np.abs(outline_values(region, particle).ravel()) > 2
    draw_field_map(tmp_path / "plain.png", region, values, title="one")
    draw_field_map(
        tmp_path / "full.png", region, values, particle=particle, trusted=trusted, title="one"
    )
    assert read(tmp_path / "full.png").std() != read(tmp_path / "plain.png").std()


def test_outline_follows_the_body_off_centre(region):
    inside = outline_values(region, shapes.sphere(20, "gold").moved((7, 8, 9)))
    # region and outline are both counted from the particle's centre
    x, z = region.axes
    assert np.array_equal(inside > 0, x[:, None] ** 2 + z**2 < 100)


def test_outline_of_a_voxel_image(region):
    x = np.arange(32) - 15.5
    ball = (x[:, None, None] ** 2 + x[:, None] ** 2 + x**2) < 10**2
    particle = shapes.from_image(ball.astype(np.uint8), voxel=1.0, materials={1: "gold"})
    inside = outline_values(region, particle) > 0
    # a circle of 10 nm radius on a grid of 1 nm
    assert inside.sum() == pytest.approx(np.pi * 100, rel=0.06)


@pytest.mark.parametrize("width", [3.0, 47.0, 130.0, 999.0, 1e4])
def test_scale_bars_are_round_and_fit(width):
    length = scale_bar(width)
    assert 0.08 * width < length <= 0.25 * width
    assert f"{length:.0e}"[0] in "125"


def test_only_planes_can_be_drawn(tmp_path):
    with pytest.raises(ValueError, match="plane"):
        draw_field_map(tmp_path / "no.png", line((0, 0, 0), (1, 0, 0), 0.5), np.ones(3))
