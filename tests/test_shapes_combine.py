"""Combinations: set identities, volumes, boxes; properties over random solids."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from shapes import SampleGrid, ShapeError
from shapes.combine import Union
from shapes.measure import measured_volume
from shapes.primitives import Capsule, Cuboid, Ellipsoid, Sphere
from shapes.solid import Solid

SIZES = st.floats(8.0, 40.0)
PLACES = st.tuples(*[st.floats(-12.0, 12.0)] * 3)
GRID = SampleGrid((-40.0, -40.0, -40.0), 2.0, (41, 41, 41))
POINTS = np.random.default_rng(0).uniform(-45, 45, (600, 3))


@st.composite
def solids(draw: st.DrawFn) -> Solid:
    kind = draw(st.sampled_from(["sphere", "ellipsoid", "cuboid", "capsule"]))
    a, b, c = draw(SIZES), draw(SIZES), draw(SIZES)
    solid: Solid
    if kind == "sphere":
        solid = Sphere(a)
    elif kind == "ellipsoid":
        solid = Ellipsoid((a, b, c))
    elif kind == "cuboid":
        solid = Cuboid((a, b, c), draw(st.floats(0.0, 0.5)) * min(a, b, c))
    else:
        solid = Capsule(max(a, b), min(a, b))
    turned = solid.rotated(draw(st.floats(0, 360)), (1, draw(st.floats(-1, 1)), 0.5))
    return turned.moved(draw(PLACES))


def held(solid: Solid) -> float:
    return float(solid.fill(GRID).sum(dtype=float)) * GRID.step**3


@given(solids(), solids())
@settings(max_examples=40, deadline=None)
def test_volumes_add_as_sets_do(a: Solid, b: Solid) -> None:
    # fills are minima and maxima of each other, so the sums hold to float32 rounding
    together, shared = held(a | b), held(a & b)
    assert together + shared == pytest.approx(held(a) + held(b), rel=1e-5)
    assert held(a - b) <= held(a) + 1e-3
    # a = (a - b) + (a & b) but for voxels cut by both surfaces, at most a layer along the seam
    seam = 2 * GRID.step**3 * np.count_nonzero((a.fill(GRID) % 1 > 0) & (b.fill(GRID) % 1 > 0))
    assert abs(held(a - b) + shared - held(a)) <= 0.3 * seam + 1e-2


@given(solids(), solids())
@settings(max_examples=40, deadline=None)
def test_commuting_and_de_morgan(a: Solid, b: Solid) -> None:
    for first, second in ((a | b, b | a), (a & b, b & a)):
        assert np.array_equal(first.signed_distance(POINTS), second.signed_distance(POINTS))
        assert np.array_equal(first.fill(GRID), second.fill(GRID))
    outside = -(a | b).signed_distance(POINTS)
    both = np.minimum(-a.signed_distance(POINTS), -b.signed_distance(POINTS))
    assert np.array_equal(outside, both)


@given(solids(), solids(), st.floats(1.0, 10.0))
@settings(max_examples=40, deadline=None)
def test_combined_distances_stay_safe(a: Solid, b: Solid, radius: float) -> None:
    step = np.random.default_rng(1).normal(size=POINTS.shape)
    far = np.linalg.norm(step, axis=1) + 1e-6
    for solid in (a | b, a & b, a - b, a.blend(b, radius=radius), a.grown(2), a.shell(3)):
        change = solid.signed_distance(POINTS + step) - solid.signed_distance(POINTS)
        assert np.all(np.abs(change) <= far)


@given(solids(), solids(), st.floats(1.0, 10.0))
@settings(max_examples=40, deadline=None)
def test_a_blend_adds_only_near_the_seam(a: Solid, b: Solid, radius: float) -> None:
    plain, soft = (a | b), a.blend(b, radius=radius)
    gain = soft.signed_distance(POINTS) - plain.signed_distance(POINTS)
    apart = np.abs(a.signed_distance(POINTS) - b.signed_distance(POINTS)) >= radius
    assert np.all(gain >= 0)
    assert np.all(gain <= radius / 4 + 1e-9)
    assert np.all(gain[apart] == 0)


@given(solids(), solids())
@settings(max_examples=8, deadline=None)
def test_boxes_hold_what_they_bound(a: Solid, b: Solid) -> None:
    for solid in (a | b, a - b, a.blend(b, radius=4.0)):
        inside = POINTS[solid.signed_distance(POINTS) > 0.05]
        if len(inside) == 0:
            continue
        low, high = solid.bounds
        # a corner sharper than the search may stick out by 0.4 %
        assert np.all(inside >= low - 0.2)
        assert np.all(inside <= high + 0.2)


def test_box_of_a_cut_is_tight() -> None:
    box = Cuboid((40.0, 40.0, 40.0))
    half = box - Cuboid((40.0, 60.0, 60.0)).moved((15, 0, 0))
    low, high = half.bounds
    assert np.allclose(low, [-20, -20, -20], atol=0.05)
    assert np.allclose(high, [-5, 20, 20], atol=0.05)
    assert half.rotated(90).bounds[1][1] == pytest.approx(-5, abs=0.05)


def test_lens_volume() -> None:
    # two balls of radius r whose centres are d apart share pi (4r + d)(2r - d)^2/12
    lens = Sphere(40.0) & Sphere(40.0).moved((25, 0, 0))
    exact = np.pi * (80 + 25) * (40 - 25) ** 2 / 12
    assert measured_volume(lens, 96) == pytest.approx(exact, rel=3e-3)
    both = Sphere(40.0) | Sphere(40.0).moved((25, 0, 0))
    assert both.volume() == pytest.approx(2 * Sphere(40.0).volume() - exact, rel=1e-3)


def test_touching_solids_share_a_voxel_without_losing_volume() -> None:
    pair = Union((Sphere(20.0), Sphere(20.0).moved((20, 0, 0))), disjoint=True)
    grid = SampleGrid((-12.0, -12.0, -12.0), 1.5, (32, 17, 17))
    assert pair.fill(grid).sum(dtype=float) * 1.5**3 == pytest.approx(pair.volume(), rel=5e-4)
    assert pair.exact == {"volume", "area", "bounds"}


def test_nothing_left_is_refused() -> None:
    with pytest.raises(ShapeError, match="empty"):
        _ = (Sphere(10.0) & Sphere(10.0).moved((30, 0, 0))).bounds
    with pytest.raises(ShapeError, match="empty"):
        _ = (Sphere(10.0) - Sphere(20.0)).bounds
