"""Plane waves from few fields."""

import numpy as np
import pytest

from dda.design.light_modes import light_modes, polarizations
from dda.light import plane_wave
from dda.response.far_field import sphere_quadrature

K = 0.0106
EXTENT = np.array([20.0, 20.0, 60.0])
CENTRE = np.array([5.0, -3.0, 40.0])


@pytest.fixture(scope="module")
def places():
    rng = np.random.default_rng(2)
    return CENTRE + EXTENT * (rng.random((50, 3)) - 0.5)


@pytest.fixture(scope="module")
def modes():
    directions, weights = sphere_quadrature(6)
    return light_modes(directions, weights, k=K, extent=EXTENT, centre=CENTRE)


def test_waves_of_any_direction_are_sums_of_the_modes(modes, places):
    rng = np.random.default_rng(3)
    directions = rng.normal(size=(7, 3))
    directions /= np.linalg.norm(directions, axis=1)[:, None]
    fields = np.array([light.field(places, K) for light in modes.lights])
    found = np.einsum("mqj,mnc->qjnc", modes.coefficients(directions), fields)
    exact = np.array(
        [
            [plane_wave(direction, e).field(places - CENTRE, K) for e in pair]
            for direction, pair in zip(directions, polarizations(directions), strict=True)
        ]
    )
    # a millionth of the mean square is left out, twice as much near the ends of the box
    assert np.sqrt(np.mean(abs(found - exact) ** 2)) < 3 * np.sqrt(modes.neglected)
    assert len(modes.lights) < 25


def test_modes_are_even_or_odd_across_the_middle(modes, places):
    # so that each is solved in one mirror sector of a symmetric particle
    for light in modes.lights:
        for axis in range(3):
            flip = np.ones(3)
            flip[axis] = -1
            here = light.field(places, K)
            there = flip * light.field(CENTRE + flip * (places - CENTRE), K)
            scale = abs(here).max()
            assert min(abs(here - there).max(), abs(here + there).max()) < 1e-4 * scale


def test_the_magnetic_field_is_that_of_maxwell(modes, places):
    # curl E = i k H, by central differences of 0.1 nm: relative error (k h)^2
    light, h = modes.lights[4], 0.1
    gradient = np.array(
        [
            (light.field(places + h * e, K) - light.field(places - h * e, K)) / (2 * h)
            for e in np.eye(3)
        ]
    )
    curl = np.stack(
        [gradient[(c + 1) % 3, :, (c + 2) % 3] - gradient[(c + 2) % 3, :, (c + 1) % 3]
         for c in range(3)],
        axis=1,
    )  # fmt: skip
    magnetic = light.magnetic(places, K)
    assert abs(curl / (1j * K) - magnetic).max() < 1e-4 * abs(magnetic).max()
