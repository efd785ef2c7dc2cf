"""Multipole decomposition: sums, a sphere's shares, and what does not depend on the way."""

from functools import cache

import numpy as np
import pytest

import dda
import shapes
from dda.beams import point_dipole
from dda.response.multipoles import averaged_multipoles, multipoles
from dda.response.tmatrix_solve import t_matrix
from validation.compare import permittivity
from validation.mie import sphere


@cache
def ball():
    system = dda.system(shapes.voxelize(shapes.sphere(100), cells=16), 560.0, 1.33)
    return dda.solve(system, dda.plane_wave((1, 2, 2), "left"), tolerance=1e-6)


def test_sums_are_the_cross_sections():
    parts, whole = multipoles(ball()), dda.cross_sections(ball())
    # both are exact for the given dipoles, up to multipoles left out
    assert np.isclose(parts.c_ext.sum(), whole.c_ext, rtol=1e-9)
    assert np.isclose(parts.c_sca.sum(), whole.c_sca_far, rtol=1e-9)


def test_shares_of_a_sphere_are_those_of_mie():
    solved = sphere(100, 560, permittivity("gold", 560), 1.33)
    parts = multipoles(ball(), order=2)
    n = np.arange(1, 3)
    a, b = solved.a[1:3], solved.b[1:3]
    factor = 2 * np.pi / solved.k**2 * (2 * n + 1)
    # 16 cells across: the weaker, the less exact
    assert np.allclose(parts.c_ext, factor * np.stack([a.real, b.real]), rtol=0.12)
    assert np.allclose(parts.c_sca, factor * np.stack([abs(a) ** 2, abs(b) ** 2]), rtol=0.25)
    assert abs(parts.c_ext[0, 0] / (factor[0] * a[0].real) - 1) < 0.02


def test_the_electric_dipole_does_not_depend_on_where_the_light_has_its_phase():
    cells = shapes.voxelize(shapes.ellipsoid((20, 30, 40)), cells=10)
    moved = shapes.voxelize(shapes.ellipsoid((20, 30, 40)).moved((100, 50, -70)), cells=10)
    light = dda.plane_wave((1, 2, 2), (2, -1, 0))
    one, two = (
        multipoles(dda.solve(dda.system(c, 560.0, 1.33), light, tolerance=1e-8), order=3)
        for c in (cells, moved)
    )
    assert np.allclose(one.c_ext, two.c_ext, rtol=1e-5, atol=1e-5 * one.c_ext.sum())
    assert np.allclose(two.centre - one.centre, (100, 50, -70))


def test_about_another_centre_only_the_sums_stay():
    usual, shifted = multipoles(ball()), multipoles(ball(), centre=(30, 0, 0), order=14)
    assert np.isclose(usual.c_sca.sum(), shifted.c_sca.sum(), rtol=1e-7)
    assert shifted.c_sca[1, 0] > 2 * usual.c_sca[1, 0]  # a moving dipole has a magnetic one


def test_other_light_than_a_plane_wave_is_refused():
    system = ball().system
    light = point_dipole((0, 0, 80), (0, 0, 1))
    solved = dda.solve(system, light, tolerance=1e-2)
    with pytest.raises(dda.InputError, match="plane wave"):
        multipoles(solved)


def test_averages_of_a_sphere_are_its_parts_in_any_light():
    system = ball().system
    c_ext, c_sca = averaged_multipoles(t_matrix(system, order=2, residual=1e-5))
    parts = multipoles(ball(), order=2)
    # a sphere on a lattice of 16 cells is one to about a per cent of the dipole
    assert np.allclose(c_ext, parts.c_ext, atol=0.01 * parts.c_ext[0, 0])
    assert np.allclose(c_sca, parts.c_sca, atol=0.01 * parts.c_sca[0, 0])
