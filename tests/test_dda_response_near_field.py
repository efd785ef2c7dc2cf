"""Near fields against Mie, on both sides of the surface, and the ways to sum them."""

import numpy as np
import pytest

import dda
import shapes
from dda.beams import gaussian_beam
from dda.errors import InputError
from dda.materials import find
from dda.response import smeared
from dda.response.near_error import refined_field
from dda.response.near_field import fields_at
from dda.response.smeared import SmearedField
from validation.mie import sphere
from validation.runs_near_field import directions, e2

DIAMETER, WAVELENGTH, HOST = 40.0, 530.0, 1.33
PARTICLE = shapes.sphere(DIAMETER, "gold")


def solved(cells: int, **options):
    system = dda.system(shapes.voxelize(PARTICLE, cells=cells), WAVELENGTH, HOST, **options)
    return dda.solve(system, dda.plane_wave())


@pytest.fixture(scope="module")
def coarse():
    return solved(14)


@pytest.fixture(scope="module")
def fine():
    return solved(20)


@pytest.fixture(scope="module")
def exact():
    eps = complex(find("gold").permittivity(np.array([WAVELENGTH]))[0])
    return sphere(DIAMETER, WAVELENGTH, eps, HOST)


def around(height: float, count: int = 100) -> np.ndarray:
    """Points `height` nm over the sphere."""
    return directions(count) * (DIAMETER / 2 + height)


# Largest error of |E|^2 at 100 points, cells 20 across. Measured: 1/3 less or better. At half a
# cell the program itself marks the points; it is still far from the 40 % that blur costs.
@pytest.mark.parametrize(
    ("cells", "allowed"),
    [(0.5, 0.12), (1, 0.08), (2, 0.04), (4, 0.02), (-1, 0.06), (-2, 0.05), (-5, 0.05)],
)
def test_e2_of_gold_sphere_is_that_of_mie(fine, exact, cells, allowed):
    points = around(cells * fine.system.cells.spacing)
    ours = fields_at(fine, points, particle=PARTICLE)
    true = e2(exact.fields(points)[0])
    assert np.abs(ours.e2 / true - 1).max() < allowed
    assert ours.trusted.all() == (cells >= 1 or cells <= -2)
    assert (ours.material == (-1 if cells > 0 else 0)).all()


def test_components_and_phase_agree_with_mie(fine, exact):
    points = around(3 * fine.system.cells.spacing)
    ours = fields_at(fine, points, particle=PARTICLE, magnetic=True)
    e, h = exact.fields(points)
    # 1 % of the field's size: the error of 20 cells is some 0.3 %
    assert np.abs(ours.e - e).max() < 0.01 * np.abs(e).max()
    assert np.abs(ours.h - h).max() < 0.01 * np.abs(h).max()
    assert np.allclose(ours.e_scattered + ours.e_incident, ours.e)
    assert np.allclose(ours.h_scattered + ours.h_incident, ours.h)


def test_magnetic_field_inside(fine, exact):
    points = around(-4 * fine.system.cells.spacing)
    ours = fields_at(fine, points, particle=PARTICLE, magnetic=True)
    # H inside comes from the same sums; the error of the dipoles is 2 % here
    assert np.abs(ours.h - exact.fields(points)[1]).max() < 0.03


def test_without_the_particle_the_cells_tell_the_side(fine):
    d = fine.system.cells.spacing
    for cells in (-1.5, -0.5, 0.5, 1.5):
        found = fields_at(fine, around(cells * d))
        assert (found.material == (-1 if cells > 0 else 0)).all()
        if abs(cells) < 1:
            # blur by curvature shifts the height by half d/R, a twentieth of a cell here
            assert np.abs(found.height / d - cells).max() < 0.15


def test_mesh_and_direct_sums_agree(fine, monkeypatch):
    rng = np.random.default_rng(5)
    points = rng.uniform(-35, 35, (500, 3))
    direct = SmearedField(fine).scattered(points, magnetic=True)
    monkeypatch.setattr(smeared, "_FEW_PAIRS", 0)
    calls = []
    read = SmearedField(fine).scattered(points, True, lambda done, of: calls.append((done, of)))
    # reading between nodes errs by some 1e-3 of the incident field, more inside the metal
    assert np.sqrt(np.mean(np.abs(direct[0] - read[0]) ** 2)) < 2e-3
    assert np.sqrt(np.mean(np.abs(direct[1] - read[1]) ** 2)) < 5e-4
    assert calls[-1] == (500, 500)


