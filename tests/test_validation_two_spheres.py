"""Multiple scattering by spheres: translation, limits, energy, continuity on the surfaces."""

from functools import cache

import numpy as np
import pytest

from validation.mie import sphere
from validation.riccati import riccati
from validation.translation import axial_translations, log_double_factorials
from validation.two_spheres import spheres_on_line, two_spheres
from validation.vector_waves import wave_fields

GOLD = -9.4 + 1.4j  # near 600 nm, Johnson & Christy (1972), rounded, from memory


@cache
def gold_pair(polarization=(1, 0, 0), order=None):
    return two_spheres(40, 4, 600.0, GOLD, 1.33, (0, 0, 1), polarization, order)


@pytest.mark.parametrize("kd", [1.7, -4.0])
def test_translated_waves_are_the_same_field(kd):
    """Outgoing waves about 0, summed as regular waves about (0, 0, kd); k = 1."""
    order = 24
    points = np.array([[0.2, -0.1, 0.25], [-0.3, 0.2, -0.1]])
    moved = points + np.array([0, 0, kd])
    n = np.arange(order + 1)
    odd = log_double_factorials(order + 1)
    scaled = np.zeros((2, order + 1), dtype=complex)
    scaled[:, 2:5] = [[0.3, 1j, -0.2], [0.7, -0.4j, 0.1]]  # in units of (2n-1)!!, x_from = 1
    for m, (shift,) in axial_translations(order, 2, [(kd, 1.0, 1.0)]):
        rho = np.linalg.norm(moved, axis=1)
        functions = riccati(order, rho)
        # Amplitudes times (2n-1)!! are given; the waves themselves carry z_n = xi_n / rho.
        out = scaled * np.exp(-odd[n])
        expected = wave_fields(m, moved, functions.xi / rho, functions.xi_prime / rho, rho, out)
        # Row nu comes multiplied by 1/(2nu+1)!!.
        regular = np.einsum("injl,jl->in", shift, scaled) * np.exp(odd[n + 1])
        rho = np.linalg.norm(points, axis=1)
        functions = riccati(order, rho)
        found = wave_fields(m, points, functions.psi / rho, functions.psi_prime / rho, rho, regular)
        # The series converges as (|r|/|d|)^n = 0.22^24.
        scale = np.abs(expected[0]).max()
        assert np.allclose(found, expected, rtol=0, atol=1e-10 * scale)


@pytest.mark.parametrize("polarization", [(1, 0, 0), (0, 1, 0)])
def test_energy_balance_and_convergence(polarization):
    solved = gold_pair(polarization)
    assert solved.error < 1e-9
    assert solved.balance < 1e-12
    finer = gold_pair(polarization, solved.order + 9)
    # The cross sections fall with exp(-2 eta n), eta = acosh(1 + gap/diameter) = 0.44.
    assert finer.cross_sections() == pytest.approx(solved.cross_sections(), rel=1e-9)


def test_fields_are_continuous_on_both_surfaces():
    """Residuals fall with exp(-eta n), slowest at the gap's poles: these are among the points."""
    solved = gold_pair((1, 0, 0), 60)
    normal = np.random.default_rng(0).normal(size=(40, 3))
    normal[:2] = [[1, 0, 0], [-1, 0, 0]]
    normal /= np.linalg.norm(normal, axis=1)[:, None]
    for s, place in enumerate(solved.places):
        points = normal * 20 + [place, 0, 0]
        e_in, h_in = solved.inner_fields(points, s)
        e_out, h_out = solved.outer_fields(points)
        largest = np.abs(e_out).max()
        assert np.abs(np.cross(normal, e_in - e_out)).max() < 1e-10 * largest
        jump = np.sum(normal * (GOLD / 1.33**2 * e_in - e_out), axis=1)
        assert np.abs(jump).max() < 1e-9 * largest
        assert np.abs(h_in - h_out).max() < 1e-10 * np.abs(h_out).max()


def test_gap_field_is_settled_and_pulls_along_the_line():
    origin = np.zeros((1, 3))
    e, _ = gold_pair().fields(origin)
    finer, _ = gold_pair((1, 0, 0), 60).fields(origin)
    assert np.allclose(e, finer, rtol=0, atol=1e-7 * np.abs(finer).max())
    across, _ = gold_pair((0, 1, 0)).fields(origin)
    assert abs(e[0, 0]) > 10 > 2 > abs(across[0, 1])


