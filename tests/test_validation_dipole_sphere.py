"""The dipole-sphere series against limits and conservation laws."""

import numpy as np
import pytest

from validation.dipole_sphere import dipole_near_sphere


@pytest.mark.parametrize(
    ("diameter", "height", "eps"), [(100, 5, 12.0), (300, 1, 6.25), (600, 50, 2.25)]
)
def test_without_loss_all_is_radiated(diameter, height, eps):
    for rates in dipole_near_sphere(diameter, height, 550, eps, 1.33):
        assert rates.radiative == pytest.approx(rates.total, rel=1e-10)


def test_small_sphere_is_a_polarizable_point():
    eps, n, r, radius = -5.9 + 2.1j, 1.33, 30.0, 1.0
    k = 2 * np.pi * n / 550
    relative = eps / n**2
    alpha = radius**3 * (relative - 1) / (relative + 2)
    radial, across = dipole_near_sphere(2 * radius, r - radius, 550, eps, n)
    # the dipole's field at the sphere, and that of the sphere's dipole back at the emitter
    wave, near = np.exp(1j * k * r) / r, (1 - 1j * k * r) / r**2
    for rates, g in ((radial, 2 * wave * near), (across, wave * (k**2 - near))):
        expected = 1 + 1.5 / k**3 * (alpha * g**2).imag
        # the next multipole is smaller by (radius/r)^2
        assert rates.total - 1 == pytest.approx(expected - 1, rel=5e-3)


def test_far_away_nothing_changes_and_absorption_is_positive():
    far = dipole_near_sphere(40, 1e4, 600, -9.4 + 1.4j, 1.33)
    assert [r.total for r in far] == pytest.approx([1, 1], abs=1e-4)
    for rates in dipole_near_sphere(40, 4, 550, -5.9 + 2.1j, 1.33):
        assert 0 < rates.quantum_yield < 1
