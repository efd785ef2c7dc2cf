"""Peak and width of a spectrum."""

import numpy as np
import pytest

from dda.study.spectrum import find_peak


def test_a_lorentzian_gives_its_own_position_and_width():
    x = np.arange(450, 700, 5.0)
    peak = find_peak(x, 2.0 / (1 + ((x - 562.3) / 30) ** 2))
    # The vertex of a parabola is off by the fourth derivative, the half points by linear
    # interpolation: both below a tenth of the 5 nm step.
    assert peak.position == pytest.approx(562.3, abs=0.2)
    assert peak.height == pytest.approx(2.0, rel=2e-3)
    assert peak.width == pytest.approx(60.0, abs=0.5)


def test_a_parabola_is_found_exactly_on_an_uneven_grid():
    x = np.array([500.0, 503.0, 511.0, 514.0, 530.0])
    peak = find_peak(x, 7 - ((x - 509.0) / 10) ** 2)
    assert peak.position == pytest.approx(509.0, abs=1e-9)
    assert peak.height == pytest.approx(7.0, abs=1e-9)


def test_order_and_gaps_do_not_matter():
    x = np.arange(500, 560, 5.0)
    y = np.exp(-(((x - 531) / 15) ** 2))
    y[2] = np.nan
    shuffled = np.random.default_rng(0).permutation(len(x))
    assert find_peak(x[shuffled], y[shuffled]) == find_peak(x, y)


def test_the_end_of_a_spectrum_is_no_peak():
    x = np.arange(500, 560, 10.0)
    assert find_peak(x, x) is None
    assert find_peak(x[:2], [1, 2]) is None
    assert find_peak([], []) is None


def test_an_inner_maximum_is_found_below_a_higher_end():
    peak = find_peak([400, 420, 440, 460, 480, 500], [9, 5, 3, 4, 3, 1])
    assert peak.position == pytest.approx(460)
    assert peak.blue is None
    assert peak.red == pytest.approx(490)
    assert peak.width is None
