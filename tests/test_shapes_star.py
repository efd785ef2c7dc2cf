"""Stars: where the spikes are, and that they are as long as asked."""

import numpy as np
import pytest

import shapes
from shapes import ShapeError
from shapes.star import spike_directions


def directions(count: int, arrangement: str, seed: int = 0) -> np.ndarray:
    return spike_directions(count, arrangement, np.random.default_rng(seed))


@pytest.mark.parametrize(
    ("arrangement", "count"),
    [("even", 14), ("random", 14), ("axes", 6), ("corners", 8), ("icosahedral", 12), ("flat", 5)],
)
def test_directions_are_unit_vectors_apart(arrangement: str, count: int) -> None:
    vectors = directions(count, arrangement)
    assert vectors.shape == (count, 3)
    assert np.allclose(np.linalg.norm(vectors, axis=1), 1)
    cosine = vectors @ vectors.T - 2 * np.eye(count)
    least = np.sqrt(4 * np.pi / count) / 2
    assert np.degrees(np.arccos(cosine.max())) > np.degrees(least) * 0.99


def test_spikes_reach_their_length() -> None:
    star = shapes.star(40, 6, 25, 8, 2, arrangement="axes")
    assert np.allclose(star.extent, 40 + 2 * 25)
    assert star.rotations() == (4, 4, 4)
    body = star.parts[0].body
    places = np.array([[44.9, 0, 0], [45.1, 0, 0], [20.0, 7.9, 0], [44.9, 1.5, 0]])
    inside = body.signed_distance(places) > 0  # type: ignore[attr-defined]
    assert inside.tolist() == [True, False, True, False]


def test_seeds_repeat_and_differ() -> None:
    first, again, other = (
        shapes.star(40, 9, 25, 8, 2, "random", spread=0.2, seed=seed).bounds[1]
        for seed in (3, 3, 4)
    )
    assert np.array_equal(first, again)
    assert not np.allclose(first, other)


def test_fillets_add_volume_and_keep_symmetry() -> None:
    plain = shapes.star(40, 6, 25, 8, 2, "axes")
    soft = shapes.star(40, 6, 25, 8, 2, "axes", blend=6)
    assert soft.volume() > plain.volume() * 1.001
    assert soft.mirrors() == (True, True, True)
    assert np.allclose(soft.extent, plain.extent, atol=0.1)


def test_stars_that_cannot_be() -> None:
    with pytest.raises(ShapeError, match="must be 6"):
        shapes.star(40, 7, 25, 8, 2, "axes")
    with pytest.raises(ShapeError, match="tip_radius"):
        shapes.star(40, 7, 25, 8, 9)
    with pytest.raises(ShapeError, match="longer than its base radius"):
        shapes.star(40, 7, 6, 8, 2)
