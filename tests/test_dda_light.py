"""Incident waves."""

import numpy as np
import pytest

import dda
from dda.errors import InputError
from dda.light import transverse

DIRECTIONS = [(0, 0, 1), (0, 1, 0), (-1, 0, 0), (1, 2, -3), (0, 0, -2), (1e-3, 1, 0)]


def test_vectors_are_normalized():
    wave = dda.plane_wave((0, 0, 5), (3, 4j, 0))
    assert wave.direction == pytest.approx([0, 0, 1])
    assert wave.polarization == pytest.approx([0.6, 0.8j, 0])


@pytest.mark.parametrize("direction", DIRECTIONS)
@pytest.mark.parametrize("hand", ["left", "right"])
def test_circular_light_is_transverse_and_of_unit_amplitude(direction, hand):
    wave = dda.plane_wave(direction, hand)
    assert abs(wave.polarization @ wave.direction) < 1e-15
    assert np.linalg.norm(wave.polarization) == pytest.approx(1)
    assert abs(wave.polarization @ wave.polarization) < 1e-15  # equal parts a quarter turn apart


@pytest.mark.parametrize("direction", DIRECTIONS)
def test_left_turns_counter_clockwise_towards_the_observer(direction):
    """The real field E cos(..) at a place turns about the direction by the right-hand rule for
    "left": counter-clockwise for one who looks towards the source (Hecht's convention), with the
    time dependence exp(-iwt)."""
    for hand, sign in (("left", 1), ("right", -1)):
        wave = dda.plane_wave(direction, hand)
        now, later = ((wave.polarization * np.exp(-1j * t)).real for t in (0.0, 0.1))
        assert np.cross(now, later) @ wave.direction * sign > 0


def test_field_advances_in_phase_along_the_direction():
    k = 2 * np.pi / 400
    wave = dda.plane_wave((1, 1, 0), (0, 0, 1))
    a_quarter = 100 * np.array([1, 1, 0]) / np.sqrt(2)
    field = wave.field(np.array([[0, 0, 0], a_quarter, [70, -70, 13]]), k)
    assert field == pytest.approx(np.array([[0, 0, 1], [0, 0, 1j], [0, 0, 1]]), abs=1e-14)


@pytest.mark.parametrize("direction", DIRECTIONS)
def test_transverse_vectors_form_a_right_handed_triad(direction):
    e1, e2 = transverse(direction)
    a = np.array(direction) / np.linalg.norm(direction)
    assert np.linalg.det([e1, e2, a]) == pytest.approx(1)
    assert np.array([e1, e2, a]) @ np.array([e1, e2, a]).T == pytest.approx(np.eye(3), abs=1e-15)


def test_factor_of_the_lattice_dispersion_relation():
    """S = sum (a_j e_j)^2: 0 along an axis, 1/2 for (1, 1, 0) with E in the plane."""
    assert dda.plane_wave((0, 0, 1), (1, 0, 0)).s_factor == 0
    assert dda.plane_wave((1, 1, 0), (1, -1, 0)).s_factor == pytest.approx(0.5)


@pytest.mark.parametrize(
    ("direction", "polarization", "message"),
    [
        ((0, 0, 0), (1, 0, 0), "direction"),
        ((0, 0, 1), (0, 0, 0), "polarization"),
        ((0, 0, np.nan), (1, 0, 0), "direction"),
        ((0, 0, 1), (np.inf, 0, 0), "polarization"),
        ((0, 0, 1), (1, 0, 0.1), "not perpendicular"),
        ((0, 0, 1), "upwards", '"left" or "right"'),
        ((0, 1), (1, 0, 0), "direction must be three"),
    ],
)
def test_mistakes_are_named(direction, polarization, message):
    with pytest.raises(InputError, match=message):
        dda.plane_wave(direction, polarization)
