"""Symmetries of cells and the parity sectors made from them."""

from functools import cache

import numpy as np
import pytest

import dda
import shapes
from dda.response.symmetry import find_sectors

PARTICLES = {
    # particle, symmetries of its cells, sign changes among them, whether mirrors make them all
    "cube": (lambda: shapes.cube(edge=40, rounding=6), 48, 8, True),
    "spheroid": (lambda: shapes.ellipsoid((24, 24, 40)), 16, 8, True),
    "ellipsoid": (lambda: shapes.ellipsoid((20, 28, 40)), 8, 8, True),
    "cone": (lambda: shapes.cone(diameter=40, height=40), 8, 4, True),
    "helix": (lambda: shapes.helix(diameter=40, pitch=30, turns=1.5, thickness=16), 2, 2, False),
    "star": (lambda: shapes.star(30, 7, 22, 8, 3, seed=2), 1, 1, False),
}


@cache
def system(name):
    cells = shapes.voxelize(PARTICLES[name][0](), cells=10)
    return dda.system(cells, 560.0, 1.33)


@pytest.mark.parametrize("name", PARTICLES)
def test_known_symmetries_are_found(name):
    sectors = find_sectors(system(name))
    _, group, flips, mirrored = PARTICLES[name]
    assert (len(sectors.group), sectors.count) == (group, flips)
    assert len(sectors.mirrored) == (flips if mirrored else 0)


@pytest.mark.parametrize("name", PARTICLES)
def test_the_symmetries_are_a_group(name):
    group = find_sectors(system(name)).group
    members = {g.tobytes() for g in group}
    assert np.array_equal(group[0], np.eye(3))
    assert {(a @ b).tobytes() for a in group for b in group} == members


@pytest.mark.parametrize("name", PARTICLES)
def test_fields_fall_apart_into_sectors_and_back(name):
    one = system(name)
    sectors = find_sectors(one)
    every = np.arange(sectors.count)
    whole = np.random.default_rng(0).normal(size=(one.n, 3)) + 0j
    parts = np.empty((sectors.count, len(sectors.cells), 3), complex)
    sectors.gather(whole, every, parts)
    assert abs(sectors.spread(parts, every, np.empty_like(whole)) - whole).max() < 1e-13
    # sectors are orthogonal, and their vectors have the norm of the field
    assert np.isclose((abs(parts) ** 2).sum(), (abs(whole) ** 2).sum())


@pytest.mark.parametrize("name", ["cube", "cone", "helix"])
def test_the_interaction_does_not_mix_sectors(name):
    one = system(name)
    sectors = find_sectors(one)
    every = np.arange(sectors.count)
    rng = np.random.default_rng(1)
    part = rng.normal(size=(1, len(sectors.cells), 3)) + 0j
    # cells on a mirror plane can hold only some components: take what is left of a field
    whole = sectors.spread(part, every[-1:], np.empty((one.n, 3), complex))
    part = sectors.gather(whole, every[-1:], np.empty_like(part))
    whole = sectors.spread(part, every[-1:], whole)
    product = one.matvec(whole)
    parts = np.empty((sectors.count, len(sectors.cells), 3), complex)
    sectors.gather(product, every, parts)
    assert abs(parts[:-1]).max() < 1e-12 * abs(parts[-1]).max()
    if sectors.mirrored:
        # the lattice's own operator of that sector is the same matrix
        theirs = sectors.mirrored[-1].matvec(part[0])
        assert abs(theirs - parts[-1]).max() < 1e-10 * abs(parts[-1]).max()


def test_symmetry_can_be_left_unused():
    sectors = find_sectors(system("cube"), use=False)
    assert len(sectors.group) == sectors.count == 1
    assert np.array_equal(sectors.cells, np.arange(system("cube").n))
