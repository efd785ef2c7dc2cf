"""The blur near a plane and its inverse, on fields where both are known exactly."""

import numpy as np
import pytest

from dda.response.blur import blur_of, unblurred, unblurring
from dda.response.smeared_sums import held_part

WIDTH, SMEAR = 2.2, 1.75


def test_filled_fraction_of_a_half_space():
    found = blur_of(WIDTH)
    heights = np.linspace(-3, 3, 25)
    filled = found.filled(heights)
    assert np.all(np.diff(filled) <= 1e-12)
    # point symmetry of a plane's blur, to the step of the kernel's table
    assert np.allclose(filled + found.filled(-heights), 1, atol=1e-9)
    assert np.allclose(found.height(filled[4:-4]), heights[4:-4], atol=1e-3)


def test_variance_is_that_of_both_balls():
    found = blur_of(WIDTH)
    # <x^2>: ball of radius a: a^2/5; density (1 - r^2/a^2)^3: a^2/11
    expected = (WIDTH / 2) ** 2 / 5 + SMEAR**2 / 11
    assert found.kernel @ found.x**2 == pytest.approx(expected, rel=1e-4)
    # sideways there are two such directions
    assert found.sideways.sum() == pytest.approx(2 * expected, rel=1e-4)


def test_kernel_is_that_of_random_points_in_both_balls():
    rng = np.random.default_rng(1)

    def ball(count):
        points = rng.uniform(-1, 1, (count, 3))
        return points[(points**2).sum(axis=1) < 1]

    window = ball(400_000) * WIDTH / 2
    smear = ball(400_000)
    smear = smear[rng.uniform(size=len(smear)) < (1 - (smear**2).sum(axis=1)) ** 3] * SMEAR
    count = min(len(window), len(smear))
    both = window[:count] + smear[:count]
    found = blur_of(WIDTH)
    for height in (-1.0, 0.3, 1.2):
        # 30 000 points leave a noise of 0.3 %
        assert np.mean(both[:, 2] < -height) == pytest.approx(float(found.filled(height)), abs=0.01)


def test_unblurring_returns_the_field_that_was_blurred():
    # a kinked field, blurred by random points in both balls, is found again at the surface
    rng = np.random.default_rng(2)

    def field(points):
        s, rho2 = points[:, 2], points[:, 0] ** 2 + points[:, 1] ** 2
        return np.where(s > 0, 5 - 0.8 * s + 0.1 * (s**2 - rho2 / 2), 5 + 0.3 * s)

    window = rng.normal(size=(60_000, 3))
    window *= (WIDTH / 2 * rng.uniform(size=60_000) ** (1 / 3) / np.linalg.norm(window, axis=1))[
        :, None
    ]
    r = np.linspace(0, 1, 4001)
    radius = SMEAR * np.interp(rng.uniform(size=60_000), held_part(r), r)
    smear = rng.normal(size=(60_000, 3))
    smear *= (radius / np.linalg.norm(smear, axis=1))[:, None]
    line = tuple(np.arange(-1, 3.01, 0.5))
    values = [field(window + smear + [0, 0, h]).mean() for h in line]
    coefficients = unblurring("outer", line, WIDTH) @ np.array(values)
    found = unblurred("outer", np.array([0.0, 1.0]), np.tile(coefficients[:, None], (2, 1, 3)))
    # the random sums have an error of about 0.005, twice that at the surface
    assert np.allclose(found[:, 0], [5.0, 4.3], atol=0.03)


def test_inner_model_sees_nothing_of_the_outside():
    line = tuple(np.arange(-5, -0.99, 0.5))
    found = blur_of(WIDTH)
    # 2 + 0.25 s inside, nothing outside, blurred exactly along the kernel
    values = [
        float((np.where(h - found.x < 0, 2 + 0.25 * (h - found.x), 0)) @ found.kernel) for h in line
    ]
    coefficients = unblurring("inner", line, WIDTH) @ np.array(values)
    height = np.array([0.0, -0.5, -2.0])
    back = unblurred("inner", height, np.tile(coefficients[:, None], (3, 1, 1)))
    assert np.allclose(back[:, 0], 2 + 0.25 * height, atol=1e-6)
