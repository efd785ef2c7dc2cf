"""Rotations of vector waves: turned amplitudes give the turned field."""

import numpy as np
import pytest
from scipy.stats import ortho_group

from dda.response.vector_waves import fields_of, wave_count
from dda.response.wave_rotations import real_rotation_matrix, rotation_matrix, turn_to

ROUNDING = 1e-12
SPECIAL = [
    np.eye(3),
    np.diag([-1.0, 1, 1]),
    np.diag([1.0, -1, -1]),
    np.diag([-1.0, -1, -1]),
    np.array([[0.0, 1, 0], [0, 0, 1], [1, 0, 0]]),
    np.array([[0.0, 1, 0], [-1, 0, 0], [0, 0, -1]]),
]
MATRICES = SPECIAL + list(ortho_group.rvs(3, size=4, random_state=2))


@pytest.mark.parametrize("matrix", MATRICES)
def test_turned_amplitudes_give_the_turned_field(matrix):
    order, k = 5, 0.02
    rng = np.random.default_rng(0)
    points = 50 * rng.normal(size=(10, 3))
    a = rng.normal(size=wave_count(order))
    ours = fields_of((real_rotation_matrix(order, matrix) @ a)[None], points, k)[0]
    turned = fields_of(a[None], points @ matrix, k)[0] @ matrix.T  # R F(R^-1 r)
    assert abs(ours - turned).max() < ROUNDING * abs(turned).max()


def test_rotations_are_a_unitary_representation():
    a, b = MATRICES[-1], MATRICES[-2]
    one, two = rotation_matrix(8, a), rotation_matrix(8, b)
    assert abs(one @ one.conj().T - np.eye(len(one))).max() < ROUNDING
    assert abs(one @ two - rotation_matrix(8, a @ b)).max() < ROUNDING


def test_a_matrix_that_is_no_rotation_is_refused():
    with pytest.raises(ValueError, match="orthogonal"):
        rotation_matrix(2, np.ones((3, 3)))


@pytest.mark.parametrize("direction", [(0, 0, 1), (0, 0, -2), (1, -2, 3), (1, 0, 0)])
def test_turn_to_takes_z_to_the_direction(direction):
    turn = turn_to(np.array(direction))
    assert np.allclose(turn @ [0, 0, 1], np.array(direction) / np.linalg.norm(direction))
    assert np.isclose(np.linalg.det(turn), 1)
