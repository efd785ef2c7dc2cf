"""The ball window's weights, against the closed form for planes."""

import numpy as np
import pytest

from shapes import ShapeError
from shapes.plane import plane_in_cube
from shapes.window import ball_window, plane_fraction


def planes(count: int, width: float, seed: int) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    normals = rng.standard_normal((count, 3))
    normals[: count // 5] = np.eye(3)[rng.integers(0, 3, count // 5)]
    normals /= np.linalg.norm(normals, axis=1, keepdims=True)
    return normals, rng.uniform(-width / 2 - 0.3, width / 2 + 0.3, count)


def sums(width: float, samples: int, normals: np.ndarray, distances: np.ndarray) -> np.ndarray:
    window = ball_window(width, samples)
    places = (window.offsets - (samples - 1) / 2) / samples
    filled = plane_in_cube((distances[:, None] + normals @ places.T) * samples, normals)
    return filled @ window.weights.T


@pytest.mark.parametrize(
    ("width", "samples", "tolerance"),
    # planes along the lattice meet piecewise linear samples: the error is (1/samples/width)^2 * 0.4
    [(2.2, 4, 5e-3), (2.2, 5, 4.5e-3), (2.2, 6, 3.5e-3), (3.0, 4, 3.5e-3), (1.6, 4, 1.1e-2)],
)
def test_planes_get_their_fraction_of_the_ball(
    width: float, samples: int, tolerance: float
) -> None:
    normals, distances = planes(4000, width, 3)
    error = sums(width, samples, normals, distances)[:, 0] - plane_fraction(distances, width)
    assert np.abs(error).max() < tolerance
    assert np.sqrt((error**2).mean()) < tolerance / 5


def test_gradient_has_the_direction_and_size_of_the_plane() -> None:
    normals, distances = planes(4000, 2.2, 4)
    got = sums(2.2, 4, normals, distances)[:, 1:4]
    t = np.clip(2 * distances / 2.2, -1, 1)
    size = 1.5 / 2.2 * (1 - t**2)
    # samples are piecewise linear across a plane, so their slope is a staircase: 8 % of the peak
    assert np.abs(np.linalg.norm(got, axis=1) - size).max() < 0.08 * 1.5 / 2.2
    strong = size > 0.2
    cosine = np.einsum("ni,ni->n", got, normals)[strong] / np.linalg.norm(got[strong], axis=1)
    assert np.degrees(np.arccos(np.clip(cosine, -1, 1))).max() < 3.0


def test_second_derivative_is_along_the_normal_in_a_thin_layer() -> None:
    # the middle of a layer has no gradient; its second derivatives are left
    normals, _ = planes(300, 2.2, 5)
    low = sums(2.2, 4, normals, np.full(300, -0.3))
    layer = sums(2.2, 4, normals, np.full(300, 0.3)) - low
    assert np.abs(layer[:, 1:4]).max() < 0.05
    bend = np.empty((300, 3, 3))
    for row, (i, j) in enumerate(((0, 0), (1, 1), (2, 2), (0, 1), (0, 2), (1, 2))):
        bend[:, i, j] = bend[:, j, i] = layer[:, 4 + row]
    values, vectors = np.linalg.eigh(bend)
    main = np.take_along_axis(vectors, np.abs(values).argmax(axis=1)[:, None, None], axis=2)
    cosine = np.abs(np.einsum("ni,ni->n", main[:, :, 0], normals))
    angle = np.degrees(np.arccos(np.clip(cosine, 0, 1)))
    assert angle.max() < 12.0  # second differences of a staircase
    assert np.sqrt((angle**2).mean()) < 4.0


def test_weights_of_constants() -> None:
    weights = ball_window(2.2, 4).weights.sum(axis=1)
    assert np.allclose(weights, [1] + [0] * 9, atol=1e-9)


@pytest.mark.parametrize(("width", "samples"), [(0.5, 4), (9.0, 4), (2.2, 1), (2.2, 40)])
def test_windows_that_make_no_sense_are_refused(width: float, samples: int) -> None:
    with pytest.raises(ShapeError, match="must lie between"):
        ball_window(width, samples)
