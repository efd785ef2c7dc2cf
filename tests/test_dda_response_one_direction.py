"""What one direction shows: superposition, Mie, dichroism, radiation pressure."""

from functools import cache

import numpy as np
import pytest

import dda
import shapes
from dda.response import scattering_amplitude
from dda.response.far_field import sphere_quadrature
from dda.response.one_direction import (
    differential_scattering,
    from_two,
    one_direction,
    radiation_pressure,
)
from validation.compare import permittivity
from validation.mie import sphere

ANGLES = np.linspace(0, 180, 7)


@cache
def ball():
    system = dda.system(shapes.voxelize(shapes.sphere(100), cells=16), 560.0, 1.33)
    return one_direction(system, (1, 2, 2), tolerance=1e-4)


@cache
def tilted_rod():
    rod = shapes.rod(40, 16, axis="x").rotated(30, (0, 0, 1))
    return dda.system(shapes.voxelize(rod, cells=12), 600.0, 1.33)


def exact():
    return sphere(100, 560, permittivity("gold", 560), 1.33)


def test_amplitudes_of_a_sphere():
    s1, s2 = exact().amplitudes(np.deg2rad(ANGLES))
    ours = ball().amplitude_matrices(ANGLES, azimuth=30)
    scale = abs(s1[0])
    # 16 cells across
    assert abs(ours[:, 0, 0] - s2).max() < 0.02 * scale
    assert abs(ours[:, 1, 1] - s1).max() < 0.02 * scale
    assert abs(ours[:, [0, 1], [1, 0]]).max() < 1e-3 * scale


def test_forward_amplitude_gives_extinction():
    both = ball()
    e1, e2 = both.axes
    mean = np.mean([both.cross_sections(e).c_ext for e in (e1, e2)])
    # optical theorem: C_ext = 4 pi / k^2 Re S(0) (Bohren & Huffman 1983, section 3.4)
    assert np.isclose(4 * np.pi / both.k**2 * np.trace(both.forward()).real / 2, mean, rtol=1e-9)
    # backward, a sphere turns S2 into -S1
    back = both.backward()
    assert abs(back[0, 0] + back[1, 1]) < 1e-3 * abs(back[0, 0])


def test_mueller_matrix_is_that_of_the_amplitudes():
    both = ball()
    m = both.mueller_matrices(ANGLES)
    e1, e2 = both.axes
    for i, angle in enumerate(np.deg2rad(ANGLES)):
        out = (np.cos(angle) * both.direction + np.sin(angle) * e1)[None]
        mean = np.mean([differential_scattering(both.polarized(e), out)[0] for e in (e1, e2)])
        assert np.isclose(m[i, 0, 0], both.k**2 * mean, rtol=1e-9)


def test_superposition_is_a_solution():
    system = tilted_rod()
    both = one_direction(system, (1, 1, 2), tolerance=1e-5)
    light = dda.plane_wave((1, 1, 2), "right")
    direct = dda.solve(system, light, tolerance=1e-7)
    assert np.allclose(
        both.cross_sections("right").c_ext, dda.cross_sections(direct).c_ext, rtol=1e-4
    )
    again = both.polarized("right")
    assert np.allclose(again.incident, direct.incident)
    assert both.products > 0


def test_linear_dichroism_of_a_rod():
    both = one_direction(tilted_rod(), (0, 0, 1))
    along = 30.0  # of the rod from x, which is e1 for light along z
    assert np.allclose(both.axes[0], (1, 0, 0))
    most, _ = both.dichroism("linear", along)
    assert most > 0
    assert np.isclose(both.dichroism("linear", along + 90)[0], -most, rtol=1e-6)
    # at 45 degrees to the rod the two polarizations are alike: mirror images of each other
    assert abs(both.dichroism("linear", along + 45)[0]) < 0.02 * most
    # in its plane, a rod is no screw
    assert abs(both.dichroism("circular")[0]) < 0.02 * most


def test_circular_dichroism_along_a_helix():
    differences = []
    for hand in ("right", "left"):
        body = shapes.helix(diameter=40, pitch=30, turns=1.5, thickness=18, hand=hand)
        system = dda.system(shapes.voxelize(body, cells=10), 560.0, 1.33)
        both = one_direction(system, (0, 0, 1), tolerance=1e-5)
        differences.append(both.dichroism())
        whole = both.cross_sections("left").c_ext
    assert abs(differences[0][0]) > 0.1 * whole
    # light along z sees the mirrored helix from the other end; that is the same by its half turn
    assert np.allclose(differences[0], -np.array(differences[1]), rtol=1e-3)


def test_radiation_pressure_of_a_sphere():
    both = ball()
    solved = exact()
    ours = radiation_pressure(both.polarized("left"))
    along = both.direction
    c_pr = solved.c_ext - solved.asymmetry * solved.c_sca
    assert abs(ours.c_pr @ along / c_pr - 1) < 0.02
    assert abs(ours.asymmetry @ along - solved.asymmetry) < 2e-3
    # circular light pushes a sphere straight ahead
    assert np.linalg.norm(ours.c_pr - along * (ours.c_pr @ along)) < 1e-3 * c_pr


def test_differential_scattering_integrates_to_the_cross_section():
    polarization = one_direction(tilted_rod(), (1, 1, 2)).first
    directions, weights = sphere_quadrature(6)
    total = weights @ differential_scattering(polarization, directions)
    assert np.isclose(total, dda.cross_sections(polarization).c_sca_far, rtol=1e-9)
    f = scattering_amplitude(polarization, directions)
    assert abs(np.sum(f * directions, axis=1)).max() < 1e-12 * abs(f).max()


def test_a_direction_of_no_length_is_refused():
    with pytest.raises(dda.InputError, match="direction"):
        one_direction(tilted_rod(), (0, 0, 0))


def test_any_two_orthogonal_polarizations_will_do():
    system = tilted_rod()
    both = one_direction(system, (1, 1, 2), tolerance=1e-5)
    e1, e2 = both.axes
    one = both.polarized((2 * e1 + 1j * e2) / np.sqrt(5))
    two = both.polarized((1j * e1 + 2 * e2) / np.sqrt(5))  # conj(e).f = 0
    again = from_two(one, two, both.error)
    # sums of the same two solutions: rounding
    assert np.allclose(again.first.p, both.first.p, atol=1e-9 * abs(both.first.p).max())
    assert np.allclose(again.second.p, both.second.p, atol=1e-9 * abs(both.first.p).max())
    assert np.allclose(again.mueller_matrices(ANGLES), both.mueller_matrices(ANGLES), rtol=1e-7)


def test_outgoing_directions_lie_at_their_angles():
    both = ball()
    assert np.allclose(both.outgoing(ANGLES, 70) @ both.direction, np.cos(np.deg2rad(ANGLES)))
