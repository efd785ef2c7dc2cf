"""Moved, turned, mirrored, scaled, grown and hollow solids."""

import numpy as np
import pytest

from shapes import SampleGrid
from shapes.measure import measured_volume
from shapes.primitives import Capsule, Cuboid, Sphere
from shapes.primitives_revolved import Frustum
from shapes.transform import rotation_matrix


def test_rotation_matrices_turn_right_handed() -> None:
    quarter = rotation_matrix(90, (0, 0, 2))
    assert np.array_equal(quarter @ [1, 0, 0], [0, 1, 0])  # exact: mirror planes survive it
    third = rotation_matrix(120, (1, 1, 1))
    assert np.allclose(third @ [1, 2, 3], [3, 1, 2])
    assert np.allclose(third @ third.T, np.eye(3))


def test_points_move_with_the_solid() -> None:
    cone = Frustum(30.0, 0.0, 40.0)
    moved = cone.rotated(90, (0, 1, 0)).moved((100, 0, 0)).scaled(2.0)
    # the tip, at z = 20, goes to x = 20, then 120, then 240
    assert moved.bounds[1][0] == pytest.approx(240)
    assert moved.volume() == pytest.approx(8 * cone.volume())
    assert moved.area() == pytest.approx(4 * cone.area())
    assert np.allclose(moved.pivot, [200, 0, 0])
    assert moved.signed_distance(np.array([[240.0, 0, 0]]))[0] == pytest.approx(0, abs=1e-9)


def test_mirror_image_of_a_cone() -> None:
    cone = Frustum(30.0, 0.0, 40.0).moved((0, 0, 7))
    image = cone.mirrored(2)
    low, high = image.bounds
    assert (low[2], high[2]) == (pytest.approx(-27), pytest.approx(13))
    points = np.random.default_rng(0).uniform(-30, 30, (50, 3))
    assert np.allclose(image.signed_distance(points), cone.signed_distance(points * [1, 1, -1]))


@pytest.mark.parametrize("change", ["moved", "turned", "scaled"])
def test_fill_agrees_with_distance(change: str) -> None:
    solid = Capsule(30.0, 12.0) | Cuboid((10.0, 20.0, 8.0), 2.0)
    changed = {
        "moved": solid.moved((1.3, -2.1, 0.4)),
        "turned": solid.rotated(35, (1, 1, 0)),
        "scaled": solid.scaled(1.4),
    }[change]
    grid = SampleGrid((-25.0, -25.0, -25.0), 1.0, (51, 51, 51))
    filled = changed.fill(grid).ravel()
    distance = changed.signed_distance(grid.points())
    assert np.all(filled[distance > 0.9] == 1)  # half the diagonal of a voxel
    assert np.all(filled[distance < -0.9] == 0)
    near = np.abs(distance) < 0.4
    assert np.all((filled[near] > 0) & (filled[near] < 1))


def test_shell_holds_the_difference() -> None:
    shell = Sphere(40.0).shell(5.0)
    exact = Sphere(40.0).volume() - Sphere(30.0).volume()
    assert shell.volume() == pytest.approx(exact, rel=1e-4)
    assert shell.area() == pytest.approx(Sphere(40.0).area() + Sphere(30.0).area(), rel=1e-3)
    assert shell.thinnest == 5.0


def test_shrunk_box_is_a_smaller_box() -> None:
    shrunk = Cuboid((40.0, 30.0, 20.0)).grown(-4.0)
    assert np.allclose(shrunk.bounds[1], [16, 11, 6], atol=0.05)
    assert measured_volume(shrunk, 64) == pytest.approx(32 * 22 * 12, rel=2e-3)


def test_a_coat_on_a_union_is_the_union_of_coats() -> None:
    pair = Sphere(20.0) | Sphere(20.0).moved((24, 0, 0))
    coated = pair.grown(4.0)
    grid = SampleGrid((-16.0, -16.0, -16.0), 1.0, (58, 33, 33))
    expected = (Sphere(28.0) | Sphere(28.0).moved((24, 0, 0))).fill(grid)
    assert np.allclose(coated.fill(grid), expected, atol=1e-6)
