"""Cross sections: conservation, reciprocity, symmetry and the exact solution of the sphere."""

from functools import cache

import numpy as np
import pytest

import dda
import shapes
from dda.response import scattering_amplitude
from dda.response.far_field import quadrature_order, sphere_quadrature
from validation.compare import permittivity
from validation.mie import sphere as mie

HOST = 1.33
TIGHT = 1e-8  # residual; identities are tested a hundred times above it


@cache
def lopsided():
    """Cells of a body without symmetry, of two materials."""
    ball = shapes.sphere(24, "gold").parts
    egg = shapes.ellipsoid((30, 18, 16), "silicon").rotated(35, (1, 2, 3)).moved((14, 8, 6)).parts
    return shapes.voxelize(shapes.Particle(egg + ball), cells=10)


def solve(cells, light, wavelength=560.0, tolerance=TIGHT, **options):
    system = dda.system(cells, wavelength, HOST, **options)
    polarization = dda.solve(system, light, tolerance=tolerance)
    assert polarization.status == "converged"
    return polarization


def sections(*args, **options):
    response = dda.cross_sections(solve(*args, **options))
    return np.array([response.c_ext, response.c_abs])


@pytest.mark.parametrize(
    ("material", "diameter", "wavelength", "cells", "allowed"),
    [
        # The window's surface errs by 2.2 % / 1.3 % of C for dielectrics / metals with 16 cells;
        # the error falls as d^2.
        ("1.9", 160, 500, 16, 0.03),
        ("gold", 40, 530, 16, 0.015),
        ("gold", 80, 560, 16, 0.02),
        ("copper", 50, 560, 16, 0.015),
    ],
)
def test_spheres_against_mie(material, diameter, wavelength, cells, allowed):
    exact = mie(diameter, wavelength, permittivity(material, wavelength), HOST)
    body = shapes.voxelize(shapes.sphere(diameter, material), cells=cells)
    response = dda.cross_sections(solve(body, dda.plane_wave(), wavelength, 1e-4))
    assert response.c_ext == pytest.approx(exact.c_ext, rel=allowed)
    assert response.c_abs == pytest.approx(exact.c_abs, rel=allowed, abs=1e-3 * exact.c_ext)
    assert response.q_ext == pytest.approx(exact.q_ext, rel=allowed)
    # Scattering goes with the square of the dipole, hence twice the error.
    assert response.c_sca == pytest.approx(exact.c_sca, rel=2 * allowed)


def test_error_falls_with_the_square_of_the_spacing():
    """From 10 to 20 cells the error of a smooth body falls by four; by half of that at least."""
    exact = mie(40, 530, permittivity("gold", 530), HOST).c_ext
    errors = []
    for cells in (10, 20):
        body = shapes.voxelize(shapes.sphere(40, "gold"), cells=cells)
        c_ext, _ = sections(body, dda.plane_wave(), 530.0, tolerance=1e-5)
        errors.append(abs(c_ext / exact - 1))
    assert errors[1] < errors[0] / 2


@pytest.mark.parametrize("direction", [(0, 0, 1), (1, 2, -1)])
def test_energy_balance(direction):
    """Absorption in the cells and the far field add up to extinction by the optical theorem: exact
    in the filtered coupled dipoles, whose imaginary part of G is the plane waves' own."""
    response = dda.cross_sections(solve(lopsided(), dda.plane_wave(direction, "left")))
    assert abs(response.balance) < 1e-6
    assert response.c_ext == response.c_abs + response.c_sca
    assert 0 < response.c_abs < response.c_ext


def test_lossless_particle_absorbs_nothing():
    body = shapes.voxelize(shapes.ellipsoid((140, 100, 80), "1.9"), cells=14)
    response = dda.cross_sections(solve(body, dda.plane_wave()))
    assert abs(response.c_abs_cells) < 1e-6 * response.c_ext
    assert response.c_sca_far == pytest.approx(response.c_ext, rel=1e-6)
    assert response.c_sca == pytest.approx(response.c_ext, rel=1e-6)