def test_invisible_neighbour_leaves_mie():
    """A sphere of host next to gold: exactly the Mie cross sections and fields."""
    solved = two_spheres((80, 50), 6, 600.0, (GOLD, 1.33**2), 1.33, order=24)
    alone = sphere(80, 600.0, GOLD, 1.33)
    expected = (alone.c_ext, alone.c_abs, alone.c_sca)
    assert solved.cross_sections() == pytest.approx(expected, rel=1e-11)
    points = np.array([[-50.0, 30, 40], [-40, 10, -5], [60, 0, 20]])
    centre = [solved.places[0], 0, 0]
    for ours, theirs in zip(solved.fields(points), alone.fields(points - centre), strict=True):
        assert np.allclose(ours, theirs, rtol=0, atol=1e-9 * np.abs(theirs).max())


def test_far_apart_spheres_are_two_spheres():
    """What is left is the neighbour's scattered wave, |S1|/(kd) of about 4e-3."""
    solved = two_spheres(80, 20000, 600.0, GOLD, 1.33, order=10)
    alone = sphere(80, 600.0, GOLD, 1.33)
    assert solved.c_ext == pytest.approx(2 * alone.c_ext, rel=8e-3)
    assert solved.c_abs == pytest.approx(2 * alone.c_abs, rel=8e-3)


@pytest.mark.parametrize("polarization", [(1, 0, 0), (0, 1, 0)])
def test_small_spheres_are_coupled_dipoles(polarization):
    """alpha = (3i/2k^3) a_1 (Doyle 1989), coupled by the dipole field at 10 radii."""
    solved = two_spheres(2, 8, 600.0, GOLD, 1.33, (0, 0, 1), polarization, order=8)
    alone = sphere(2, 600.0, GOLD, 1.33)
    k, distance = alone.k, 10.0
    alpha = 1.5j / k**3 * alone.a[1]
    near = (1 - 1j * k * distance) / distance**2
    along = np.exp(1j * k * distance) / distance * 2 * near
    across = np.exp(1j * k * distance) / distance * (k**2 - near)
    coupling = along if polarization[0] else across
    expected = 2 * 4 * np.pi * k * (alpha / (1 - alpha * coupling)).imag
    effect = abs(expected / (2 * alone.c_ext) - 1)
    assert effect > 2e-3
    # Quadrupoles: (a/d)^2 of the effect, times a factor of the resonance.
    assert solved.c_ext == pytest.approx(expected, rel=0.1 * effect)


def test_lossless_spheres_absorb_nothing():
    solved = two_spheres((100, 60), 8, 500.0, (4.0, 2.25), 1.0, (1, 1, 0), (1, -1, 1j), order=26)
    assert abs(solved.c_abs) < 1e-12 * solved.c_ext
    assert solved.balance < 1e-12


def test_narrow_gap_of_a_tenth_of_the_radius():
    solved = two_spheres(80, 4, 700.0, -16 + 1j, 1.33, order=52)
    coarser = two_spheres(80, 4, 700.0, -16 + 1j, 1.33, order=40)
    assert solved.balance < 1e-12
    assert coarser.cross_sections() == pytest.approx(solved.cross_sections(), rel=1e-9)
    assert solved.c_ext > 2 * sphere(80, 700.0, -16 + 1j, 1.33).c_ext


def test_three_spheres_and_the_order_they_are_named_in():
    """A chain named backwards is the same chain; energy is conserved."""
    arguments = ([-60.0, 0, 50], [40, 50, 30], 550.0, [GOLD, 2.25, GOLD], 1.33)
    light = ((1, 0, 1), (1, 1j, -1), 22)
    chain = spheres_on_line(*arguments, *light)
    back = spheres_on_line(*(a[::-1] if isinstance(a, list) else a for a in arguments), *light)
    assert chain.balance < 1e-11
    assert chain.cross_sections() == pytest.approx(back.cross_sections(), rel=1e-12)
    assert chain.absorption() == pytest.approx(back.absorption()[::-1], rel=1e-9, abs=1e-9)


def test_reciprocity_of_the_direction():
    """C_ext is the same for opposite directions and the same linear polarization."""
    forth = two_spheres((60, 30), 5, 550.0, (GOLD, 2.25), 1.33, (1, 0, 1), (0, 1, 0), 20)
    back = two_spheres((60, 30), 5, 550.0, (GOLD, 2.25), 1.33, (-1, 0, -1), (0, 1, 0), 20)
    assert forth.c_ext == pytest.approx(back.c_ext, rel=1e-12)
    assert abs(forth.c_abs / back.c_abs - 1) > 1e-3  # absorption alone is not symmetric


def test_bad_geometry_is_refused():
    with pytest.raises(ValueError, match="touch"):
        two_spheres(40, 0, 600.0, GOLD)
    with pytest.raises(ValueError, match="perpendicular"):
        two_spheres(40, 4, 600.0, GOLD, direction=(1, 0, 0))
