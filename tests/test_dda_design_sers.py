"""SERS factors of a sphere against Mie fields, and their averages."""

import numpy as np
import pytest

import dda
import shapes
from dda.design.sers import sers_averaged, sers_on_surface, stokes_wavelength, turned_mean
from dda.errors import InputError
from dda.light import transverse
from dda.materials import find
from dda.response.far_field import sphere_quadrature
from dda.response.near_field import fields_at
from dda.response.surface_points import cover_surface
from validation.mie import sphere
from validation.runs_near_field import e2

LASER, SHIFT, DIAMETER = 560.0, 1000.0, 40.0
STOKES = stokes_wavelength(LASER, SHIFT)
PARTICLE = shapes.sphere(DIAMETER, "gold")


@pytest.fixture(scope="module")
def systems():
    cells = shapes.voxelize(PARTICLE, cells=16)
    return [dda.system(cells, w, 1.33) for w in (LASER, STOKES)]


@pytest.fixture(scope="module")
def shell():
    return cover_surface(PARTICLE, step=5.0, height=3.0)


@pytest.fixture(scope="module")
def exact(shell):
    factor = np.ones(len(shell.points))
    for wavelength in (LASER, STOKES):
        eps = complex(find("gold").permittivity(np.array([wavelength]))[0])
        factor *= e2(sphere(DIAMETER, wavelength, eps, 1.33).fields(shell.points)[0])
    return factor


def test_stokes_wavelength_from_wave_numbers():
    assert pytest.approx(1e7 / LASER - SHIFT, rel=1e-12) == 1e7 / STOKES
    assert stokes_wavelength(785, -500) < 785  # anti-Stokes
    with pytest.raises(InputError, match="shift"):
        stokes_wavelength(785, 13000)
    with pytest.raises(InputError, match="laser"):
        stokes_wavelength(0, 1000)


def test_surface_mean_and_maximum(systems, shell, exact):
    solved = [dda.solve(s, dda.plane_wave()) for s in systems]
    found = sers_on_surface(*solved, shell.points, shell.areas, particle=PARTICLE)
    # fourth power of a field that is off by 1 % with 16 cells
    assert found.mean == pytest.approx(np.average(exact, weights=shell.areas), rel=0.05)
    assert found.maximum == pytest.approx(exact.max(), rel=0.08)
    # hottest at the poles along the polarization
    assert abs(found.place[0]) > 0.9 * np.linalg.norm(found.place)
    assert found.trusted.all()


def test_average_over_orientations_is_the_same_everywhere_on_a_sphere(shell, exact):
    calls = []
    cells = shapes.voxelize(PARTICLE, cells=12)
    found = sers_averaged(
        *(dda.system(cells, w, 1.33) for w in (LASER, STOKES)),
        shell.points,
        shell.areas,
        particle=PARTICLE,
        tolerance=1e-3,
        progress=lambda done, of: calls.append((done, of)),
    )
    # one direction's mean over the surface is that of all, by symmetry; 12 cells
    assert found.mean == pytest.approx(np.average(exact, weights=shell.areas), rel=0.06)
    # nothing but the lattice tells the places apart
    assert found.factor.std() < 0.06 * found.mean < exact.std()
    assert calls[-1][0] == calls[-1][1] < 60
    assert 0 < found.mean_error < 0.01 * found.mean


def test_average_is_that_of_single_directions():
    # a rod, so that directions differ; both ways use the same cells, so they agree closely
    rod = shapes.ellipsoid(axes=(16, 16, 30), material="gold")
    lattice = shapes.voxelize(rod, cells=9)
    pair = [dda.system(lattice, w, 1.33) for w in (560.0, 590.0)]
    points = np.array([[0, 0, 20.0], [12, 0, 0], [7, 7, 10]])
    found = sers_averaged(*pair, points, np.ones(3), particle=rod)
    directions, weights = sphere_quadrature(3)
    total = np.zeros(3)
    for direction, weight in zip(directions, weights / weights.sum(), strict=True):
        fields = [
            [
                fields_at(dda.solve(s, dda.plane_wave(direction, e)), points, particle=rod).e
                for e in transverse(direction)
            ]
            for s in pair
        ]
        total += weight * turned_mean(*fields)
    # a hundred-thousandth of the incident fields is left out, and solves stop at 1e-4
    assert np.allclose(found.factor, total, rtol=2e-3)


def test_mean_over_polarizations_is_exact():
    rng = np.random.default_rng(3)
    fields = rng.normal(size=(4, 5, 3)) + 1j * rng.normal(size=(4, 5, 3))
    many = []
    for angle in np.linspace(0, np.pi, 50, endpoint=False):
        c, s = np.cos(angle), np.sin(angle)
        many.append(e2(c * fields[0] + s * fields[1]) * e2(c * fields[2] + s * fields[3]))
    assert np.allclose(turned_mean(fields[:2], fields[2:]), np.mean(many, axis=0))