def test_extinction_is_the_forward_amplitude():
    """C_ext = (4 pi/k) Im(conj(e).F(forward)), the optical theorem: the same sum written apart."""
    p = solve(lopsided(), dda.plane_wave((1, 2, -1), (1, 0, 1)))
    forward = scattering_amplitude(p, p.light.direction[None])[0]
    c_ext = 4 * np.pi / p.system.k * (p.light.polarization.conj() @ forward).imag
    assert dda.cross_sections(p).c_ext == pytest.approx(c_ext, rel=1e-10)


def test_amplitude_is_transverse():
    p = solve(lopsided(), dda.plane_wave())
    directions, _ = sphere_quadrature(4)
    amplitude = scattering_amplitude(p, directions)
    along = abs((amplitude * directions).sum(axis=1))
    assert along.max() < 1e-12 * abs(amplitude).max()


@pytest.mark.parametrize(
    ("there", "back"),
    [
        (((0, 0, 1), (1, 0, 0)), ((1, 0, 0), (0, 1, 0))),
        (((1, 2, -1), (1, 0, 1)), ((1, 1, 1), (1, -1, 0))),
    ],
)
def test_reciprocity(there, back):
    """e2.F(n2; n1, e1) = e1.F(-n1; -n2, e2) for any body (Saxon 1955); to the residual squared,
    since the amplitude is a bilinear form of the two solutions."""
    forth, home = dda.plane_wave(*there), dda.plane_wave(-np.array(back[0]), back[1])
    a = scattering_amplitude(solve(lopsided(), forth), -home.direction[None])[0]
    b = scattering_amplitude(solve(lopsided(), home), -forth.direction[None])[0]
    assert a @ home.polarization == pytest.approx(b @ forth.polarization, rel=1e-6)


TURNS = [
    ((90, (0, 0, 1)), [[0, -1, 0], [1, 0, 0], [0, 0, 1]]),
    ((120, (1, 1, 1)), [[0, 0, 1], [1, 0, 0], [0, 1, 0]]),
]


@pytest.mark.parametrize(("turn", "matrix"), TURNS)
def test_turning_particle_and_light_by_the_lattices_rotations(turn, matrix):
    """The lattice goes over into itself, so all numbers stay; sampling of the turned body's
    surface repeats to rounding of its single-precision fractions, 1e-6."""
    egg = shapes.ellipsoid((40, 24, 32), "gold").rotated(25, (1, 2, 3))
    light = dda.plane_wave((1, 2, -1), (1, 0, 1))
    spacing = 2.5
    first = sections(shapes.voxelize(egg, spacing=spacing), light)
    turned_light = dda.plane_wave(matrix @ light.direction, matrix @ light.polarization)
    turned = sections(shapes.voxelize(egg.rotated(*turn), spacing=spacing), turned_light)
    assert turned == pytest.approx(first, rel=1e-5)


def test_turning_against_the_lattice_changes_little():
    """A cube turned by 30 degrees with its light, 14 cells across an edge: rough fractions would
    change C by tens of per cent, the window keeps it within 5 %."""
    cube = shapes.cube(edge=42, rounding=10, material="gold")
    first = sections(shapes.voxelize(cube, spacing=3), dda.plane_wave(), tolerance=1e-5)
    half, root = 0.5, np.sqrt(0.75)
    light = dda.plane_wave((0, 0, 1), (root, half, 0))
    cells = shapes.voxelize(cube.rotated(30, (0, 0, 1)), spacing=3)
    turned = sections(cells, light, tolerance=1e-5)
    assert turned == pytest.approx(first, rel=0.05)


def test_handedness_does_not_matter_to_a_body_with_a_mirror():
    cube = shapes.voxelize(shapes.cube(edge=30, rounding=5, material="gold"), cells=8)
    left, right = (sections(cube, dda.plane_wave((0, 0, 1), hand)) for hand in ("left", "right"))
    assert left == pytest.approx(right, rel=1e-6)


