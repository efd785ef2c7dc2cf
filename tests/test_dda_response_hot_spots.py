"""Hot-spot numbers on fields whose answers are known."""

import numpy as np
import pytest

from dda.errors import InputError
from dda.response.hot_spots import extent_above, field_numbers, find_hot_spots
from dda.response.near_points import box


def test_percentiles_are_weighted():
    e2 = np.array([1.0, 2, 3, 4])
    found = field_numbers(np.zeros((4, 3)), e2, np.array([97.0, 1, 1, 1]), percentages=(50, 99))
    assert found.e2_percentiles.tolist() == [1, 3]
    assert found.e4_percentiles.tolist() == [1, 9]
    assert found.extent == 100


def test_dipole_field_over_a_sphere():
    # |E|^2 = 1 + 3 cos^2 on a sphere: mean 2, mean square 1 + 6/3 + 9/5
    k = np.arange(4000) + 0.5
    cosine = 1 - 2 * k / 4000
    points = np.stack([np.sqrt(1 - cosine**2), 0 * cosine, cosine], axis=1)
    found = field_numbers(points, 1 + 3 * cosine**2, np.full(4000, np.pi / 1000))
    assert found.mean_e2 == pytest.approx(2, rel=1e-6)
    assert found.mean_e4 == pytest.approx(4.8, rel=1e-6)
    assert found.maximum == pytest.approx(4, rel=1e-3)
    assert abs(found.place[2]) == pytest.approx(1, rel=1e-3)
    assert np.isnan(found.error)


def test_two_spots_in_a_volume_with_their_shares():
    region = box((20, 10, 10), step=0.5)
    strong, weak = (np.sum((region.points - [x, 0, 0]) ** 2, axis=1) for x in (5, -5))
    e2 = 100 * np.exp(-strong / 2) + 50 * np.exp(-weak / 2)
    found = find_hot_spots(region.points, e2, region.cell, region.step, threshold=10)
    assert found.count == 2
    assert found.spots[0].place.tolist() == pytest.approx([5, 0, 0])
    assert found.spots[1].peak == pytest.approx(50, rel=1e-6)
    # |E|^4 integrals of equal widths go as the squares of the peaks, 4 : 1, less the tails
    ratio = found.spots[0].share_e4 / found.spots[1].share_e4
    assert 4 <= ratio < 4.5
    # volume where 100 exp(-r^2/2) > 10, and 50: balls of r = 2.146 and 1.794
    balls = 4 / 3 * np.pi * (2.146**3 + 1.794**3)
    assert found.extent == pytest.approx(balls, rel=0.05)
    levels = extent_above(e2, np.full(len(e2), region.cell), [10, 1e3])
    assert levels.tolist() == [found.extent, 0]


def test_default_threshold_is_half_the_maximum():
    points = np.arange(5.0)[:, None] * [1, 0, 0]
    found = find_hot_spots(points, np.array([10.0, 5.1, 4.9, 1, 6]), np.ones(5), step=1.0)
    assert found.threshold == 5
    assert [s.points for s in found.spots] == [2, 1]


def test_no_field_above_the_threshold():
    found = find_hot_spots(np.zeros((2, 3)), np.ones(2), np.ones(2), step=1.0, threshold=5)
    assert found.count == 0
    assert found.extent == 0


def test_senseless_input_is_refused():
    with pytest.raises(InputError, match="at least one point"):
        field_numbers(np.zeros((0, 3)), np.zeros(0), np.zeros(0))
    with pytest.raises(InputError, match="finite"):
        field_numbers(np.zeros((1, 3)), np.array([np.nan]), np.ones(1))
    with pytest.raises(InputError, match="step"):
        find_hot_spots(np.zeros((1, 3)), np.ones(1), np.ones(1), step=0)
