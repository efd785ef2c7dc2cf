"""The null-field T-matrix of spheroids: Mie, Gans, energy, reciprocity, convergence."""

import numpy as np
import pytest

from validation.ebcm import spheroid
from validation.gans import ellipsoid
from validation.mie import sphere

GOLD = -9.4 + 1.4j  # near 600 nm, Johnson & Christy (1972), rounded, from memory


@pytest.mark.parametrize("eps", [GOLD, 2.25, 17.5 + 0.5j, -4.4 + 0.2j])
def test_sphere_is_mie(eps):
    s, m = spheroid(120, 120, 500.0, eps, 1.33), sphere(120, 500.0, eps, 1.33)
    assert s.orientation_average()[::2] == pytest.approx((m.c_ext, m.c_sca), rel=1e-11)
    tilted = s.cross_sections([1, 2, 3], [3, 1j, -1 - 2j / 3])
    assert tilted[::2] == pytest.approx((m.c_ext, m.c_sca), rel=1e-11)
    for n in range(1, 5):
        assert s.block(1)[0, n, 0, n] == pytest.approx(-m.b[n], rel=1e-10)
        assert s.block(-1)[1, n, 1, n] == pytest.approx(-m.a[n], rel=1e-10)


@pytest.mark.parametrize(("equatorial", "polar"), [(2, 4), (1, 3), (3, 1), (1, 1.2)])
def test_small_spheroids_are_gans(equatorial, polar):
    """The difference falls as the size squared, so Richardson's extrapolation must remove it."""
    deviations = []
    for scale in (1.0, 0.5):
        axes = np.array([equatorial, equatorial, polar]) * scale
        s = spheroid(axes[0], axes[2], 600.0, GOLD, 1.33)
        g = ellipsoid(axes, 600.0, GOLD, 1.33)
        ours = [s.orientation_average(), s.cross_sections([1, 0, 0], [0, 0, 1])]
        ours.append(s.cross_sections([0, 0, 1], [1, 0, 0]))
        theirs = [g.orientation_average(), g.cross_sections([0, 0, 1]), g.cross_sections([1, 0, 0])]
        deviations.append(np.array(ours) / theirs - 1)
    assert np.abs(deviations[0]).max() < 6e-3
    # What is left is of third and fourth order in a size parameter of 0.03.
    assert np.abs(4 * deviations[1] - deviations[0]).max() < 1e-4


@pytest.mark.parametrize(("equatorial", "polar"), [(100, 180), (180, 100)])
def test_lossless_spheroid_is_unitary(equatorial, polar):
    """(1 + 2T) is unitary when nothing is absorbed: T + T^H + 2 T^H T = 0."""
    s = spheroid(equatorial, polar, 500.0, 6.0, 1.0, order=16)
    for m in (0, 1, 2, 3):
        t = s.block(m).reshape(34, 34)
        assert np.abs(t + t.conj().T + 2 * t.conj().T @ t).max() < 1e-9
    c_ext, c_abs, _ = s.cross_sections([1, 0, 1], [1, 1j, -1])
    assert abs(c_abs) < 1e-9 * c_ext


def test_reciprocity():
    """Matrix symmetry T(m; i n, j l) = +-T(m; j l, i n), minus for i != j (Waterman 1971)."""
    s = spheroid(60, 120, 600.0, GOLD, 1.33, order=12)
    for m in (0, 1, 2):
        t = s.block(m)
        sign = np.array([[1, -1], [-1, 1]])[:, None, :, None]
        assert np.allclose(t, sign * t.transpose(2, 3, 0, 1), rtol=0, atol=1e-10 * np.abs(t).max())


def test_average_is_the_mean_over_directions():
    s = spheroid(60, 120, 600.0, GOLD, 1.33)
    cosine, weight = np.polynomial.legendre.leggauss(12)
    total = np.zeros(3)
    for c, w in zip(cosine, weight, strict=True):
        direction = [np.sqrt(1 - c * c), 0, c]
        for polarization in ([0, 1, 0], [c, 0, -np.sqrt(1 - c * c)]):
            total += w / 4 * np.array(s.cross_sections(direction, polarization))
    assert total == pytest.approx(s.orientation_average(), rel=1e-10)


@pytest.mark.parametrize(
    ("equatorial", "polar", "wavelength", "eps", "error"),
    [
        (80, 150, 700, -16 + 1j, 1e-10),
        (150, 75, 700, -16 + 1j, 1e-9),
        (60, 150, 500, 17.5 + 0.5j, 1e-8),
        (25, 125, 900, -35 + 2j, 1e-5),
    ],
)
def test_orders_converge(equatorial, polar, wavelength, eps, error):
    s = spheroid(equatorial, polar, wavelength, eps, 1.33)
    assert s.error < error
    finer = spheroid(equatorial, polar, wavelength, eps, 1.33, order=s.order + 1, points=300)
    assert finer.orientation_average() == pytest.approx(s.orientation_average(), rel=5 * error)


def test_parallel_polarization_is_refused():
    with pytest.raises(ValueError, match="perpendicular"):
        spheroid(10, 20, 600.0, GOLD).cross_sections([0, 0, 1], [0, 0, 1])
