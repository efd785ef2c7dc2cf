"""Closed forms of the round and box-like primitives, and their distances."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from shapes.measure import measured_area, measured_volume
from shapes.primitives import Capsule, Cuboid, Ellipsoid, Sphere, Torus
from shapes.primitives_flat import Plate, Polyhedron, regular_polygon
from shapes.primitives_revolved import Frustum
from shapes.primitives_swept import Helix, Spike
from shapes.solid import Solid

OCTAHEDRON = np.concatenate([np.eye(3), -np.eye(3)]) * 30
ALL: dict[str, Solid] = {
    "sphere": Sphere(60.0),
    "ellipsoid": Ellipsoid((80.0, 50.0, 30.0)),
    "prolate": Ellipsoid((80.0, 30.0, 30.0)),
    "oblate": Ellipsoid((80.0, 80.0, 20.0)),
    "cuboid": Cuboid((60.0, 40.0, 30.0), 6.0),
    "capsule": Capsule(80.0, 30.0),
    "torus": Torus(100.0, 30.0),
    "cylinder": Frustum(40.0, 40.0, 60.0, 6.0),
    "cone": Frustum(60.0, 0.0, 70.0, 6.0),
    "frustum": Frustum(20.0, 60.0, 50.0, 5.0),
    "octahedron": Polyhedron(OCTAHEDRON, 5.0),
    "plate": Plate(regular_polygon(3, 80.0), 24.0, 10.0, 5.0),
    "spike": Spike(40.0, 12.0, 4.0),
    "helix": Helix(60.0, 50.0, 1.5, 20.0),
}
NAMED = pytest.mark.parametrize("solid", ALL.values(), ids=ALL.keys())


@NAMED
def test_volume_and_area_match_what_is_measured(solid: Solid) -> None:
    # 80 samples across: volumes are of third order; areas differ by the curved layer's own terms
    assert solid.exact == {"volume", "area", "bounds"}
    assert measured_volume(solid, 80) == pytest.approx(solid.volume(), rel=1e-4)
    assert measured_area(solid, 80) == pytest.approx(solid.area(), rel=1e-3)


@NAMED
def test_distance_is_safe_and_true_near_the_surface(solid: Solid) -> None:
    rng = np.random.default_rng(0)
    low, high = solid.bounds
    points = rng.uniform(low - 10, high + 10, (4000, 3))
    steps = rng.normal(size=points.shape) * rng.choice([0.1, 3.0], (4000, 1))
    here, there = solid.signed_distance(points), solid.signed_distance(points + steps)
    # 1-Lipschitz; the allowance is rounding (helix: its Newton search stops at 1e-4 nm)
    assert np.all(np.abs(there - here) <= np.linalg.norm(steps, axis=1) + 2e-4)
    near = points[np.abs(here) < 2.0]
    slopes = [
        (solid.signed_distance(near + e) - solid.signed_distance(near - e)) / 2e-4
        for e in np.eye(3) * 1e-4
    ]
    length = np.linalg.norm(slopes, axis=0)
    # a true distance has slope 1, but at a few points where the difference straddles an edge
    assert np.mean(np.abs(length - 1) < 1e-3) > 0.99


@NAMED
def test_bounds_are_tight_however_it_is_turned(solid: Solid) -> None:
    turned = solid.rotated(40, (1, 2, 3)).moved((3, -5, 7))
    low, high = turned.bounds
    rng = np.random.default_rng(1)
    points = rng.uniform(low - 5, high + 5, (200_000, 3))
    inside = points[turned.signed_distance(points) > 0]
    assert np.all(inside.min(axis=0) >= low)
    assert np.all(inside.max(axis=0) <= high)
    # random points come within a nm or two of the extremes
    assert np.all(inside.min(axis=0) < low + 3)
    assert np.all(inside.max(axis=0) > high - 3)


@pytest.mark.parametrize("name", [n for n, s in ALL.items() if s.steiner() is not None])
def test_grown_solid_has_the_volume_of_steiners_formula(name: str) -> None:
    solid = ALL[name].grown(7.0)
    assert measured_volume(solid, 80) == pytest.approx(solid.volume(), rel=2e-4)


def test_textbook_volumes_and_areas() -> None:
    assert Ellipsoid((20.0, 20.0, 20.0)).area() == pytest.approx(Sphere(20.0).area())
    e = np.sqrt(1 - (1 / 2) ** 2)  # prolate 2 : 1
    prolate = 2 * np.pi * 10**2 * (1 + 2 / e * np.arcsin(e))
    assert Ellipsoid((20.0, 40.0, 20.0)).area() == pytest.approx(prolate)
    oblate = 2 * np.pi * 20**2 * (1 + (1 - e**2) / e * np.arctanh(e))
    assert Ellipsoid((40.0, 20.0, 40.0)).area() == pytest.approx(oblate)
    golden_edge = 2 * 10.0
    signs = [(a, b) for a in (1, -1) for b in (1, -1)]
    corners = np.array([(0.0, a, b * (1 + np.sqrt(5)) / 2) for a, b in signs]) * 10
    twelve = np.concatenate([np.roll(corners, k, axis=1) for k in range(3)])
    icosahedron = Polyhedron(twelve)
    assert icosahedron.volume() == pytest.approx(5 * (3 + np.sqrt(5)) / 12 * golden_edge**3)
    assert icosahedron.area() == pytest.approx(5 * np.sqrt(3) * golden_edge**2)
    octahedron = Polyhedron(OCTAHEDRON)
    edge = 30 * np.sqrt(2)
    assert octahedron.volume() == pytest.approx(np.sqrt(2) / 3 * edge**3)
    assert octahedron.area() == pytest.approx(2 * np.sqrt(3) * edge**2)
    cone = Frustum(30.0, 0.0, 20.0)
    assert cone.volume() == pytest.approx(np.pi * 15**2 * 20 / 3)
    assert cone.area() == pytest.approx(np.pi * 15 * (15 + 25))
    assert Torus(100.0, 20.0).volume() == pytest.approx(2 * np.pi**2 * 40 * 100)


def test_fully_rounded_solids_become_simpler_ones() -> None:
    assert Cuboid((20.0, 20.0, 20.0), 10.0).steiner() == pytest.approx(Sphere(20.0).steiner())
    rod = Frustum(20.0, 20.0, 50.0, 10.0)
    assert rod.steiner() == pytest.approx(Capsule(50.0, 20.0).steiner())
    points = np.random.default_rng(2).uniform(-40, 40, (500, 3))
    expected = Capsule(50.0, 20.0).signed_distance(points)
    # inside, the rounded cylinder counts from its core line as well
    assert np.allclose(rod.signed_distance(points), expected, atol=1e-9)


def test_rounded_octahedron_and_cube_as_polyhedra_agree() -> None:
    corners = np.array([(x, y, z) for x in (1, -1) for y in (1, -1) for z in (1, -1)]) * 20.0
    hull, box = Polyhedron(corners, 5.0), Cuboid((40.0, 40.0, 40.0), 5.0)
    assert hull.steiner() == pytest.approx(box.steiner())
    points = np.random.default_rng(3).uniform(-40, 40, (2000, 3))
    assert np.allclose(hull.signed_distance(points), box.signed_distance(points), atol=1e-9)
    plate = Plate(corners[:4, :2][[0, 0, 0, 0]] * 0 + _square(40.0), 40.0, 0.0, 5.0)
    assert plate.steiner() == pytest.approx(box.steiner())
    assert np.allclose(plate.signed_distance(points), box.signed_distance(points), atol=1e-9)


def _square(side: float) -> np.ndarray:
    return np.array([(1, 1), (-1, 1), (-1, -1), (1, -1)]) * side / 2


@given(
    st.tuples(*[st.floats(1.0, 100.0)] * 3),
    st.tuples(*[st.floats(-150.0, 150.0)] * 3),
)
@settings(max_examples=200, deadline=None)
def test_ellipsoid_distance_leads_to_the_surface(
    axes: tuple[float, float, float], point: tuple[float, float, float]
) -> None:
    # from any point, the surface is met within the distance and not before: the ball of that
    # radius touches the ellipsoid. Checked with many surface points.
    ellipsoid, p = Ellipsoid(axes), np.array([point])
    distance = float(ellipsoid.signed_distance(p)[0])
    half = np.array(axes) / 2
    level = float(((p[0] / half) ** 2).sum())
    assert (distance >= 0) == (level <= 1) or abs(distance) < 1e-6
    k = np.arange(4000) + 0.5
    z, turn = 1 - 2 * k / 4000, k * np.pi * (3 - np.sqrt(5))
    ring = np.sqrt(1 - z**2)
    surface = np.stack([ring * np.cos(turn), ring * np.sin(turn), z], axis=1) * half
    nearest = np.linalg.norm(surface - p, axis=1).min()
    assert nearest >= abs(distance) - 1e-6 * max(axes)
    assert nearest <= abs(distance) + 0.06 * max(axes)  # the points lie 0.06 half axes apart
