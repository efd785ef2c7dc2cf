"""Small ellipsoids against published depolarization factors, closed forms and the Mie series."""

import numpy as np
import pytest

from validation.gans import depolarization, ellipsoid
from validation.mie import sphere


@pytest.mark.parametrize("axes", [(1, 1, 1), (1, 2, 3), (10, 10, 90), (80, 80, 3)])
def test_factors_add_up_to_one(axes):
    factors = depolarization(axes)
    assert factors.sum() == pytest.approx(1, abs=1e-14)
    assert factors[np.argmin(axes)] == factors.max()


@pytest.mark.parametrize("ratio", [1.2, 2, 3, 5, 10])
def test_spheroids_against_closed_forms(ratio):
    """Bohren & Huffman (1983), equations 5.33 (prolate) and 5.34 (oblate)."""
    square = 1 - 1 / ratio**2
    e = np.sqrt(square)
    prolate = (1 - square) / square * (np.arctanh(e) / e - 1)
    assert depolarization((1, 1, ratio))[2] == pytest.approx(prolate, rel=1e-12)
    g = np.sqrt((1 - square) / square)
    oblate = g / (2 * square) * (np.pi / 2 - np.arctan(g)) - g**2 / 2
    assert depolarization((ratio, 1, ratio))[0] == pytest.approx(oblate, rel=1e-12)


def test_published_factors():
    """Osborn (1945), prolate spheroids of ratio 2 and 5: 0.1736 and 0.0558, from memory."""
    assert depolarization((1, 1, 2))[2] == pytest.approx(0.1736, abs=6e-5)
    assert depolarization((1, 1, 5))[2] == pytest.approx(0.0558, abs=6e-5)


@pytest.mark.parametrize("damping", [True, False])
def test_small_sphere_against_mie(damping):
    small = ellipsoid([0.2, 0.2, 0.2], 500.0, -5 + 2j, 1.33, damping)
    mie = sphere(0.2, 500.0, -5 + 2j, 1.33)
    # The next order is the square of the size parameter, 3e-6, times a factor of the resonance.
    expected = pytest.approx((mie.c_ext, mie.c_abs, mie.c_sca), rel=3e-5)
    assert small.cross_sections((1, 0, 0)) == expected
    assert small.orientation_average() == expected


def test_damping_makes_a_lossless_ellipsoid_lossless():
    c_ext, c_abs, _ = ellipsoid([60, 40, 50], 500.0, 4.0, damping=True).cross_sections((1, 1j, 0))
    assert abs(c_abs) < 1e-14 * c_ext


def test_polarization_along_the_axes():
    particle = ellipsoid([2, 4, 6], 600.0, -12 + 1j, 1.33)
    alone = np.array([particle.cross_sections(v) for v in np.eye(3)])
    assert particle.cross_sections((1, 1j, 0)) == pytest.approx(alone[:2].mean(axis=0), rel=1e-13)
    assert particle.orientation_average() == pytest.approx(alone.mean(axis=0), rel=1e-13)
    assert alone[2, 1] > 5 * alone[0, 1]  # near its resonance, the long axis absorbs most


def test_flat_axis_is_refused():
    with pytest.raises(ValueError, match="positive"):
        depolarization((1, 0, 2))
