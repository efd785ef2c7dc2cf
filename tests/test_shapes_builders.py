"""Sizes, orientation and volume of the single bodies."""

import numpy as np
import pytest

import shapes
from shapes import Particle, ShapeError


@pytest.mark.parametrize(
    ("particle", "extent"),
    [
        (shapes.rod(60, 20), (60, 20, 20)),
        (shapes.rod(60, 20, axis="y"), (20, 60, 20)),
        (shapes.rod(60, 20, axis="z"), (20, 20, 60)),
        (shapes.cylinder(20, 50), (20, 20, 50)),
        (shapes.cylinder(20, 50, axis="x"), (50, 20, 20)),
        (shapes.disk(50, 10, rounding=5), (50, 50, 10)),
        (shapes.torus(60, 14), (60, 60, 14)),
        (shapes.cone(40, 50), (40, 40, 50)),
        (shapes.prism(6, 30, 12), (30 * np.sqrt(3), 60, 12)),
        (shapes.bipyramid(80, 40, sides=4, truncation=0.2), (80, 40, 40)),
        (shapes.octahedron(50), (50 * np.sqrt(2),) * 3),
        (shapes.ellipsoid((30, 40, 50)), (30, 40, 50)),
        (shapes.helix(60, 30, 3, 10), (60, 60, None)),
        (shapes.frame(50, 8), (50, 50, 50)),
    ],
    ids=lambda v: v.name if isinstance(v, Particle) else "",
)
def test_sizes_are_full_lengths(particle: Particle, extent: tuple) -> None:
    for got, wanted in zip(particle.extent, extent, strict=True):
        if wanted is not None:
            assert got == pytest.approx(wanted)


def test_a_cone_points_up_its_axis() -> None:
    cone = shapes.cone(40, 50, rounding=2, axis="x").parts[0].body
    low, high = cone.bounds
    near_tip = np.array([[high[0] - 4, 3.5, 0.0]])
    near_base = np.array([[low[0] + 4, 3.5, 0.0]])
    assert cone.signed_distance(near_base)[0] > 0 > cone.signed_distance(near_tip)[0]


@pytest.mark.parametrize("sides", [3, 4, 5, 6, 8])
def test_prism_and_bipyramid_volumes(sides: int) -> None:
    polygon = sides * 30**2 / (4 * np.tan(np.pi / sides))
    assert shapes.prism(sides, 30, 12).volume() == pytest.approx(polygon * 12)
    width = 30 / np.sin(np.pi / sides)
    whole = shapes.bipyramid(60, width, sides=sides)
    assert whole.volume() == pytest.approx(polygon * 60 / 3)
    # each half loses the cube of the part that is cut off, and is stretched to the same length
    cut = shapes.bipyramid(60, width, sides=sides, truncation=0.25)
    assert cut.volume() == pytest.approx(polygon * 60 / 3 * (1 - 0.25**3) / 0.75)


def test_tetrahedron_stands_on_a_face_about_its_centre() -> None:
    solid = shapes.tetrahedron(40)
    height = 40 * np.sqrt(2 / 3)
    low, high = solid.bounds
    assert (low[2], high[2]) == (pytest.approx(-height / 4), pytest.approx(3 * height / 4))
    assert solid.volume() == pytest.approx(40**3 / (6 * np.sqrt(2)))
    assert solid.area() == pytest.approx(np.sqrt(3) * 40**2)


def test_rounding_takes_off_corners_and_leaves_faces() -> None:
    sharp, soft = shapes.octahedron(60), shapes.octahedron(60, rounding=6)
    assert soft.volume() < sharp.volume()
    assert np.all(soft.extent < sharp.extent)
    assert soft.thinnest == pytest.approx(sharp.thinnest)  # the faces are where they were
    with pytest.raises(ShapeError, match="inscribed sphere"):
        shapes.octahedron(60, rounding=30)


def test_frame_is_hollow() -> None:
    frame = shapes.frame(40, 8)
    assert frame.volume() == 12 * 64 * 24 + 8 * 512
    assert frame.exact == {"volume", "area", "bounds"}
    body = frame.parts[0].body
    centre_and_face = np.array([[0.0, 0, 0], [0, 0, 18]])
    assert np.all(body.signed_distance(centre_and_face) < 0)
    assert body.signed_distance(np.array([[16.0, 16, 0]]))[0] == pytest.approx(4)
    from shapes.measure import measured_area, measured_volume

    assert measured_volume(body, 80) == pytest.approx(frame.volume(), rel=1e-3)
    assert measured_area(body, 80) == pytest.approx(frame.area(), rel=1e-2)


def test_hands_of_a_helix_are_mirror_images() -> None:
    right = shapes.helix(50, 30, 2, 10).parts[0].body
    left = shapes.helix(50, 30, 2, 10, hand="left").parts[0].body
    points = np.random.default_rng(0).uniform(-40, 40, (300, 3))
    assert np.allclose(
        right.signed_distance(points), left.signed_distance(points * [1, -1, 1]), atol=1e-6
    )
    # right-handed: it turns counter-clockwise seen from above as it rises
    quarter = np.array([[0.0, 20.0, 7.5]])
    assert right.signed_distance(quarter)[0] == pytest.approx(5, abs=1e-6)
    with pytest.raises(ShapeError, match="turns of pitch"):
        shapes.helix(50, 8, 3, 10)
