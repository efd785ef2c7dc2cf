"""Translation of vector waves: the same field about another centre."""

import numpy as np
import pytest

from dda.response.translation import outgoing_to_regular, regular_to_regular
from dda.response.vector_waves import real_to_complex, regular_waves, wave_count, wave_labels
from validation.riccati import riccati
from validation.vector_waves import wave_fields

K, SHIFT = 0.02, np.array([30.0, -50, 20])


def amplitudes(order):
    rng = np.random.default_rng(0)
    return rng.normal(size=wave_count(order)) + 1j * rng.normal(size=wave_count(order))


def regular_field(order, a, points):
    return (regular_waves(order, points, K) @ real_to_complex(order).toarray().T) @ a


def test_regular_waves_about_another_centre():
    a = amplitudes(3)
    points = np.random.default_rng(1).normal(size=(6, 3)) * 3
    moved = regular_to_regular(12, 3, SHIFT, K) @ a
    exact = regular_field(3, a, points + SHIFT)
    # near the new centre (k r < 0.2) order 12 is complete to rounding
    assert abs(regular_field(12, moved, points) - exact).max() < 1e-12 * abs(exact).max()


def test_outgoing_waves_about_another_centre():
    order = 2
    a = amplitudes(order)
    points = np.random.default_rng(1).normal(size=(6, 3))
    from_old = points + SHIFT
    rho = K * np.linalg.norm(from_old, axis=1)
    functions = riccati(order, rho)
    exact = np.zeros((6, 3), complex)
    for value, (kind, n, m) in zip(a, wave_labels(order), strict=True):
        one = np.zeros((2, order + 1), complex)
        one[kind, n] = value
        radial, slope = functions.xi / rho, functions.xi_prime / rho
        exact += wave_fields(m, from_old, radial, slope, rho + 0j, one)[0]
    moved = outgoing_to_regular(12, order, SHIFT, K) @ a
    # points within 3 nm of a centre 62 nm away: (3/62)^12 of a wave is left out
    assert abs(regular_field(12, moved, points) - exact).max() < 1e-10 * abs(exact).max()


def test_there_and_back():
    there = regular_to_regular(14, 3, SHIFT, K)
    back = regular_to_regular(3, 14, -SHIFT, K)
    # what orders above 14 carry at k d = 1.2 is far below rounding
    assert abs(back @ there - np.eye(wave_count(3))).max() < 1e-12
    assert abs(back - there.conj().T).max() < 1e-12


def test_no_shift_is_no_change_and_outgoing_waves_have_no_value_at_home():
    assert np.array_equal(regular_to_regular(2, 2, (0, 0, 0), K), np.eye(wave_count(2)))
    with pytest.raises(ValueError, match="own centre"):
        outgoing_to_regular(2, 2, (0, 0, 0), K)
