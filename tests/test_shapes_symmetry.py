"""Mirror planes and rotation axes, found from the shapes themselves."""

import math

import numpy as np
import pytest

import shapes
from shapes import Part, Particle
from shapes.primitives import Cuboid, Sphere

EXPECTED = {
    "sphere": ((True, True, True), (math.inf, math.inf, math.inf)),
    "cuboid": ((True, True, True), (2, 2, 2)),
    "cube": ((True, True, True), (4, 4, 4)),
    "rod": ((True, True, True), (math.inf, 2, 2)),
    "cone": ((True, True, False), (1, 1, math.inf)),
    "prism": ((True, False, True), (1, 2, 3)),
    "tetrahedron": ((True, False, False), (1, 1, 3)),
    "icosahedron": ((True, True, True), (2, 2, 2)),
    "helix": ((False, False, False), (2, 1, 1)),
    "ring": ((True, True, True), (2, 2, 6)),
    "bowtie": ((True, True, True), (2, 2, 2)),
    "aggregate": ((False, False, False), (1, 1, 1)),
}


@pytest.mark.parametrize("name", EXPECTED)
def test_symmetry_of_the_catalogue(name: str) -> None:
    particle = shapes.catalogue.example(name)
    assert (particle.mirrors(), particle.rotations()) == EXPECTED[name]


def test_planes_follow_the_particle() -> None:
    rod = shapes.rod(60, 20).moved((7, -3, 11))
    assert rod.mirrors() == (True, True, True)
    assert rod.rotations() == (math.inf, 2, 2)
    assert rod.rotated(30).mirrors() == (False, False, True)
    assert rod.rotated(90).mirrors() == (True, True, True)


def test_materials_count() -> None:
    left, right = Sphere(20.0).moved((-15, 0, 0)), Sphere(20.0).moved((15, 0, 0))
    same = Particle((Part(left, "gold"), Part(right, "gold")))
    other = Particle((Part(left, "gold"), Part(right, "silver")))
    assert same.mirrors() == (True, True, True)
    assert other.mirrors() == (False, True, True)


def test_a_small_detail_is_not_overlooked() -> None:
    big = Cuboid((100.0, 100.0, 100.0), 5.0)
    dot = Sphere(1.5).moved((50, 10, 10))
    assert Particle((Part(big, "gold"), Part(dot, None))).mirrors() == (False, False, False)
    assert (big | dot).mirrors() == (False, False, False)


def test_order_of_the_parts_counts() -> None:
    # the later one covers the earlier one where they overlap, so this pair has no plane across x
    left, right = Sphere(20.0).moved((-5, 0, 0)), Sphere(20.0).moved((5, 0, 0))
    pair = Particle((Part(left, "gold"), Part(right, "silver")))
    assert pair.mirrors() == (False, True, True)
    assert np.isclose(pair.extent[0], 30)
