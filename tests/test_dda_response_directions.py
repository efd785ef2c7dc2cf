"""Rules for directions, and the average made with them."""

import itertools
from functools import cache

import numpy as np
import pytest

import dda
import shapes
from dda.response.averages import orientation_average
from dda.response.directions import (
    DESIGN_DEGREES,
    LEBEDEV_DEGREES,
    lebedev,
    quadrature_average,
    spherical_design,
)
from dda.response.tmatrix_solve import t_matrix
from dda.response.vector_waves import real_harmonics

BODIES = {
    "cube": lambda: shapes.cube(edge=50, rounding=8),
    "rod": lambda: shapes.rod(50, 20),
    "star": lambda: shapes.star(24, 5, 16, 9, 4, seed=2),
    "helix": lambda: shapes.helix(diameter=40, pitch=30, turns=1.5, thickness=18),
}


@cache
def system(name):
    return dda.system(shapes.voxelize(BODIES[name](), cells=8), 560.0, 1.33)


@pytest.mark.parametrize("degree", LEBEDEV_DEGREES[:6])
def test_lebedev_rules_integrate_harmonics(degree):
    directions, weights = lebedev(degree)
    assert np.allclose(np.linalg.norm(directions, axis=1), 1)
    means = weights @ real_harmonics(degree, directions)
    assert np.isclose(means[0], np.sqrt(1 / (4 * np.pi)))
    assert abs(means[1:]).max() < 1e-12


@pytest.mark.parametrize("degree", DESIGN_DEGREES[:4])
def test_designs_integrate_harmonics_with_equal_weights(degree):
    directions = spherical_design(degree)
    assert np.allclose(np.linalg.norm(directions, axis=1), 1)
    assert abs(real_harmonics(degree, directions).mean(axis=0)[1:]).max() < 1e-12


def test_first_rules_are_nested():
    rules = [lebedev(d)[0] for d in LEBEDEV_DEGREES[:4]]
    assert [len(r) for r in rules] == [6, 14, 26, 50]
    for few, many in itertools.pairwise(rules):
        distance = np.linalg.norm(few[:, None] - many[None], axis=2).min(axis=1)
        assert distance.max() < 1e-12


@pytest.mark.parametrize("name", BODIES)
def test_both_ways_agree_within_their_errors(name):
    one = quadrature_average(system(name))
    two = orientation_average(t_matrix(system(name)))
    for quantity in ("c_ext", "c_abs", "c_sca"):
        error = getattr(one, quantity + "_error") + getattr(two, quantity + "_error")
        assert abs(getattr(one, quantity) - getattr(two, quantity)) <= error
    assert one.c_ext_error < 3e-3 * one.c_ext
    assert abs(one.asymmetry - two.asymmetry) < 1e-3
    # dichroism is a difference of two extinctions
    assert abs(one.cd_ext - two.cd_ext) <= 2 * (one.c_ext_error + two.c_ext_error)
    assert abs(one.cd_abs - two.cd_abs) <= 2 * (one.c_abs_error + two.c_abs_error)


def test_designs_do_as_well():
    one, two = (quadrature_average(system("rod"), rule=rule) for rule in ("lebedev", "design"))
    assert abs(one.c_ext - two.c_ext) <= one.c_ext_error + two.c_ext_error


def test_symmetry_saves_directions_only():
    full = quadrature_average(system("cube"), degree=7, symmetry=False)
    few = quadrature_average(system("cube"), degree=7)
    assert np.isclose(full.c_ext, few.c_ext, rtol=1e-4)
    # 3 of 26 directions differ on a cube
    assert few.products < 0.2 * full.products
    assert (full.order, few.order) == (26, 26)


def test_the_left_and_right_of_a_mirror_image_are_exchanged():
    """The cone's mirrors are used: its directions' dichroism cancels in pairs."""
    cone = dda.system(shapes.voxelize(shapes.cone(diameter=40, height=40), cells=8), 560.0, 1.33)
    ours = quadrature_average(cone, degree=7)
    assert abs(ours.cd_ext) < 1e-9 * ours.c_ext


def test_unknown_rules_are_refused():
    with pytest.raises(dda.InputError, match='"lebedev" or "design"'):
        quadrature_average(system("rod"), rule="random")
    with pytest.raises(dda.InputError, match="up to degree 15"):
        spherical_design(99)
