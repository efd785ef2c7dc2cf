"""From particles to cells: fractions, normals, symmetry, materials."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import shapes
from shapes import Part, Particle, ShapeError
from shapes.primitives import Cuboid, Sphere
from shapes.window import plane_fraction


def lens_fraction(distance: np.ndarray, radius: float, ball: float) -> np.ndarray:
    """Share of a ball that lies in a sphere whose centre is `distance` away."""
    d = np.maximum(distance, 1e-9)
    lens = (
        np.pi
        * (radius + ball - d) ** 2
        * (d**2 + 2 * d * ball - 3 * ball**2 + 2 * d * radius + 6 * ball * radius - 3 * radius**2)
        / (12 * d)
    )
    whole = 4 / 3 * np.pi * ball**3
    return np.where(d >= radius + ball, 0.0, np.where(d <= radius - ball, 1.0, lens / whole))


@pytest.mark.parametrize("number", [10, 17, 32])
def test_window_of_a_sphere_is_the_lens(number: int) -> None:
    cells = shapes.voxelize(shapes.sphere(40), cells=number)
    distance = np.linalg.norm(cells.positions, axis=1)
    exact = lens_fraction(distance, 20.0, 1.1 * cells.spacing)
    error = cells.window[:, 0] - exact
    # the window's weights are good to 0.005 for planes, better where the surface turns
    assert np.abs(error).max() < 4e-3
    assert np.sqrt((error**2).mean()) < 1e-3
    assert cells.fraction.sum() * cells.spacing**3 == pytest.approx(cells.volume, rel=1e-5)


def test_normals_of_a_sphere_are_radial() -> None:
    cells = shapes.voxelize(shapes.sphere(40), cells=24)
    radial = cells.positions / np.linalg.norm(cells.positions, axis=1, keepdims=True)
    surface = (cells.window[:, 0] > 0.03) & (cells.window[:, 0] < 0.97)
    cosine = np.einsum("ni,ni->n", cells.normal, radial)[surface]
    assert np.degrees(np.arccos(np.clip(cosine, -1, 1))).max() < 3.0
    deep = np.linalg.norm(cells.positions, axis=1) < 20 - 1.4 * cells.spacing
    assert np.all(cells.window[deep] == 1)
    assert np.all(cells.normal[deep] == 0)


@given(
    st.floats(-0.5, 0.5),
    st.tuples(*[st.floats(-1, 1)] * 3).filter(lambda v: np.hypot(*v[:2]) > 0.1),
)
@settings(max_examples=12, deadline=None)
def test_planes_in_any_direction_are_met_to_a_hundredth_of_a_cell(
    shift: float, direction: tuple[float, float, float]
) -> None:
    # a large box turned and cut by its own face; cells near the middle of that face see a plane
    normal = np.array(direction) / np.linalg.norm(direction)
    axis = np.cross([1.0, 0.0, 0.0], normal)
    angle = np.degrees(np.arccos(np.clip(normal[0], -1, 1)))
    if np.linalg.norm(axis) < 1e-9:
        axis = np.array([0.0, 0.0, 1.0])
    slab = Cuboid((16.0, 16.0, 16.0)).rotated(angle, axis).moved(shift * normal)
    cells = shapes.voxelize(Particle((Part(slab, "gold"),)), spacing=1.0)
    positions = cells.positions - shift * normal
    inside = 8.0 - positions @ normal
    across = np.linalg.norm(positions - np.outer(positions @ normal, normal), axis=1)
    seen = (across < 5) & (np.abs(inside) < 2)
    assert np.abs(cells.window[seen, 0] - plane_fraction(inside[seen], 2.2)).max() < 0.01
    # the fraction of the cells in a column adds up to the plane's place
    assert seen.sum() > 50
    strong = seen & (np.abs(inside) < 0.7)
    cosine = cells.normal[strong] @ normal
    assert np.degrees(np.arccos(np.clip(cosine, -1, 1))).max() < 4.0


def test_faces_on_cell_borders_leave_whole_cells() -> None:
    cells = shapes.voxelize(shapes.cuboid((8, 6, 4)), spacing=1.0)
    whole = cells.fraction[:, 0] > 0.5
    assert whole.sum() == 8 * 6 * 4
    assert np.allclose(cells.fraction[whole], 1.0, atol=1e-6)
    assert cells.shape == (10, 8, 6)  # windows of the next layer outside see the face
    # next to a face, half a cell inside it
    row = cells.rows()[5, 4, 1]
    assert cells.window[row, 0] == pytest.approx(plane_fraction(np.array(0.5), 2.2), abs=5e-3)
    assert np.allclose(cells.normal[row], [0, 0, -1], atol=1e-6)
    assert cells.gradient[row, 0] @ [0, 0, 1] > 0


@pytest.mark.parametrize(
    "particle",
    [
        shapes.cube(30, rounding=4),
        shapes.rod(40, 14),
        shapes.prism(3, 40, 12, tip=4, rounding=2),
        shapes.dimer(shapes.sphere(16), gap=2),
        shapes.core_shell(shapes.sphere(20, material="silica"), thickness=4),
        shapes.torus(40, 9).moved((3.3, 4.4, 5.5)),
    ],
    ids=lambda p: p.name,
)
@pytest.mark.parametrize("number", [15, 16])
def test_mirror_planes_are_kept_to_the_last_bit(particle: Particle, number: int) -> None:
    cells = shapes.voxelize(particle, cells=number)
    expected = particle.mirrors()
    assert cells.mirrors == expected
    rows = cells.rows()
    for axis in range(3):
        if not expected[axis]:
            continue
        image = cells.index.copy()
        image[:, axis] = cells.shape[axis] - 1 - image[:, axis]
        other = rows[tuple(image.T)]
        assert np.array_equal(cells.window, cells.window[other])
        assert np.array_equal(cells.fraction, cells.fraction[other])
        assert np.array_equal(cells.centre_material, cells.centre_material[other])
        flip = np.ones(3)
        flip[axis] = -1
        assert np.array_equal(cells.gradient, cells.gradient[other] * flip)
        tensor = np.einsum("ni,nj->nij", cells.normal, cells.normal)
        turned = np.einsum("ni,nj->nij", cells.normal[other] * flip, cells.normal[other] * flip)
        assert np.array_equal(tensor, turned)


def test_axes_are_alike() -> None:
    # a cube's cells are the same seen along x, y or z
    cells = shapes.voxelize(shapes.cube(30, rounding=4), cells=14)
    window = cells.dense(cells.window[:, 0])
    assert np.allclose(window, window.transpose(1, 2, 0), atol=1e-6)
    normal = cells.dense(cells.normal)
    turned = normal.transpose(1, 2, 0, 3)[..., [1, 2, 0]]
    assert np.allclose(np.abs(normal), np.abs(turned), atol=1e-5)


def test_the_lattice_is_centred_with_the_parity_of_the_extent() -> None:
    for edge, across in ((8.0, 8), (9.0, 9), (8.6, 9)):
        cells = shapes.voxelize(shapes.cube(edge).moved((100, 0, 0)), spacing=1.0)
        assert cells.shape[0] % 2 == across % 2
        assert np.allclose(cells.origin + (np.array(cells.shape) - 1) / 2, [100, 0, 0])
        assert np.all(cells.index.min(axis=0) == 0)
        assert np.all(cells.index.max(axis=0) == np.array(cells.shape) - 1)


def test_materials_of_a_coated_sphere() -> None:
    particle = shapes.core_shell(shapes.sphere(24, material="silica"), 6, material="gold")
    cells = shapes.voxelize(particle, spacing=1.0)
    assert cells.materials == ("gold", "silica")
    radius = np.linalg.norm(cells.positions, axis=1)
    gold, silica = cells.fraction.sum(axis=0)
    assert silica == pytest.approx(Sphere(24.0).volume(), rel=1e-4)
    assert gold == pytest.approx(Sphere(36.0).volume() - Sphere(24.0).volume(), rel=1e-3)
    # at the inner interface host is absent and the normal still is radial
    inner = np.abs(radius - 12) < 0.4
    assert np.allclose(cells.window[inner].sum(axis=1), 1.0, atol=2e-3)
    radial = cells.positions[inner] / radius[inner, None]
    assert np.abs(np.einsum("ni,ni->n", cells.normal[inner], radial)).min() > 0.995
    assert np.all(cells.centre_material[radius < 11.9] == 1)
    assert np.all(cells.centre_material[(radius > 12.1) & (radius < 17.9)] == 0)
    assert np.all(cells.centre_material[radius > 18.1] == -1)


def test_a_thin_plate_has_the_normal_of_its_faces() -> None:
    # half a cell thick: in its middle the gradients cancel, second derivatives are left
    cells = shapes.voxelize(shapes.cuboid((20, 20, 0.5)), spacing=1.0)
    middle = (np.abs(cells.positions) < 6).all(axis=1) & (np.abs(cells.positions[:, 2]) < 0.6)
    assert middle.sum() > 50
    assert np.allclose(np.abs(cells.normal[middle]), [0, 0, 1], atol=1e-3)


def test_removed_parts_make_holes() -> None:
    box, hole = Cuboid((20.0, 20.0, 20.0)), Sphere(12.0)
    cells = shapes.voxelize(Particle((Part(box, "gold"), Part(hole, None))), spacing=1.0)
    assert cells.fraction.sum() == pytest.approx(8000 - hole.volume(), rel=1e-3)
    centre = np.linalg.norm(cells.positions, axis=1) < 4
    assert not np.any(centre)  # no cell of host alone is kept


@pytest.mark.parametrize(("width", "samples"), [(3.0, 3), (2.2, 5), (1.6, 4)])
def test_samples_and_window_are_arguments(width: float, samples: int) -> None:
    cells = shapes.voxelize(shapes.sphere(20), cells=12, window=width, samples=samples)
    assert cells.window_width == width
    distance = np.linalg.norm(cells.positions, axis=1)
    exact = lens_fraction(distance, 10.0, width / 2 * cells.spacing)
    assert np.abs(cells.window[:, 0] - exact).max() < 0.01


def test_slabs_join_without_a_seam(monkeypatch: pytest.MonkeyPatch) -> None:
    particle = shapes.star(20, 12, 12, 4, 1.5).rotated(17, (1, 2, 3))
    whole = shapes.voxelize(particle, cells=20)
    monkeypatch.setitem(shapes.voxelize.__globals__, "SLAB_SAMPLES", 1)
    slabs = shapes.voxelize(particle, cells=20)
    assert np.array_equal(whole.index, slabs.index)
    assert np.allclose(whole.window, slabs.window, atol=1e-6)  # samples are float32


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({}, "either spacing"),
        ({"spacing": 1.0, "cells": 3}, "either spacing"),
        ({"spacing": -1.0}, "greater than 0"),
        ({"spacing": float("nan")}, "greater than 0"),
        ({"cells": 0}, "at least 1"),
        ({"spacing": 500.0}, "no cell"),
    ],
)
def test_lattices_that_cannot_be_are_refused(arguments: dict, message: str) -> None:
    with pytest.raises(ShapeError, match=message):
        shapes.voxelize(shapes.sphere(20), **arguments)


def test_only_particles_have_cells() -> None:
    with pytest.raises(ShapeError, match="takes a Particle"):
        shapes.voxelize(Sphere(20.0), cells=8)  # type: ignore[arg-type]
