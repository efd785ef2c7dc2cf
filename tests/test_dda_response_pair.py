"""Pairs from T-matrices against the translation-theorem solution of two spheres."""

import numpy as np
import pytest

import dda
import shapes
from dda.response.averages import orientation_average
from dda.response.pair import pair
from dda.response.tmatrix import TMatrix
from dda.response.tmatrix_solve import t_matrix
from dda.response.vector_waves import wave_labels
from validation.compare import permittivity
from validation.mie import sphere
from validation.two_spheres import two_spheres

WAVELENGTH, HOST = 560.0, 1.33
LIGHTS = [
    ((0, 0, 1), (1, 0, 0)),
    ((0, 0, 1), (0, 1, 0)),
    ((1, 0, 0), (0, 1, 0)),
    ((0.6, 0, 0.8), (0.8, 0, -0.6)),
]


def gold():
    return permittivity("gold", WAVELENGTH)


def exact_ball(diameter, order):
    solved = sphere(diameter, WAVELENGTH, gold(), HOST, order=order)
    kind, n, _ = wave_labels(order).T
    matrix = np.diag(np.where(kind == 1, -solved.a[n], -solved.b[n]))
    radius = diameter / 2
    return TMatrix(matrix, WAVELENGTH, HOST, np.zeros(3), radius, radius)


# half a diameter apart, then a tenth of the radius
@pytest.mark.parametrize(("gap", "order", "allowed"), [(20, 8, 1e-6), (2, 14, 2e-3)])
def test_exact_spheres(gap, order, allowed):
    ball = exact_ball(40, order)
    both = pair(ball, ball, (40 + gap, 0, 0))
    for direction, polarization in LIGHTS if gap > 10 else LIGHTS[:1]:
        ours = both.cross_sections(direction, polarization)
        theirs = two_spheres(40, gap, WAVELENGTH, gold(), HOST, direction, polarization)
        assert np.allclose(ours, theirs.cross_sections(), rtol=allowed)


def test_unlike_spheres_along_any_line():
    """The line of the reference lies along x; here it is turned, and the light with it."""
    turn = np.array([[2.0, -1, 2], [2, 2, -1], [-1, 2, 2]]) / 3
    one, two = exact_ball(40, 8), exact_ball(60, 8)
    both = pair(one, two, turn @ (70, 0, 0))
    for direction, polarization in LIGHTS:
        ours = both.cross_sections(turn @ direction, turn @ polarization)
        theirs = two_spheres((40, 60), 20, WAVELENGTH, gold(), HOST, direction, polarization)
        assert np.allclose(ours, theirs.cross_sections(), rtol=1e-5)


def test_the_average_is_that_of_the_joint_t_matrix():
    both = pair(exact_ball(40, 6), exact_ball(60, 6), (30, 50, 40))
    joint = both.t_matrix()
    ours = orientation_average(joint)
    assert np.allclose(both.orientation_average(), (ours.c_ext, ours.c_abs, ours.c_sca), rtol=1e-6)
    direction, polarization = LIGHTS[3]
    assert np.allclose(
        joint.cross_sections(direction, polarization),
        both.cross_sections(direction, polarization),
        rtol=1e-6,
    )
    assert joint.reciprocity() < 1e-9
    assert np.isclose(joint.r_eff, (20**3 + 30**3) ** (1 / 3))


def test_far_apart_they_are_two():
    ball = exact_ball(40, 4)
    c_ext, c_abs, _ = pair(ball, ball, (0, 0, 3000)).orientation_average()
    alone = orientation_average(ball)
    assert np.isclose(c_ext, 2 * alone.c_ext, rtol=0.01)
    assert np.isclose(c_abs, 2 * alone.c_abs, rtol=0.01)


def dimer_sections(gap, cells, light):
    body = shapes.dimer(shapes.sphere(40), gap=gap)
    system = dda.system(shapes.voxelize(body, cells=cells), WAVELENGTH, HOST)
    answer = dda.cross_sections(dda.solve(system, light, tolerance=1e-4))
    return np.array([answer.c_ext, answer.c_abs, answer.c_sca])


def test_dipoles_of_two_balls_as_one_system_and_as_a_pair():
    """16 cells across each ball in both; the reference settles which is meant."""
    ball = dda.system(shapes.voxelize(shapes.sphere(40), cells=16), WAVELENGTH, HOST)
    t = t_matrix(ball, order=4, residual=1e-3)
    both = pair(t, t, (60, 0, 0))
    for direction, polarization in LIGHTS[:2]:
        exact = two_spheres(40, 20, WAVELENGTH, gold(), HOST, direction, polarization)
        as_pair = both.cross_sections(direction, polarization)
        as_one = dimer_sections(20, 40, dda.plane_wave(direction, polarization))
        # 16 cells across: 2 % of an isolated sphere
        assert np.allclose(as_pair, exact.cross_sections(), rtol=0.03)
        assert np.allclose(as_one, exact.cross_sections(), rtol=0.03)
        assert np.allclose(as_one, as_pair, rtol=0.02)


def test_a_narrow_gap_as_one_system():
    """A gap of a tenth of the radius, one cell wide."""
    direction, polarization = LIGHTS[0]
    exact = two_spheres(40, 2, WAVELENGTH, gold(), HOST, direction, polarization)
    ours = dimer_sections(2, 50, dda.plane_wave(direction, polarization))
    # a gap of one cell; finer cells stand in the validation
    assert np.allclose(ours[:2], exact.cross_sections()[:2], rtol=0.08)


def test_what_cannot_be_paired():
    ball = exact_ball(40, 2)
    other = TMatrix(ball.matrix, 600.0, HOST, np.zeros(3), 20.0, 20.0)
    with pytest.raises(dda.InputError, match="must be the same"):
        pair(ball, other, (60, 0, 0))
    with pytest.raises(dda.InputError, match="not all zero"):
        pair(ball, ball, (0, 0, 0))
    with pytest.warns(RuntimeWarning, match="overlap"):
        pair(ball, ball, (30, 0, 0))
