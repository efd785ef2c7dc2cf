"""The linear system of a particle and its solution."""

import numpy as np
import pytest

import dda
import shapes
from dda.errors import InputError
from dda.lattice import memory_estimate, relative_system, solve_dense
from dda.lattice.workers import Workers


def lopsided(cells=9):
    """Cells of a body without symmetry, of two materials."""
    ball = shapes.sphere(24, "gold").parts
    egg = shapes.ellipsoid((30, 18, 16), "silicon").rotated(35, (1, 2, 3)).moved((14, 8, 6)).parts
    return shapes.voxelize(shapes.Particle(egg + ball), cells=cells)


def random_vectors(system, number, seed=0):
    generator = np.random.default_rng(seed)
    return np.moveaxis(generator.normal(size=(system.n, 3, number, 2)) @ [1, 1j], 2, 0)


@pytest.fixture(scope="module")
def body():
    return lopsided()


@pytest.fixture(scope="module")
def system(body):
    return dda.system(body, 560, "water")


LIGHT = dda.plane_wave((1, 2, -1), (1, 0, 1))


def test_matrix_is_complex_symmetric(system):
    """u.(A v) = v.(A u) without conjugation; rounding of the FFT only."""
    u, v = random_vectors(system, 2)
    assert np.sum(u * system.matvec(v)) == pytest.approx(np.sum(v * system.matvec(u)), rel=1e-11)


def test_matrix_is_linear_and_keeps_the_shape_of_vectors(system):
    u, v = random_vectors(system, 2)
    both = system.matvec(u + 2j * v)
    assert both == pytest.approx(system.matvec(u) + 2j * system.matvec(v), rel=1e-10, abs=1e-13)
    assert system.matvec(u.ravel()) == pytest.approx(system.matvec(u).ravel(), rel=1e-12)


def test_preconditioner_inverts_the_cells_own_part(system):
    (v,) = random_vectors(system, 1)
    own = system.alpha_inverse.apply(v, np.empty_like(v))
    assert system.precondition(own) == pytest.approx(v, rel=1e-9)


def test_matrix_loses_energy(system):
    """Im(v* . A v) < 0 for passive materials: nothing may radiate or absorb less than nothing."""
    for v in random_vectors(system, 8):
        assert np.vdot(v, system.matvec(v)).imag < 0


@pytest.mark.parametrize("surface", ["window", "cell", "whole"])
@pytest.mark.parametrize("polarizability", ["fcd-corners", "fcd", "ldr", "rr"])
def test_iteration_against_dense_solution(body, surface, polarizability):
    options = {"surface": surface, "polarizability": polarizability, "light": LIGHT}
    system = dda.system(body, 560, "water", **options)
    ours = dda.solve(system, LIGHT, tolerance=1e-10)
    exact = solve_dense(system, LIGHT)
    assert ours.status == "converged"
    # The residual is 1e-10 and the condition number below a thousand.
    assert np.linalg.norm(ours.p - exact.p) < 1e-7 * np.linalg.norm(exact.p)


def test_answer_satisfies_the_equation(system):
    ours = dda.solve(system, LIGHT, tolerance=1e-8)
    rest = system.matvec(ours.p) - LIGHT.field(system.positions, system.k)
    # Stated in the norm of the preconditioned residual; plain and preconditioned differ by the
    # spread of the polarizabilities, about a hundred.
    assert np.linalg.norm(rest) < 1e-6 * np.sqrt(system.n)
    scaled = system.precondition(rest)
    whole = system.precondition(LIGHT.field(system.positions, system.k))
    assert np.linalg.norm(scaled) < 2e-8 * np.linalg.norm(whole)


def test_start_vector_saves_steps(system):
    first = dda.solve(system, LIGHT, tolerance=1e-6)
    again = dda.solve(system, LIGHT, tolerance=1e-6, start=first.p)
    assert again.products < 0.3 * first.products
    assert again.p == pytest.approx(first.p, rel=1e-3, abs=1e-4 * abs(first.p).max())


