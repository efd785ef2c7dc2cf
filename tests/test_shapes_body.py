"""Sample grids, parts and particles."""

import numpy as np
import pytest

import shapes
from shapes import Part, Particle, SampleGrid, ShapeError
from shapes.primitives import Cuboid, Sphere


def test_grid_points_and_bounds() -> None:
    grid = SampleGrid((1.0, 2.0, 3.0), 0.5, (2, 3, 4))
    points = grid.points()
    assert points.shape == (24, 3)
    assert np.allclose(points[-1], [1.5, 3.0, 4.5])
    low, high = grid.bounds
    assert np.allclose(low, [0.75, 1.75, 2.75])
    assert np.allclose(high, [1.75, 3.25, 4.75])


def test_window_holds_every_voxel_the_box_cuts() -> None:
    grid = SampleGrid((0.0, 0.0, 0.0), 1.0, (10, 10, 10))
    window = grid.window((np.array([2.6, 3.5, -5.0]), np.array([4.4, 3.5, 50.0])))
    assert window is not None
    x, y, z = window
    assert (x.start, x.stop) == (3, 5)  # voxel 3 is [2.5, 3.5], voxel 4 is [3.5, 4.5]
    assert y.start <= 3
    assert y.stop >= 5  # a face between two voxels touches both
    assert (z.start, z.stop) == (0, 10)
    cut = grid.cut(window)
    assert np.allclose(cut.origin, [3, y.start, 0])
    assert grid.window((np.full(3, 20.0), np.full(3, 30.0))) is None


def test_materials_in_order_of_appearance() -> None:
    ball, box = Sphere(10.0), Cuboid((4.0, 4.0, 4.0))
    parts = (Part(ball, "silver"), Part(box, None), Part(box, "gold"), Part(ball, "silver"))
    assert Particle(parts).materials == ("silver", "gold")


def test_a_particle_needs_material() -> None:
    with pytest.raises(ShapeError, match="at least one part"):
        Particle((Part(Sphere(10.0), None),))
    with pytest.raises(ShapeError, match="name or None"):
        Part(Sphere(10.0), 3)  # type: ignore[arg-type]


def test_volumes_of_parts_that_are_apart_add_exactly() -> None:
    left, right = Sphere(10.0).moved((-20, 0, 0)), Cuboid((4.0, 5.0, 6.0)).moved((20, 0, 0))
    particle = Particle((Part(left, "gold"), Part(right, "silver")))
    assert particle.exact == {"volume", "area", "bounds"}
    assert particle.volume() == pytest.approx(Sphere(10.0).volume() + 120)
    assert particle.area() == pytest.approx(np.pi * 100 + 148)


def test_volume_of_overlapping_parts_is_measured() -> None:
    # a sphere pushed halfway into a box: half its volume and half its area stand out
    box, ball = Cuboid((40.0, 40.0, 40.0)), Sphere(20.0).moved((20, 0, 0))
    particle = Particle((Part(box, "gold"), Part(ball, "silver")))
    assert "volume" not in particle.exact
    assert particle.volume() == pytest.approx(64000 + Sphere(20.0).volume() / 2, rel=1e-3)
    area = 6 * 1600 - np.pi * 100 + 2 * np.pi * 100
    assert particle.area() == pytest.approx(area, rel=3e-3)  # sharp edges cost a little


def test_removed_material_is_gone() -> None:
    ball, hole = Sphere(40.0), Sphere(20.0)
    particle = Particle((Part(ball, "gold"), Part(hole, None)))
    assert particle.volume() == pytest.approx(ball.volume() - hole.volume(), rel=1e-3)


def test_particle_moves_turns_and_grows_as_a_whole() -> None:
    pair = shapes.dimer(shapes.sphere(20), gap=4)
    moved = pair.scaled(2.0).rotated(90, (0, 0, 1)).moved((5, 0, 0))
    low, high = moved.bounds
    assert np.allclose(low, [-15, -44, -20])
    assert np.allclose(high, [25, 44, 20])
    assert moved.gap == 8
    assert moved.thinnest == 40
    assert moved.volume() == pytest.approx(8 * pair.volume())
    assert np.allclose(moved.centred().bounds[0], [-20, -44, -20])
