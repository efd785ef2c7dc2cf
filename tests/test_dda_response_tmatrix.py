"""The T-matrix object: a sphere's from its Mie coefficients, turned, cut and checked."""

import numpy as np
import pytest

import dda
from dda.response.tmatrix import TMatrix
from dda.response.vector_waves import wave_count, wave_labels
from validation.ebcm import spheroid
from validation.mie import sphere

ROUNDING = 1e-11


def t_of(matrix, wavelength=500.0, n_host=1.33, radius=50.0):
    return TMatrix(matrix, wavelength, n_host, np.zeros(3), radius, radius)


def mie_t(solved, order):
    kind, n, _ = wave_labels(order).T
    return t_of(
        np.diag(np.where(kind == 1, -solved.a[n], -solved.b[n])),
        solved.wavelength,
        solved.n_host,
        solved.diameter / 2,
    )


def spheroid_t(solved, order, wavelength, n_host):
    """The null-field solution in the order of rows of the program."""
    labels = wave_labels(order)
    matrix = np.zeros((len(labels), len(labels)), complex)
    for i, (kind, n, m) in enumerate(labels):
        for j, (other, l, degree) in enumerate(labels):
            if degree == m and max(n, l) <= solved.order:
                matrix[i, j] = solved.block(m)[kind, n, other, l]
    return t_of(matrix, wavelength, n_host)


def test_a_sphere_from_mie_coefficients():
    solved = sphere(200, 500, (2 + 0.1j) ** 2, 1.33, order=9)
    t = mie_t(solved, 9)
    expected = (solved.c_ext, solved.c_abs, solved.c_sca)
    for direction, e in (((0, 0, 1), (1, 0, 0)), ((0.6, 0, 0.8), (0.8, 1j, -0.6))):
        e = np.array(e) / np.linalg.norm(e)
        assert np.allclose(t.cross_sections(direction, e), expected, rtol=1e-12)


def test_scattering_amplitude_of_a_sphere():
    solved = sphere(200, 500, (2 + 0.1j) ** 2, 1.33, order=9)
    angles = np.linspace(0, np.pi, 7)
    s1, s2 = solved.amplitudes(angles)
    out = np.stack([np.sin(angles), 0 * angles, np.cos(angles)], axis=1)
    t = mie_t(solved, 9)
    parallel = t.scattering_amplitude((0, 0, 1), (1, 0, 0), out)
    theta = np.stack([np.cos(angles), 0 * angles, -np.sin(angles)], axis=1)
    # E = S2 exp(ikr)/(-ikr) for the parallel component
    assert np.allclose(np.sum(parallel * theta, axis=1), s2 / (-1j * t.k), rtol=ROUNDING)
    across = t.scattering_amplitude((0, 0, 1), (0, 1, 0), out)
    assert np.allclose(across[:, 1], s1 / (-1j * t.k), rtol=ROUNDING)


def test_a_spheroid_by_the_null_field_method():
    solved = spheroid(equatorial=40, polar=80, wavelength=600, eps=-9.4 + 1.4j, n_host=1.33)
    t = spheroid_t(solved, 8, 600, 1.33)
    direction, e = np.array([0.6, 0, 0.8]), np.array([0.8, 0, -0.6])
    # the null-field solution itself is good to 1e-9 or so
    assert np.allclose(
        t.cross_sections(direction, e), solved.cross_sections(direction, e), rtol=1e-7
    )
    assert t.reciprocity() < 1e-7
    turn = np.array([[0, 0, 1.0], [1, 0, 0], [0, 1, 0]])
    turned = t.rotated(turn)
    assert np.allclose(
        turned.cross_sections(turn @ direction, turn @ e),
        t.cross_sections(direction, e),
        rtol=ROUNDING,
    )
    assert turned.reciprocity() < 1e-7
    assert abs(turned.rotated(turn.T).matrix - t.matrix).max() < ROUNDING


def test_unitarity_and_gain():
    clear = mie_t(sphere(200, 500, 4.0, 1.33, order=9), 9)
    assert clear.unitarity() < ROUNDING
    assert abs(clear.passivity()) < ROUNDING
    lossy = mie_t(sphere(200, 500, (2 + 0.1j) ** 2, 1.33, order=9), 9)
    assert 0.05 < lossy.unitarity() < 1
    # the highest waves hardly see the sphere, so that their loss is about zero
    assert -1e-6 < lossy.passivity() < ROUNDING
    gaining = t_of(-clear.matrix)
    assert gaining.passivity() > 0.1


def test_reciprocity_sees_what_breaks_it():
    matrix = np.zeros((wave_count(1),) * 2, complex)
    matrix[3:, 3:] = -0.1 * np.eye(3)
    assert t_of(matrix).reciprocity() == 0
    matrix[3, 4] = 0.05  # a dipole along one axis answers to another, but not the reverse
    assert t_of(matrix).reciprocity() > 0.1


def test_truncation_keeps_the_low_orders():
    t = mie_t(sphere(200, 500, 4.0, 1.33, order=9), 9)
    cut = t.truncated(3)
    assert cut.order == 3
    assert np.array_equal(np.diag(cut.matrix)[:3], np.diag(t.matrix)[:3])
    with pytest.raises(dda.InputError, match="between 1 and"):
        t.truncated(10)
