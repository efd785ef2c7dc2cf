"""Vector spherical waves against an independent construction in polar components."""

import numpy as np
import pytest

from dda.response.vector_waves import (
    fields_of,
    first_order,
    gradients,
    moments_of,
    order_of,
    plane_wave_coefficients,
    real_to_complex,
    regular_waves,
    scalar_waves,
    spectra,
    wave_count,
    wave_labels,
)
from validation import vector_waves as polar
from validation.riccati import riccati

K = 0.02
ROUNDING = 1e-12  # sums of some hundred terms of order one


def places(count=12, scale=60.0):
    return scale * np.random.default_rng(1).normal(size=(count, 3))


def complex_waves(order, positions):
    return regular_waves(order, positions, K) @ real_to_complex(order).toarray().T


def test_regular_waves_agree_with_their_polar_components():
    order, points = 6, places()
    rho = K * np.linalg.norm(points, axis=1)
    functions = riccati(order, rho)
    ours = complex_waves(order, points)
    for column, (kind, n, m) in enumerate(wave_labels(order)):
        amplitudes = np.zeros((2, order + 1), complex)
        amplitudes[kind, n] = 1
        theirs, _ = polar.wave_fields(
            m, points, functions.psi / rho, functions.psi_prime / rho, rho + 0j, amplitudes
        )
        assert abs(ours[:, :, column] - theirs).max() < ROUNDING * abs(theirs).max()


def test_plane_wave_coefficients_agree_with_the_polar_ones():
    order, direction = 5, np.array([2.0, -3, 6]) / 7
    e = np.cross(direction, [1, 2j, 3])
    ours = plane_wave_coefficients(order, direction, e)
    for m in range(-order, order + 1):
        theirs = polar.plane_wave(order, m, direction, e)
        for value, (kind, n, degree) in zip(ours, wave_labels(order), strict=True):
            if degree == m:
                assert abs(value - theirs[kind, n]) < ROUNDING * 40


def test_plane_wave_is_the_sum_of_its_waves():
    direction, e = np.array([0.6, 0, 0.8]), np.array([0.8, 1j, -0.6])
    points = places(scale=20.0)  # k r up to about 1: order 12 is complete to rounding
    p = plane_wave_coefficients(12, direction, e)
    total = complex_waves(12, points) @ p
    exact = np.exp(1j * K * points @ direction)[:, None] * e
    assert abs(total - exact).max() < 1e-11


def test_spectra_are_orthonormal_on_the_sphere():
    order = 4
    cosine, weight = np.polynomial.legendre.leggauss(order + 2)
    phi = 2 * np.pi * np.arange(2 * order + 3) / (2 * order + 3)
    sine = np.sqrt(1 - cosine**2)
    directions = np.stack(
        np.broadcast_arrays(
            sine[:, None] * np.cos(phi), sine[:, None] * np.sin(phi), cosine[:, None]
        ),
        axis=-1,
    ).reshape(-1, 3)
    area = np.repeat(weight * 2 * np.pi / len(phi), len(phi))
    a = spectra(order, directions)
    gram = np.einsum("d,dal,dam->lm", area, a.conj(), a)
    assert abs(gram - np.eye(len(gram))).max() < ROUNDING
    along = np.einsum("dal,da->dl", a, directions)
    assert abs(along).max() < ROUNDING  # transverse


def test_fields_and_moments_are_each_others_transpose():
    rng = np.random.default_rng(3)
    points = places(20)
    coefficients = rng.normal(size=(2, wave_count(3)))
    vectors = rng.normal(size=(2, 20, 3)) + 1j * rng.normal(size=(2, 20, 3))
    fields = fields_of(coefficients, points, K)
    moments = moments_of(vectors, points, K, 3)
    one = np.einsum("cna,dna->cd", fields, vectors)
    assert abs(one - coefficients @ moments.T).max() < ROUNDING * abs(one).max()


def test_waves_at_the_origin_are_the_electric_dipoles_only():
    waves = complex_waves(3, np.zeros((1, 3)))[0]
    kind, n, _ = wave_labels(3).T
    dipoles = (kind == 1) & (n == 1)
    assert abs(waves[:, ~dipoles]).max() == 0
    # N_1m = sqrt(2/3) j_0 Y_00 times a unit vector there: (2/3) / (4 pi)
    assert np.allclose((abs(waves) ** 2).sum(axis=1), 1 / (6 * np.pi))


def test_gradients_are_the_derivatives_of_scalar_waves():
    order, points, step = 3, places(), 1e-3
    wide = _to_complex(scalar_waves(order + 1, points, K))
    for axis in range(3):
        shift = step * np.eye(3)[axis]
        slope = scalar_waves(order, points + shift, K) - scalar_waves(order, points - shift, K)
        exact = gradients(order + 1)[axis].toarray()[:, : (order + 1) ** 2]
        # the difference quotient is good to (k step)^2 and rounding over the step
        assert abs(wide @ exact - _to_complex(slope) / (2 * step * K)).max() < 1e-7


def _to_complex(real):
    """z_q Y_qs from their real counterparts, column by column."""
    out = np.empty(real.shape, complex)
    q = 0
    for column in range(real.shape[1]):
        while (q + 1) ** 2 <= column:
            q += 1
        middle = q * (q + 1)
        m = column - middle
        cosine, sine = real[:, middle + abs(m)], real[:, middle - abs(m)]
        if m == 0:
            out[:, column] = cosine
        else:
            y = (-1) ** abs(m) * (cosine + 1j * sine) / np.sqrt(2)
            out[:, column] = y if m > 0 else (-1) ** abs(m) * y.conj()
    return out


def test_counts_and_labels():
    assert wave_count(3) == 30
    assert len(wave_labels(3)) == 30
    assert order_of(30) == 3
    with pytest.raises(ValueError, match="31 is not"):
        order_of(31)


def test_first_order_grows_with_size():
    orders = [first_order(x) for x in (0.1, 1.0, 3.0, 10.0)]
    assert orders == sorted(orders)
    assert orders[0] == 1
    assert orders[-1] >= 12