def test_circular_and_linear_light_have_one_mean():
    """<C> over left and right is <C> over x and y: C is a quadratic form of the polarization."""
    lights = [dda.plane_wave((0, 0, 1), e) for e in ("left", "right", (1, 0, 0), (0, 1, 0))]
    c = np.array([sections(lopsided(), light) for light in lights])
    assert c[:2].mean(axis=0) == pytest.approx(c[2:].mean(axis=0), rel=1e-6)
    assert abs(c[2] / c[3] - 1).max() > 0.05  # and x and y themselves differ much


def test_a_chiral_body_tells_left_from_right_and_its_mirror_image_the_other_way():
    particle = shapes.Particle(
        tuple(
            part
            for height, place in enumerate([(10, 0), (0, 10), (-10, 0)])
            for part in shapes.sphere(14, "gold").moved((*place, 12 * height)).parts
        )
    )
    mirrored = particle.mirrored(0)
    c = {
        (name, hand): sections(shapes.voxelize(body, spacing=2), dda.plane_wave((0, 0, 1), hand))
        for name, body in (("one", particle), ("other", mirrored))
        for hand in ("left", "right")
    }
    assert c["one", "left"] == pytest.approx(c["other", "right"], rel=1e-5)
    difference = c["one", "left"] - c["one", "right"]
    assert abs(difference[0]) > 1e-4 * c["one", "left"][0]


def test_scale():
    """Twice the size at twice the wavelength with the same index: four times the area."""
    small, large = (
        sections(shapes.voxelize(shapes.sphere(30 * s, "0.4+2.5j"), cells=9), dda.plane_wave(), w)
        for s, w in ((1, 500.0), (2, 1000.0))
    )
    assert large == pytest.approx(4 * small, rel=1e-6)


def test_a_moved_particle_scatters_the_same():
    """Amplitudes take a phase, cross sections stay."""
    ball = shapes.sphere(30, "gold")
    light, out = dda.plane_wave((1, 2, -1), (1, 0, 1)), np.array([[0.6, 0, 0.8]])
    offset = np.array([120.0, -35.0, 60.0])
    here, there = (
        solve(shapes.voxelize(body, cells=9), light) for body in (ball, ball.moved(offset))
    )
    phase = np.exp(1j * here.system.k * (light.direction - out[0]) @ offset)
    moved = scattering_amplitude(there, out)
    assert moved == pytest.approx(phase * scattering_amplitude(here, out), rel=1e-6)
    assert dda.cross_sections(there).c_ext == pytest.approx(
        dda.cross_sections(here).c_ext, rel=1e-6
    )


def test_single_precision_is_enough_for_cross_sections():
    """1e-4 of double: rounding of 1e-7 grows with the steps of the iteration."""
    light = dda.plane_wave((1, 2, -1), (1, 0, 1))
    double = sections(lopsided(), light, tolerance=1e-5)
    single = sections(lopsided(), light, tolerance=1e-5, precision="single")
    assert single == pytest.approx(double, rel=1e-4)


@pytest.mark.parametrize("order", [1, 2, 5, 9])
def test_quadrature_is_exact_to_its_degree(order):
    """Means of x^2 and of z^(2 order - 2) over the sphere, in closed form."""
    directions, weights = sphere_quadrature(order)
    assert weights.sum() == pytest.approx(4 * np.pi)
    power = 2 * order - 2
    assert weights @ directions[:, 2] ** power == pytest.approx(4 * np.pi / (power + 1))
    if order > 1:
        second = np.einsum("n,na,nb->ab", weights, directions, directions)
        assert second == pytest.approx(4 * np.pi / 3 * np.eye(3), abs=1e-12)


def test_quadrature_order_grows_with_size():
    orders = [quadrature_order(x) for x in (0.01, 0.5, 3, 10)]
    assert orders == sorted(orders)
    assert orders[0] >= 3  # a dipole's |F|^2 has degree two
