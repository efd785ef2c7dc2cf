"""Amplitude and Mueller matrices against Mie and against brute-force averages."""

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from dda.light import transverse
from dda.response.mueller import (
    amplitude_matrix,
    averaged_mueller_matrix,
    mueller_matrix,
    scattering_plane,
)
from dda.response.tmatrix import TMatrix
from dda.response.vector_waves import wave_count, wave_labels
from validation.mie import sphere

ANGLES = np.linspace(0, 180, 13)
ROUNDING = 1e-11


def ball(order=9):
    solved = sphere(300, 500, (2 + 0.1j) ** 2, 1.33, order=order)
    kind, n, _ = wave_labels(order).T
    matrix = np.diag(np.where(kind == 1, -solved.a[n], -solved.b[n]))
    return solved, TMatrix(matrix, 500.0, 1.33, np.zeros(3), 150.0, 150.0)


def mie_mueller(solved):
    """Bohren & Huffman (1983), equation 4.77."""
    s1, s2 = solved.amplitudes(np.deg2rad(ANGLES))
    m = np.zeros((len(ANGLES), 4, 4))
    m[:, 0, 0] = m[:, 1, 1] = (abs(s1) ** 2 + abs(s2) ** 2) / 2
    m[:, 0, 1] = m[:, 1, 0] = (abs(s2) ** 2 - abs(s1) ** 2) / 2
    m[:, 2, 2] = m[:, 3, 3] = (s1 * s2.conj()).real
    m[:, 2, 3] = (s2 * s1.conj()).imag
    m[:, 3, 2] = -m[:, 2, 3]
    return m


def amplitudes(t, direction, azimuth, angles=ANGLES):
    a = np.asarray(direction, float) / np.linalg.norm(direction)
    e1, e2 = transverse(a)
    out, parallel, perpendicular = scattering_plane(a, e1, e2, angles, azimuth)
    first, second = (t.scattering_amplitude(a, e, out) for e in (e1, e2))
    return amplitude_matrix(first, second, t.k, parallel, perpendicular, azimuth)


@pytest.mark.parametrize("direction", [(0, 0, 1), (3, 4, -6)])
@pytest.mark.parametrize("azimuth", [0, 40, 200])
def test_a_sphere_in_any_scattering_plane(direction, azimuth):
    solved, t = ball()
    s1, s2 = solved.amplitudes(np.deg2rad(ANGLES))
    s = amplitudes(t, direction, azimuth)
    scale = abs(s1).max()
    assert abs(s[:, 0, 0] - s2).max() < ROUNDING * scale
    assert abs(s[:, 1, 1] - s1).max() < ROUNDING * scale
    assert abs(s[:, 0, 1]).max() < ROUNDING * scale
    assert abs(s[:, 1, 0]).max() < ROUNDING * scale
    expected = mie_mueller(solved)
    assert abs(mueller_matrix(s) - expected).max() < ROUNDING * abs(expected).max()


def test_scattering_plane_is_a_right_handed_frame():
    a = np.array([2.0, -3, 6]) / 7
    out, parallel, perpendicular = scattering_plane(a, *transverse(a), ANGLES, 25)
    assert np.allclose(np.cross(perpendicular, parallel), out)
    assert np.allclose(out @ a, np.cos(np.deg2rad(ANGLES)))


def test_mueller_matrix_carries_stokes_vectors():
    rng = np.random.default_rng(0)
    j = rng.normal(size=(2, 2)) + 1j * rng.normal(size=(2, 2))
    e = rng.normal(size=2) + 1j * rng.normal(size=2)

    def stokes(field):
        p, s = field
        return np.array(
            [
                abs(p) ** 2 + abs(s) ** 2,
                abs(p) ** 2 - abs(s) ** 2,
                2 * (p * np.conj(s)).real,
                (1j * (p * np.conj(s) - s * np.conj(p))).real,
            ]
        )

    assert np.allclose(mueller_matrix(j) @ stokes(e), stokes(j @ e))


def test_average_of_a_sphere_is_the_sphere():
    solved, t = ball()
    expected = mie_mueller(solved)
    ours = averaged_mueller_matrix(t, ANGLES)
    assert abs(ours - expected).max() < ROUNDING * abs(expected).max()


def test_average_is_the_mean_over_rotations():
    rng = np.random.default_rng(1)
    size = (wave_count(1),) * 2
    matrix = rng.normal(size=size) + 1j * rng.normal(size=size)
    t = TMatrix(matrix, 500.0, 1.0, np.zeros(3), 50.0, 50.0)
    angles = np.array([0.0, 35, 90, 150, 180])
    count = 5
    cosine, weight = np.polynomial.legendre.leggauss(3)
    mean = np.zeros((5, 4, 4))
    for a in 2 * np.pi * np.arange(count) / count:
        for b, w in zip(np.arccos(cosine), weight / 2, strict=True):
            for c in 2 * np.pi * np.arange(count) / count:
                turned = t.rotated(Rotation.from_euler("ZYZ", [a, b, c]).as_matrix())
                mean += w / count**2 * mueller_matrix(amplitudes(turned, (0, 0, 1), 0, angles))
    ours = averaged_mueller_matrix(t, angles)
    assert abs(ours - mean).max() < ROUNDING * abs(mean).max()


def test_average_of_two_orders_at_once_is_turned_like_any_other():
    """The average of a turned particle is the same: mixes of orders 1 to 3 are right too."""
    rng = np.random.default_rng(2)
    size = (wave_count(3),) * 2
    matrix = rng.normal(size=size) + 1j * rng.normal(size=size)
    t = TMatrix(matrix, 500.0, 1.0, np.zeros(3), 50.0, 50.0)
    turned = t.rotated(Rotation.from_euler("ZYZ", [0.3, 1.1, 2.0]).as_matrix())
    one, two = averaged_mueller_matrix(t, ANGLES), averaged_mueller_matrix(turned, ANGLES)
    assert abs(one - two).max() < ROUNDING * abs(one).max()
    # and its integral is the averaged scattering cross section
    nodes, weight = np.polynomial.legendre.leggauss(8)
    s11 = averaged_mueller_matrix(t, np.rad2deg(np.arccos(nodes)))[:, 0, 0]
    c_sca = 2 * np.pi * (weight @ s11) / t.k**2
    assert np.isclose(c_sca, 2 * np.pi / t.k**2 * np.sum(abs(matrix) ** 2), rtol=1e-12)
