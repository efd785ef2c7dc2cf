"""Vector spherical waves: library harmonics, orthonormality, the plane wave summed back."""

import numpy as np
import pytest
from scipy.special import sph_harm_y

from validation.riccati import riccati
from validation.vector_waves import angular_parts, far_field, legendre, plane_wave, wave_fields


@pytest.mark.parametrize("degree", [0, 1, 2, 5, -1, -3])
def test_legendre_against_library(degree):
    theta, step = np.linspace(0.01, 3.1, 9), 1e-5
    p, pi, tau = legendre(8, degree, np.cos(theta))
    expected = [sph_harm_y(n, degree, theta, 0).real * (n >= abs(degree)) for n in range(9)]
    assert np.allclose(p, expected, rtol=0, atol=1e-13)
    assert np.allclose(pi, degree * p / np.sin(theta), rtol=0, atol=1e-11)
    ahead = legendre(8, degree, np.cos(theta + step))[0]
    behind = legendre(8, degree, np.cos(theta - step))[0]
    assert np.allclose(tau, (ahead - behind) / (2 * step), rtol=0, atol=1e-7)  # step^2 n^4


def test_axis_is_regular():
    for degree in (0, 1, -1, 2):
        on, near = np.array([1.0, -1.0]), np.array([1 - 1e-14, -1 + 1e-14])
        for at, by in zip(legendre(6, degree, on), legendre(6, degree, near), strict=True):
            assert np.allclose(at, by, rtol=0, atol=1e-5)


@pytest.mark.parametrize("degree", [0, 1, -2])
def test_angular_parts_are_orthonormal(degree):
    cosine, weight = np.polynomial.legendre.leggauss(20)
    x, z, _ = angular_parts(8, degree, cosine)
    first = max(1, abs(degree))
    for f, g, expected in ((x, x, 1.0), (z, z, 1.0), (x, z, 0.0)):
        gram = 2 * np.pi * np.einsum("npc,lpc,p->nl", f.conj(), g, weight)[first:, first:]
        assert np.allclose(gram, expected * np.eye(9 - first), atol=1e-13)


def test_plane_wave_is_the_sum_of_its_waves():
    k = 0.02
    direction = np.array([0.48, -0.6, 0.64])
    polarization = np.cross(direction, [1, 2j, -1])
    points = np.array([[30.0, 40, -20], [-10, 5, 60], [0, 0, 50], [70, 0, 0]])
    rho = k * np.linalg.norm(points, axis=1)
    order = 25
    functions = riccati(order, rho)
    e = np.zeros((4, 3), dtype=complex)
    h = np.zeros((4, 3), dtype=complex)
    for degree in range(-order, order + 1):
        amplitudes = plane_wave(order, degree, direction, polarization)
        radial, slope = functions.psi / rho, functions.psi_prime / rho
        field, curl = wave_fields(degree, points, radial, slope, rho, amplitudes)
        e, h = e + field, h + curl / 1j
    phase = np.exp(1j * k * points @ direction)[:, None]
    assert np.allclose(e, polarization * phase, rtol=0, atol=1e-12)
    assert np.allclose(h, np.cross(direction, polarization) * phase, rtol=0, atol=1e-12)


def test_far_field_is_the_limit_of_the_field():
    direction = np.array([[0.48, -0.6, 0.64], [0, 0, 1.0]])
    amplitudes = np.array([[0, 1.0, 0.5j, -0.2], [0, 0.3, -1j, 0.7]], dtype=complex)
    rho = np.full(2, 2e4)
    functions = riccati(3, rho)
    for degree in (-1, 0, 1):
        field, _ = wave_fields(
            degree, direction, functions.xi / rho, functions.xi_prime / rho, rho, amplitudes
        )
        far = far_field(3, degree, direction, amplitudes)
        got = field * (rho * np.exp(-1j * rho))[:, None]
        assert np.allclose(got, far, rtol=0, atol=1e-3)  # next order n^2 / rho
