"""Coated, hollow, paired, chained and ringed particles."""

import numpy as np
import pytest

import shapes
from shapes import Particle, ShapeError


def nearest(first: Particle, second_points: np.ndarray) -> float:
    """Least distance from the first body to points."""
    body = first.parts[0].body
    return float(-body.signed_distance(second_points).max())  # type: ignore[attr-defined]


def surface(particle: Particle) -> np.ndarray:
    """Points on the surface of a particle's first body, by walking along the distance."""
    body = particle.parts[0].body
    low, high = body.bounds
    points = np.random.default_rng(0).uniform(low, high, (60_000, 3))
    for _ in range(6):
        distance = body.signed_distance(points)  # type: ignore[attr-defined]
        slope = np.stack(
            [
                body.signed_distance(points + e) - body.signed_distance(points - e)  # type: ignore[attr-defined]
                for e in np.eye(3) * 1e-4
            ],
            axis=1,
        )
        length = np.linalg.norm(slope, axis=1, keepdims=True)
        points = points - distance[:, None] * slope / np.maximum(length, 1e-9)
    on = np.abs(body.signed_distance(points)) < 1e-3  # type: ignore[attr-defined]
    return points[on]


def member(particle: Particle, k: int) -> Particle:
    return Particle((particle.parts[k],))


@pytest.mark.parametrize(
    "of",
    [
        shapes.sphere(20),
        shapes.cube(20, 3),
        shapes.cone(20, 30, rounding=2, axis="x"),
        shapes.prism(3, 30, 8, tip=3, rounding=1),
    ],
    ids=lambda p: p.name,
)
@pytest.mark.parametrize("axis", ["x", "y"])
def test_the_gap_of_a_dimer_is_the_gap(of: Particle, axis: str) -> None:
    pair = shapes.dimer(of, gap=2.5, axis=axis)
    assert pair.gap == 2.5
    assert pair.mirrors()["xyz".index(axis)]
    # found among random surface points, which lie up to half a nm apart
    assert nearest(member(pair, 0), surface(member(pair, 1))) == pytest.approx(2.5, abs=0.1)
    assert pair.volume() == pytest.approx(2 * of.volume())


@pytest.mark.parametrize("of", [shapes.sphere(20), shapes.cube(20, 3), shapes.rod(30, 12)])
@pytest.mark.parametrize("number", [3, 4, 7])
def test_the_gap_of_a_ring_is_the_gap(of: Particle, number: int) -> None:
    ring = shapes.ring(of, number, gap=2.0)
    assert len(ring.parts) == number
    assert nearest(member(ring, 0), surface(member(ring, 1))) == pytest.approx(2.0, abs=0.1)
    assert ring.rotations()[2] in (number, 2 * number)


def test_chain_of_coated_spheres() -> None:
    one = shapes.core_shell(shapes.sphere(20, material="silica"), 5)
    chain = shapes.chain(one, 3, gap=4)
    assert np.allclose(chain.extent, [3 * 30 + 2 * 4, 30, 30])
    assert chain.materials == ("gold", "silica")
    assert chain.volume() == pytest.approx(3 * one.volume())
    assert chain.thinnest == 5
    assert chain.exact == {"volume", "area", "bounds"}


def test_overlapping_pair_counts_the_lens_once() -> None:
    pair = shapes.dimer(shapes.sphere(40), gap=-15)
    lens = np.pi * (80 + 25) * 15**2 / 12
    assert pair.gap is None
    assert pair.volume() == pytest.approx(2 * 4 / 3 * np.pi * 20**3 - lens, rel=1e-3)
    with pytest.raises(ShapeError, match="coincide"):
        shapes.dimer(shapes.sphere(40), gap=-40)


def test_bowtie_tips_face_each_other() -> None:
    bowtie = shapes.bowtie(60, 15, gap=4, tip=3, rounding=1)
    assert bowtie.mirrors() == (True, True, True)
    left = bowtie.parts[0].body
    high = left.bounds[1]
    assert high[0] == pytest.approx(-2)
    tip = np.array([[high[0] - 0.5, 0.0, 0.0]])
    assert left.signed_distance(tip)[0] > 0  # type: ignore[attr-defined]


@pytest.mark.parametrize(
    "core", [shapes.cube(40, 5), shapes.ellipsoid((50, 30, 20)), shapes.octahedron(40, 3)]
)
def test_shells_have_the_volume_of_steiners_formula(core: Particle) -> None:
    coated = shapes.core_shell(core, thickness=6, material="silver")
    assert np.allclose(coated.extent, core.extent + 12)
    cells = shapes.voxelize(coated, cells=28)
    held = cells.fraction.sum(axis=0) * cells.spacing**3
    assert held[1] == pytest.approx(core.volume(), rel=1e-3)
    assert held.sum() == pytest.approx(coated.volume(), rel=1e-3)
    assert "volume" in coated.exact


def test_layers_alternate_so_that_the_outermost_is_the_given_one() -> None:
    core = shapes.sphere(20, material="silica")
    onion = shapes.multilayer(core, [4, 3, 2], material="gold")
    assert [part.material for part in onion.parts] == ["gold", "silica", "gold", "silica"]
    assert np.allclose(onion.extent, 20 + 2 * 9)
    named = shapes.multilayer(core, [4, 3], materials=["gold", "silver"])
    assert [part.material for part in named.parts] == ["silver", "gold", "silica"]
    assert named.thinnest == 3


def test_hollow_cube() -> None:
    shell = shapes.hollow(shapes.cube(40, 4), thickness=5)
    # the wall is everywhere as thick, so the hole is a box with corners sharper than the outside
    assert shell.volume() == pytest.approx(shapes.cube(40, 4).volume() - 30**3, rel=2e-3)
    with pytest.raises(ShapeError, match="half of the solid's thinnest part, 20"):
        shapes.hollow(shapes.cube(40, 4), thickness=25)


def test_only_solids_can_be_coated() -> None:
    image = shapes.from_image(np.ones((4, 4, 4), dtype=np.uint8), voxel=2.0, materials={1: "gold"})
    with pytest.raises(ShapeError, match="cannot be coated"):
        shapes.core_shell(image, 3)
