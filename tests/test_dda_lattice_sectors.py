"""Mirror sectors: the same answers as without, for every parity of the box."""

import numpy as np
import pytest

import dda
import shapes
from dda.lattice.sectors import sectors

LIGHT = dda.plane_wave((1, 2, -1), (1, 0, 1))
# Residuals of 1e-11 and condition numbers below a thousand.
TIGHT = {"tolerance": 1e-11, "limit": 4000}
SAME = 1e-8

EVERY_PARITY = [(8, 8, 8), (7, 7, 7), (8, 7, 6), (7, 8, 5), (6, 5, 8), (5, 6, 7)]


def brick(shape, materials=("gold",)):
    """A rounded cuboid on a box of this many cells, of spacing 3; with a core if two materials."""
    size = 3.0 * np.array(shape)
    outer = shapes.cuboid(size, rounding=4, material=materials[0])
    core = shapes.ellipsoid(0.55 * size, materials[-1]).parts if len(materials) > 1 else ()
    return shapes.voxelize(shapes.Particle(outer.parts + core), spacing=3.0)


def random_field(n, seed=0):
    return np.random.default_rng(seed).normal(size=(n, 3, 2)) @ [1, 1j]


def both(cells, light=LIGHT, mirrors=None, **options):
    """The solution with mirrors and the one without."""
    system = dda.system(cells, 560, "water", **options)
    ours = dda.solve(system, light, mirrors=mirrors, **TIGHT)
    plain = dda.solve(system, light, mirrors=(False,) * 3, **TIGHT)
    assert ours.status == plain.status == "converged"
    return ours, plain


def agree(ours, plain):
    assert np.linalg.norm(ours.p - plain.p) < SAME * np.linalg.norm(plain.p)
    mine, other = dda.cross_sections(ours), dda.cross_sections(plain)
    for name in ("c_ext", "c_abs", "c_sca_far", "c_abs_cells"):
        assert getattr(mine, name) == pytest.approx(getattr(other, name), rel=SAME)


@pytest.mark.parametrize("shape", EVERY_PARITY)
def test_three_planes(shape):
    cells = brick(shape)
    # the surface cells of the window may widen the box by one cell on either side
    assert [n % 2 for n in cells.shape] == [n % 2 for n in shape]
    assert cells.mirrors == (True, True, True)
    agree(*both(cells))


@pytest.mark.parametrize(
    "mirrors",
    [(True, False, False), (False, True, False), (False, False, True), (True, True, False),
     (True, False, True), (False, True, True)],
)  # fmt: skip
def test_one_and_two_planes(mirrors):
    agree(*both(brick((8, 7, 6)), mirrors=mirrors))


def test_body_with_two_planes_only():
    cone = shapes.voxelize(shapes.cone(24, 24, rounding=3, material="gold"), cells=8)
    assert cone.mirrors == (True, True, False)
    assert len(sectors(dda.system(cone, 560, "water"))) == 4
    agree(*both(cone))


@pytest.mark.parametrize("shape", [(8, 7, 6), (7, 7, 7)])
def test_two_materials(shape):
    agree(*both(brick(shape, ("gold", "silicon"))))


@pytest.mark.parametrize("surface", ["cell", "whole"])
def test_other_surfaces(surface):
    agree(*both(brick((8, 7, 6)), surface=surface))


def test_circular_light():
    agree(*both(brick((7, 8, 6)), dda.plane_wave((0, 0, 1), "left")))


@pytest.mark.parametrize("fft", ["scipy", "ducc0"])
def test_either_library(fft):
    if fft == "ducc0":
        pytest.importorskip("ducc0")
    agree(*both(brick((8, 7, 6)), fft=fft))


def test_axis_parallel_light_needs_few_sectors():
    """Light along z polarized along x has parities (+, +, both): two sectors of eight."""
    system = dda.system(brick((8, 7, 6)), 560, "water")
    light = dda.plane_wave()
    incident = light.field(system.positions, system.k)
    shares = [np.linalg.norm(s.fold(incident)) for s in sectors(system)]
    assert sum(share > 1e-9 * max(shares) for share in shares) == 2
    agree(*both(system.cells, light))


@pytest.mark.parametrize("shape", EVERY_PARITY)
def test_sectors_add_up_to_the_whole(shape):
    system = dda.system(brick(shape), 560, "water")
    found = sectors(system)
    assert len(found) == 8
    field = random_field(system.n)
    total = sum(s.unfold(s.fold(field)) for s in found)
    assert total == pytest.approx(field, rel=1e-12, abs=1e-13)
    # they are orthogonal, and folding keeps lengths and products without conjugation
    other = random_field(system.n, 1)
    by_parts = sum(np.dot(s.fold(field), s.fold(other)) for s in found)
    assert by_parts == pytest.approx(np.sum(field * other), rel=1e-11)


@pytest.mark.parametrize("shape", EVERY_PARITY)
def test_fold_after_unfold_is_nothing(shape):
    system = dda.system(brick(shape), 560, "water")
    found = sectors(system)
    for s in found:
        vector = s.fold(random_field(system.n))
        whole = s.unfold(vector)
        assert s.fold(whole) == pytest.approx(vector, rel=1e-12, abs=1e-13)
        for t in found:
            if t is not s and vector.size:
                assert np.linalg.norm(t.fold(whole)) < 1e-12 * np.linalg.norm(vector)


@pytest.mark.parametrize("shape", [(8, 8, 8), (7, 8, 5)])
def test_products_of_sectors_are_the_product_of_the_whole(shape):
    system = dda.system(brick(shape), 560, "water")
    field = random_field(system.n)
    parts = sum(s.unfold(s.matvec(s.fold(field))) for s in sectors(system))
    whole = system.matvec(field)
    assert np.linalg.norm(parts - whole) < 1e-12 * np.linalg.norm(whole)


def test_preconditioner_of_a_sector_is_that_of_the_whole():
    system = dda.system(brick((8, 7, 6)), 560, "water")
    field = random_field(system.n)
    parts = sum(s.unfold(s.precondition(s.fold(field))) for s in sectors(system))
    assert parts == pytest.approx(system.precondition(field), rel=1e-11)


def test_sector_matrix_is_complex_symmetric():
    system = dda.system(brick((7, 8, 6)), 560, "water")
    for s in sectors(system):
        u, v = s.fold(random_field(system.n, 2)), s.fold(random_field(system.n, 3))
        assert np.dot(u, s.matvec(v)) == pytest.approx(np.dot(v, s.matvec(u)), rel=1e-11)


def test_no_mirror_is_the_whole():
    egg = shapes.ellipsoid((30, 18, 16), "gold").rotated(35, (1, 2, 3))
    system = dda.system(shapes.voxelize(egg, cells=9), 560, "water")
    (only,) = sectors(system, (False,) * 3)
    field = random_field(system.n)
    assert only.matvec(field.ravel()) == pytest.approx(system.matvec(field).ravel(), rel=1e-12)
    assert np.array_equal(only.unfold(only.fold(field)), field)


def test_planes_that_are_not_there_are_refused():
    cone = shapes.voxelize(shapes.cone(24, 24, rounding=3, material="gold"), cells=8)
    with pytest.raises(ValueError, match="not symmetric"):
        sectors(dda.system(cone, 560, "water"), (True, True, True))
