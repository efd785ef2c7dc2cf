"""Measured volumes, areas and boxes, where the answer is known."""

import numpy as np
import pytest

from shapes import Part, Particle
from shapes.measure import measured_area, measured_volume, occupied
from shapes.primitives import Cuboid, Sphere
from shapes.star import Spikes


def test_volume_converges_with_the_samples() -> None:
    solid = Cuboid((30.0, 20.0, 10.0), 3.0).rotated(20, (1, 1, 1))
    coarse, fine = (abs(measured_volume(solid, n) / solid.volume() - 1) for n in (24, 96))
    assert coarse < 1e-2
    assert fine < 5e-5


def test_area_of_particles_with_removed_parts() -> None:
    # a ball with a hole that breaks nothing: inner and outer surface count
    hollow = Particle((Part(Sphere(40.0), "gold"), Part(Sphere(24.0), None)))
    assert measured_area(hollow, 96) == pytest.approx(np.pi * (1600 + 576), rel=1e-3)


class Opaque:
    """A body of which nothing but its fill is known, as an image has it."""

    def __init__(self, solid: Sphere) -> None:
        self._solid = solid
        self.bounds = solid.bounds
        self.fill = solid.fill


def test_area_of_a_body_without_distance() -> None:
    body = Opaque(Sphere(40.0))
    assert measured_area(body, 96) == pytest.approx(np.pi * 1600, rel=1e-2)  # type: ignore[arg-type]


def test_occupied_counts_what_later_parts_remove() -> None:
    particle = Particle((Part(Sphere(20.0), "gold"), Part(Cuboid((30.0, 30.0, 30.0)), None)))
    from shapes import SampleGrid

    assert occupied(particle, SampleGrid((-5.0, -5.0, -5.0), 1.0, (11, 11, 11))).max() == 0


def test_box_of_a_blend_grows_only_where_the_fillet_shows() -> None:
    # fillets lie in the corner between the two balls, so the box is theirs
    pair = Sphere(40.0).blend(Sphere(40.0).moved((30, 0, 0)), radius=8.0)
    low, high = pair.bounds
    assert np.allclose(low, [-20, -20, -20], atol=0.8)
    assert np.allclose(high, [50, 20, 20], atol=0.8)
    spikes = Spikes(20.0, np.eye(3), np.full(3, 12.0), 4.0, 1.0)
    joined = Sphere(20.0).blend(spikes, radius=3.0)
    assert np.allclose(joined.bounds[1], 22, atol=0.05)
