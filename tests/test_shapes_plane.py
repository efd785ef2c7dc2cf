"""Fractions of small cubes cut by planes, against counting and against linear identities."""

import numpy as np
import pytest

from shapes.plane import blocks_filled, plane_in_cube


def unit_vectors(count: int, seed: int = 0) -> np.ndarray:
    vectors = np.random.default_rng(seed).standard_normal((count, 3))
    vectors[:4] = [(1, 0, 0), (0, -1, 0), (1, 1, 0), (1, -1, 1)]
    return vectors / np.linalg.norm(vectors, axis=1, keepdims=True)


def test_fraction_matches_counting() -> None:
    # a midpoint count over n^3 points is exact to about half a layer, 0.5/n; n = 50
    normals = unit_vectors(20)
    distances = np.random.default_rng(1).uniform(-0.8, 0.8, (20, 15))
    line = (np.arange(50) + 0.5) / 50 - 0.5
    points = np.stack(np.meshgrid(line, line, line), axis=-1).reshape(-1, 3)
    inside = distances[:, :, None] + (normals @ points.T)[:, None, :] > 0
    assert np.allclose(plane_in_cube(distances, normals), inside.mean(axis=2), atol=0.011)


def test_the_two_sides_fill_the_cube() -> None:
    normals = unit_vectors(200)
    distances = np.random.default_rng(2).uniform(-1, 1, (200, 9))
    both = plane_in_cube(distances, normals) + plane_in_cube(-distances, -normals)
    assert np.allclose(both, 1.0, atol=1e-12)


def test_cubes_along_a_line_add_up() -> None:
    # voxels along x under a plane of normal x hold its position, to the floor on components
    place = 3.3
    centres = np.arange(8)[None, :]
    filled = plane_in_cube(place - centres, np.array([[1.0, 0.0, 0.0]]))
    assert filled.sum() == pytest.approx(place + 0.5, abs=1e-8)


@pytest.mark.parametrize("normal", [(1, 0, 0), (3, 1, 2), (1, 1, 1)])
def test_blocks_of_plane_distances_are_exact(normal: tuple[float, float, float]) -> None:
    unit = np.array(normal, float) / np.linalg.norm(normal)
    axis = np.arange(10) - 4.5
    points = np.stack(np.meshgrid(axis, axis, axis, indexing="ij"), axis=-1)
    distance = points @ unit + 0.2
    exact = plane_in_cube(distance[1:-1, 1:-1, 1:-1].reshape(1, -1), unit[None]).reshape(8, 8, 8)
    # float32 output
    assert np.allclose(blocks_filled(2.5 * distance[None], 2.5)[0], exact, atol=1e-6)


def test_blocks_hold_the_volume_of_a_small_ball() -> None:
    # the averaged distance leaves an error of fourth order: 1e-3 at a radius of three voxels
    axis = np.arange(10) - 4.5
    points = np.stack(np.meshgrid(axis, axis, axis, indexing="ij"), axis=-1)
    filled = blocks_filled(3 - np.linalg.norm(points, axis=-1)[None], 1.0)
    assert filled.sum(dtype=float) == pytest.approx(4 / 3 * np.pi * 27, rel=2e-3)