def test_unfinished_solution_says_so(system):
    stopped = dda.solve(system, LIGHT, tolerance=1e-8, limit=3)
    assert stopped.status != "converged"
    assert stopped.residual > 1e-8


@pytest.mark.parametrize("other", ["scipy", "single", "one thread"])
def test_numbers_and_libraries_agree(body, system, other):
    options = {
        "scipy": {"fft": "scipy"},
        "single": {"precision": "single"},
        "one thread": {"workers": Workers(1)},
    }[other]
    reference = dda.solve(system, LIGHT, tolerance=1e-5)
    ours = dda.solve(dda.system(body, 560, "water", **options), LIGHT, tolerance=1e-5)
    assert ours.status == "converged"
    ratio = dda.cross_sections(ours).c_ext / dda.cross_sections(reference).c_ext
    assert ratio == pytest.approx(1, abs=1e-4)
    # Both residuals are 1e-5; the dipoles differ by that times the condition number.
    assert np.linalg.norm(ours.p - reference.p) < 5e-3 * np.linalg.norm(reference.p)


def test_single_cell_is_one_polarizable_dipole():
    cells = shapes.voxelize(shapes.cube(edge=4, rounding=0, material="1.5"), cells=1, window=1.0)
    system = dda.system(cells, 600, 1.0, surface="whole")
    assert system.n == 1
    p = dda.solve(system, dda.plane_wave()).p[0]
    place = dda.plane_wave().field(system.positions, system.k)[0]
    assert p == pytest.approx(system.alpha.scalar[0] * place, rel=1e-10)


def test_interior_cells_are_bulk():
    """Away from any surface a cell has the isotropic polarizability of its material."""
    cells = shapes.voxelize(shapes.sphere(24, "gold"), cells=12)
    system = dda.system(cells, 560, "water")
    inside = np.flatnonzero(cells.window[:, 0] > 1 - 1e-9)
    assert len(inside) > 100
    assert not set(inside) & set(system.alpha.where)
    assert np.ptp(abs(system.alpha.scalar[inside])) < 1e-9 * abs(system.alpha.scalar[inside[0]])


def test_relative_permittivity_is_what_counts():
    cells = shapes.voxelize(shapes.sphere(24, "1.7"), cells=8)
    ours = dda.system(cells, 532.0, 1.33)
    same = relative_system(cells, 532.0, 1.33, [(1.7 / 1.33) ** 2])
    assert ours.alpha.scalar == pytest.approx(same.alpha.scalar, rel=1e-12)
    assert ours.k == pytest.approx(2 * np.pi * 1.33 / 532)


def test_own_materials_by_name():
    cells = shapes.voxelize(shapes.sphere(24, "stuff"), cells=8)
    system = dda.system(cells, 600, "air", materials={"stuff": 1.5 + 0.1j})
    assert system.permittivity * system.n_host**2 == pytest.approx((1.5 + 0.1j) ** 2, rel=1e-9)


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"surface": "soft"}, "window, cell, whole"),
        ({"host": "gold"}, "absorb"),
        ({"host": 1.7}, "host's permittivity"),
        ({"wavelength": 8.0, "host": 1.0}, "too coarse"),
        ({"fft": "other"}, "scipy"),
    ],
)
def test_mistakes_are_named(options, message):
    cells = shapes.voxelize(shapes.sphere(24, "1.7"), cells=8)
    with pytest.raises(InputError, match=message):
        dda.system(cells, **({"wavelength": 600.0, "host": "water"} | options))


def test_memory_estimate_grows_with_the_box():
    small, large = memory_estimate((32, 32, 32), 32**3), memory_estimate((64, 64, 64), 64**3)
    assert large == pytest.approx(8 * small, rel=0.1)
    assert memory_estimate((64, 64, 64), 64**3, "single") < 0.75 * large
    # What arrays a solve certainly holds: kernel octant, columns along x, solution and residual.
    least = 6 * 64**3 * 16 + 3 * 128 * 64 * 64 * 16 + 4 * 3 * 64**3 * 16
    assert least < large < 3 * least
