"""Regions: where their points are, and what is wrong with a file of points."""

import numpy as np
import pytest

from dda.errors import InputError
from dda.response.near_points import box, line, plane, read_points


def test_plane_points_follow_the_axes():
    region = plane("x", size=(10, 4), step=2, centre=(7, 1, 0))
    assert region.shape == (6, 3)
    assert region.names == ("y", "z")
    grid = region.points.reshape(6, 3, 3)
    assert np.all(grid[..., 0] == 7)
    assert grid[:, 0, 1].tolist() == [-4, -2, 0, 2, 4, 6]
    assert grid[0, :, 2].tolist() == [-2, 0, 2]
    assert region.cell == 4


def test_box_is_in_c_order():
    region = box((2, 4, 0.5), step=1, centre=(0, 0, 3))
    assert region.shape == (3, 5, 1)
    grid = region.points.reshape(3, 5, 1, 3)
    assert grid[2, 1, 0].tolist() == [1, -1, 3]
    assert region.cell == 1


def test_line_has_both_ends():
    region = line((0, 0, 0), (0, 3, 4), step=2)
    assert region.points[0].tolist() == [0, 0, 0]
    assert region.points[-1].tolist() == [0, 3, 4]
    assert region.axes[0][-1] == 5
    assert region.step <= 2


def test_points_of_a_file(tmp_path):
    path = tmp_path / "points.csv"
    path.write_text("name,z_nm,x_nm,y_nm\ntip,30,1,2\n\nside,0,-25.5,0\n")
    assert read_points(path).points.tolist() == [[1, 2, 30], [-25.5, 0, 0]]


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("x,y,z\n1,2,3\n", "no column x_nm, y_nm, z_nm"),
        ("x_nm,y_nm,z_nm\n1,2,3\n1,two,3\n", "line 3"),
        ("x_nm,y_nm,z_nm\n1,2\n", "line 2"),
        ("x_nm,y_nm,z_nm\n1,2,nan\n", "finite"),
        ("x_nm,y_nm,z_nm\n", "no points"),
        ("", "no column"),
    ],
)
def test_mistakes_in_a_file_are_named(tmp_path, text, message):
    path = tmp_path / "points.csv"
    path.write_text(text)
    with pytest.raises(InputError, match=message):
        read_points(path)


def test_missing_file_and_senseless_regions(tmp_path):
    with pytest.raises(InputError, match="cannot be read"):
        read_points(tmp_path / "nothing.csv")
    with pytest.raises(InputError, match="normal"):
        plane("w", (1, 1), 1, (0, 0, 0))
    with pytest.raises(InputError, match="greater than 0"):
        box((1, 1, -1), 1)
    with pytest.raises(InputError, match="too many"):
        box((1e4, 1e4, 1e4), 1)
    with pytest.raises(InputError, match="two different ends"):
        line((0, 0, 0), (0, 0, 0), 1)
