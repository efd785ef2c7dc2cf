"""Surfaces in pieces: areas, heights, normals, gaps."""

import numpy as np
import pytest

import shapes
from dda.errors import InputError
from dda.response.outer_distance import outer_distance
from dda.response.surface_points import cover_surface


@pytest.mark.parametrize("height", [0.0, 1.0, 6.0])
def test_area_and_height_of_a_sphere(height):
    found = cover_surface(shapes.sphere(30), step=1.0, height=height)
    radius = np.linalg.norm(found.points, axis=1)
    assert np.allclose(radius, 15 + height, atol=1e-4)
    # chords of 1 nm on a radius of 15: 0.1 %
    assert found.areas.sum() == pytest.approx(4 * np.pi * (15 + height) ** 2, rel=2e-3)
    # a piece's corners are not quite in a plane: a few degrees
    assert (np.einsum("nc,nc->n", found.normals, found.points) > 0.99 * radius).all()
    assert found.corners.shape == (len(found.points), 4, 3)


def test_area_of_a_rounded_cube_grows_as_steiner_says():
    edge, rounding, height = 30.0, 6.0, 2.0
    cube = shapes.cube(edge, rounding)
    found = cover_surface(cube, step=0.75, height=height)
    # Steiner: faces, quarter cylinders along the edges, a sphere at the corners
    flat, radius = edge - 2 * rounding, rounding + height
    exact = 6 * flat**2 + 6 * np.pi * radius * flat + 4 * np.pi * radius**2
    assert found.areas.sum() == pytest.approx(exact, rel=0.005)


def test_no_points_where_a_gap_is_too_narrow():
    one = shapes.sphere(20)
    pair = shapes.Particle(one.moved((-11, 0, 0)).parts + one.moved((11, 0, 0)).parts)
    open_, closed = (cover_surface(pair, step=0.5, height=h) for h in (0.5, 2.0))
    assert (np.abs(open_.points[:, 0]) < 0.6).any()
    # at the narrowest place, 2 nm wide, nothing lies 2 nm from both spheres
    waist = np.abs(closed.points[:, 0]) < 1
    assert np.linalg.norm(closed.points[waist][:, 1:], axis=1).min() > 3
    assert (-outer_distance(pair, closed.points) > 1.8 - 1e-9).all()


def test_voxel_images_have_a_surface_as_well():
    x = np.arange(32) - 15.5
    ball = (x[:, None, None] ** 2 + x[:, None] ** 2 + x**2) < 10**2
    particle = shapes.from_image(ball.astype(np.uint8), voxel=1.0, materials={1: "gold"})
    assert outer_distance(particle, np.zeros((1, 3))) is None
    found = cover_surface(particle, step=1.0, height=2.0)
    centre = np.add(*particle.bounds) / 2
    radius = np.linalg.norm(found.points - centre, axis=1)
    # a staircase of 1 nm voxels, smoothed: half a nm
    assert abs(radius.mean() - 12) < 0.3
    assert radius.std() < 0.3


def test_bad_steps_and_heights_are_refused():
    with pytest.raises(InputError, match="step"):
        cover_surface(shapes.sphere(20), step=0.0)
    with pytest.raises(InputError, match="height"):
        cover_surface(shapes.sphere(20), step=1.0, height=-1.0)
    with pytest.raises(InputError, match="larger steps"):
        cover_surface(shapes.sphere(20), step=1e-3)
