"""Absorbed power: cell by cell, at points, and its sum."""

import numpy as np
import pytest

import dda
import shapes
from dda.design.heat import CAUTION, absorbed_power, power_density
from dda.materials import find
from dda.response.near_field import fields_at
from validation.mie import sphere

INTENSITY = 2e9


@pytest.fixture(scope="module")
def solved():
    cells = shapes.voxelize(shapes.sphere(40, "gold"), cells=16)
    return dda.solve(dda.system(cells, 530, 1.33), dda.plane_wave())


def test_cells_add_up_to_c_abs(solved):
    heat = absorbed_power(solved, INTENSITY)
    section = dda.cross_sections(solved).c_abs_cells
    assert heat.cross_section.sum() == pytest.approx(section, rel=1e-12)
    assert heat.total == pytest.approx(INTENSITY * section * 1e-18, rel=1e-12)
    # the same from the densities: W/m^3 times nm^3
    assert heat.density @ heat.volume * 1e-27 == pytest.approx(heat.total, rel=1e-12)
    # window fractions hold the sphere's volume
    assert heat.volume.sum() == pytest.approx(4 / 3 * np.pi * 20**3, rel=0.01)


def test_density_at_points_is_that_of_mie(solved):
    eps = complex(find("gold").permittivity(np.array([530.0]))[0])
    points = np.array([[0, 0, 0], [10.0, 0, 0], [0, 12, 0], [0, 0, -14], [0, 0, 25]])
    field = fields_at(solved, points, particle=shapes.sphere(40, "gold"))
    found = power_density(field, solved, INTENSITY)
    e2 = (np.abs(sphere(40, 530, eps, 1.33).fields(points)[0]) ** 2).sum(axis=1)
    # W/m^3: w eps0 Im(eps)/2 |E|^2 with I = n eps0 c |E0|^2/2
    expected = INTENSITY * 2 * np.pi / 530e-9 * eps.imag / 1.33 * e2
    assert found[:4] == pytest.approx(expected[:4], rel=0.06)
    assert found[4] == 0


def test_lossless_particles_stay_cold():
    cells = shapes.voxelize(shapes.sphere(60, "2.0"), cells=12)
    solved = dda.solve(dda.system(cells, 600, 1.33), dda.plane_wave(), tolerance=1e-6)
    total = dda.cross_sections(solved).c_ext
    assert abs(absorbed_power(solved, INTENSITY).cross_section.sum()) < 1e-6 * total


def test_caution_defers_to_the_laboratory():
    assert "laser-safety rules" in CAUTION