def test_far_points_are_summed_directly(fine, monkeypatch):
    monkeypatch.setattr(smeared, "_FEW_PAIRS", 0)
    # beyond what a mesh can hold, the field must still be the radiated one
    points = np.array([[0.0, 0, 3e5], [0, 0, 30.0]])
    e = SmearedField(fine).scattered(points)[0]
    k = fine.system.k
    amplitude = dda.response.scattering_amplitude(fine, np.array([[0.0, 0, 1]]))[0]
    wave = amplitude * np.exp(1j * k * 3e5) / 3e5
    assert np.abs(e[0] - wave).max() < 1e-3 * np.abs(wave).max()


def test_fields_of_mirror_points_are_mirrored(fine):
    points = around(1.0, 40)
    e = fields_at(fine, points, particle=PARTICLE).e
    mirrored = fields_at(fine, points * [-1, 1, 1], particle=PARTICLE).e
    # polarized along x the normal component is even, the others odd; rounding and solver noise
    assert np.allclose(mirrored, e * [1, -1, -1], atol=1e-3 * np.abs(e).max())


def test_error_bars_hold(coarse, fine, exact):
    d = fine.system.cells.spacing
    points = np.concatenate([around(c * d) for c in (1, 1.5, 2, 3, 6, -2.5, -4, -6)])
    best = refined_field([fields_at(s, points, particle=PARTICLE) for s in (fine, coarse)])
    off = np.abs(best.e2 - e2(exact.fields(points)[0])) / best.e2_error
    assert best.trusted.all()
    assert (off < 1).mean() > 0.9
    assert off.max() < 3
    # far out the error bar is small as well as right
    far = slice(400, 500)
    assert np.median(best.e2_error[far] / best.e2[far]) < 0.02


def test_error_bar_of_a_point_inside_the_window_is_marked(coarse, fine):
    points = around(0.3 * fine.system.cells.spacing, 20)
    best = refined_field([fields_at(s, points, particle=PARTICLE) for s in (coarse, fine)])
    assert not best.trusted.any()


def test_error_bars_refuse_what_cannot_be_compared(coarse, fine):
    one = fields_at(fine, around(5.0, 10))
    with pytest.raises(InputError, match="two spacings"):
        refined_field([one])
    with pytest.raises(InputError, match="same points"):
        refined_field([one, fields_at(coarse, around(6.0, 10))])
    with pytest.raises(InputError, match="too close"):
        refined_field([one, one])


@pytest.mark.parametrize("surface", ["whole", "cell"])
def test_other_surfaces_are_trusted_less(surface, exact):
    plain = solved(14, surface=surface)
    d = plain.system.cells.spacing
    near, far = (fields_at(plain, around(c * d, 30), particle=PARTICLE) for c in (1, 3))
    assert not near.trusted.any()
    assert far.trusted.all()


def test_core_and_shell_have_their_own_fields():
    core, outer = shapes.sphere(30, "silica"), shapes.sphere(60, "titania-rutile")
    particle = shapes.Particle(outer.parts + core.parts)
    from validation.coated import coated_sphere

    system = dda.system(shapes.voxelize(particle, cells=24), 600, HOST)
    light = dda.plane_wave()
    points = np.concatenate([directions(40) * r for r in (5.0, 22.5, 36.0)])
    found = fields_at(dda.solve(system, light), points, particle=particle)
    eps = [
        complex(find(m).permittivity(np.array([600.0]))[0]) for m in ("silica", "titania-rutile")
    ]
    exact = coated_sphere([30, 60], 600, eps, HOST)
    assert [int(found.material[i]) for i in (0, 40, 80)] == [
        system.cells.materials.index("silica"),
        system.cells.materials.index("titania-rutile"),
        -1,
    ]
    outside = exact.scattered_fields(points[80:])[0] + light.field(points[80:], system.k)
    assert np.abs(found.e2[80:] / e2(outside) - 1).max() < 0.03
    # the middle of the shell is three cells from either surface, and not trusted for the core's
    assert found.trusted[:40].all()


def test_beam_as_light(fine):
    beam = gaussian_beam(waist=600.0)
    polarization = dda.solve(fine.system, beam)
    points = around(4.0, 20)
    wide = fields_at(polarization, points, particle=PARTICLE, magnetic=True)
    plane = fields_at(fine, points, particle=PARTICLE, magnetic=True)
    # a waist of 15 diameters is nearly a plane wave at the focus
    assert np.abs(wide.e - plane.e).max() < 0.03 * np.abs(plane.e).max()
    assert wide.h is not None
    assert np.abs(wide.h - plane.h).max() < 0.03 * np.abs(plane.h).max()


def test_bad_points_are_refused(fine):
    with pytest.raises(InputError, match="shape"):
        fields_at(fine, np.zeros((3, 2)))
    with pytest.raises(InputError, match="point 1"):
        fields_at(fine, np.array([[0.0, 0, 0], [0, np.nan, 0]]))
