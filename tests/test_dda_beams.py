"""Beams and dipoles obey Maxwell's equations and have the size they claim."""

import numpy as np
import pytest

from dda.beams import gaussian_beam, point_dipole
from dda.errors import InputError

K = 2 * np.pi * 1.33 / 600


def slopes(field, at, h=0.5):
    """d(field)_j/dx_i at a point, (3, 3), by central differences."""
    steps = h * np.eye(3)
    return np.array([(field(at + s, K) - field(at - s, K))[0] for s in steps]) / (2 * h)


@pytest.mark.parametrize(
    "light",
    [
        gaussian_beam((0, 0, 1), (1, 0, 0), waist=300, focus=(10, 20, 30)),
        gaussian_beam((1, 2, -1), "left", waist=250, focus=(0, 0, 0)),
        point_dipole((5, -3, 2), (1, 2j, 0.5)),
    ],
    ids=["beam", "circular beam", "dipole"],
)
def test_maxwell(light):
    at = np.array([[120.0, -80, 200]])
    slope = slopes(light.field, at)
    size = np.linalg.norm(light.field(at, K)) * K
    curl = np.array(
        [slope[1, 2] - slope[2, 1], slope[2, 0] - slope[0, 2], slope[0, 1] - slope[1, 0]]
    )
    # differences over 1 nm are good to (k h)^2/6 = 1e-5
    assert abs(np.trace(slope)) < 1e-4 * size
    assert np.allclose(curl, 1j * K * light.magnetic(at, K)[0], atol=1e-4 * size)


@pytest.mark.parametrize("waist", [1500, 4000])
def test_wide_beam_is_the_paraxial_one(waist):
    beam = gaussian_beam(waist=waist, focus=(0, 0, 50))
    rayleigh = K * waist**2 / 2
    points = np.array([[0, 0, 50.0], [waist, 0, 50], [0, waist, 50], [0, 0, 50 + rayleigh]])
    intensity = (np.abs(beam.field(points, K)) ** 2).sum(axis=1)
    # corrections are of the order (2/(k w))^2 = 1 % at 1500 nm
    assert np.allclose(intensity, [1, np.exp(-2), np.exp(-2), 0.5], atol=0.01)
    assert beam.effective_area(K) == pytest.approx(np.pi * waist**2 / 2, rel=0.01)


def test_effective_area_is_power_over_intensity():
    beam = gaussian_beam(waist=250)
    x = np.linspace(-1200, 1200, 121)
    plane = np.stack([*(a.ravel() for a in np.meshgrid(x, x)), np.zeros(121**2)], axis=1)
    flux = np.cross(beam.field(plane, K), beam.magnetic(plane, K).conj()).real[:, 2]
    # the plane holds all but 1e-4 of the power
    assert flux.sum() * (x[1] - x[0]) ** 2 == pytest.approx(beam.effective_area(K), rel=1e-3)


def test_field_at_the_focus_is_the_polarization():
    beam = gaussian_beam((0, 1, 0), (0, 0, 1), waist=400, focus=(1, 2, 3))
    at = np.array([[1.0, 2, 3]])
    assert np.allclose(beam.field(at, K), [0, 0, 1], atol=1e-12)
    assert np.allclose(beam.magnetic(at, K)[0, [1, 2]], 0, atol=1e-12)
    assert beam.field(np.zeros((0, 3)), K).shape == (0, 3)


@pytest.mark.parametrize(
    "light",
    [
        gaussian_beam((1, 2, -1), "left", waist=250),
        gaussian_beam(waist=300),
        point_dipole((5, -3, 2), (1, 2j, 0.5)),
        point_dipole((5, -3, 2), (0, 1j, 0)),
    ],
)
def test_linear_parts_add_up(light):
    points = np.array([[40.0, 10, -60], [0, 90, 20]])
    parts = light.linear_parts()
    total = sum(factor * part.field(points, K) for factor, part in parts)
    assert np.allclose(total, light.field(points, K), atol=1e-12)
    for _, part in parts:
        vector = getattr(part, "moment", getattr(part, "polarization", None))
        assert np.all(vector.imag == 0)


def test_far_field_of_a_dipole():
    dipole = point_dipole((0, 0, 0), (0, 0, 1))
    r = 1e6
    e = dipole.field(np.array([[r, 0, 0]]), K)[0]
    assert np.allclose(e, [0, 0, K**2 * np.exp(1j * K * r) / r], rtol=1e-3, atol=1e-14)


def test_mistakes_are_named():
    with pytest.raises(InputError, match="waist"):
        gaussian_beam(waist=0)
    with pytest.raises(InputError, match="tighter"):
        gaussian_beam(waist=100).field(np.zeros((1, 3)), K)
    with pytest.raises(InputError, match="focus"):
        gaussian_beam(waist=500, focus=(0, 0))
    with pytest.raises(InputError, match="moment"):
        point_dipole((0, 0, 0), (0, 0, 0))
    with pytest.raises(InputError, match="infinite"):
        point_dipole((1, 2, 3)).field(np.array([[1.0, 2, 3]]), K)
