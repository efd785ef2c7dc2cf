"""Rough spheres: volume, roughness, correlation, and that the seed decides."""

import numpy as np
import pytest

import shapes
from shapes import ShapeError
from shapes.measure import measured_area, measured_volume
from shapes.rough import RoughSphere, _synthesis


def radii(sphere: RoughSphere, directions: np.ndarray) -> np.ndarray:
    """Distance of the surface from the centre, by bisection on the distance."""
    low, high = np.full(len(directions), 1.0), np.full(len(directions), sphere.diameter)
    for _ in range(40):
        middle = (low + high) / 2
        inside = sphere.signed_distance(directions * middle[:, None]) > 0
        low, high = np.where(inside, middle, low), np.where(inside, high, middle)
    return low


def even(count: int) -> np.ndarray:
    k = np.arange(count) + 0.5
    z, turn = 1 - 2 * k / count, k * np.pi * (3 - np.sqrt(5))
    across = np.sqrt(1 - z**2)
    return np.stack([across * np.cos(turn), across * np.sin(turn), z], axis=1)


def test_harmonics_have_unit_mean_square_and_true_slopes() -> None:
    amplitudes = np.zeros((5, 5, 2))
    amplitudes[2, 1, 0], amplitudes[4, 3, 1], amplitudes[3, 0, 0] = 0.6, 0.64, 0.48
    nodes, weights = np.polynomial.legendre.leggauss(24)
    value = _synthesis(amplitudes, np.arccos(nodes), 48)[0]
    assert (weights @ (value**2).mean(axis=1)) / 2 == pytest.approx((amplitudes**2).sum())
    polar = np.array([0.7, 1.1])
    ahead, _, _ = _synthesis(amplitudes, polar + 1e-6, 48)
    here, down, side = _synthesis(amplitudes, polar, 48)
    assert np.allclose((ahead - here) / 1e-6, down, atol=1e-4)
    fine, _, _ = _synthesis(amplitudes, polar, 48_000)
    turned = (fine[:, 1] - fine[:, 0]) / (2 * np.pi / 48_000) / np.sin(polar)
    assert np.allclose(turned, side[:, 0], atol=2e-3)


def test_roughness_is_the_root_mean_square_height() -> None:
    sphere = RoughSphere(60.0, 2.5, 12.0, seed=1)
    surface = radii(sphere, even(3000))
    assert surface.std() == pytest.approx(2.5, rel=0.02)
    # the smooth sphere of equal volume lies a little outside the mean radius
    assert (surface**3).mean() == pytest.approx(30**3, rel=2e-3)


def test_heights_decorrelate_at_the_correlation_length() -> None:
    sphere = RoughSphere(60.0, 1.0, 10.0, seed=2)
    one = even(4000)
    side = np.cross(one, [0.3, 0.5, 0.8])
    side /= np.linalg.norm(side, axis=1, keepdims=True)
    start = radii(sphere, one) - 30

    def likeness(distance: float) -> float:
        angle = distance / 30
        moved = radii(sphere, np.cos(angle) * one + np.sin(angle) * side) - 30
        return float(np.corrcoef(start, moved)[0, 1])

    # exp(-1/2) at the correlation length, and little at three times that; one sphere has some
    # hundred independent bumps, so a tenth is its chance
    assert likeness(10.0) == pytest.approx(np.exp(-0.5), abs=0.1)
    assert abs(likeness(30.0)) < 0.25


def test_volume_and_area_by_quadrature_match_the_samples() -> None:
    sphere = RoughSphere(60.0, 2.5, 12.0, seed=3)
    assert sphere.volume() == pytest.approx(np.pi / 6 * 60**3, rel=1e-12)
    assert measured_volume(sphere, 96) == pytest.approx(sphere.volume(), rel=2e-4)
    assert measured_area(sphere, 96) == pytest.approx(sphere.area(), rel=5e-3)
    assert sphere.area() > np.pi * 60**2


def test_distance_is_safe() -> None:
    sphere = RoughSphere(60.0, 3.0, 8.0, seed=4)
    rng = np.random.default_rng(0)
    points, steps = rng.uniform(-40, 40, (20_000, 3)), rng.normal(size=(20_000, 3))
    change = sphere.signed_distance(points + steps) - sphere.signed_distance(points)
    assert np.all(np.abs(change) <= np.linalg.norm(steps, axis=1) + 1e-6)


def test_smooth_limit_and_seeds() -> None:
    points = np.random.default_rng(1).uniform(-40, 40, (100, 3))
    smooth = RoughSphere(60.0, 0.0, 12.0)
    expected = 30 - np.linalg.norm(points, axis=1)
    assert np.allclose(smooth.surface_distance(points), expected, atol=1e-9)
    first, again, other = (
        shapes.rough_sphere(60, 2, 12, seed=seed).bounds[0] for seed in (5, 5, 6)
    )
    assert np.array_equal(first, again)
    assert not np.allclose(first, other)


def test_too_rough_or_too_fine() -> None:
    with pytest.raises(ShapeError, match="correlation"):
        shapes.rough_sphere(60, 2, 1)
    with pytest.raises(ShapeError, match="roughness"):
        shapes.rough_sphere(60, 20, 12)
