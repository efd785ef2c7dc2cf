"""The layered sphere against the Mie series, the Rayleigh limit and its boundary conditions."""

import numpy as np
import pytest

from validation.coated import coated_sphere
from validation.mie import sphere

GOLD = -9.4 + 1.4j  # near 600 nm, Johnson & Christy (1972), rounded, from memory


@pytest.mark.parametrize("eps", [2.25, GOLD, 17 + 0.3j, -4.4 + 0.2j])
@pytest.mark.parametrize("diameters", [[60, 100], [10, 99, 100], [1, 300]])
def test_equal_media_reduce_to_mie(diameters, eps):
    layered = coated_sphere(diameters, 600.0, [eps] * len(diameters), 1.33)
    plain = sphere(diameters[-1], 600.0, eps, 1.33)
    expected = [plain.c_ext, plain.c_sca]
    assert [layered.c_ext, layered.c_sca] == pytest.approx(expected, rel=1e-11)
    assert np.allclose(layered.a, plain.a, rtol=1e-9, atol=1e-15)
    assert np.allclose(layered.b, plain.b, rtol=1e-9, atol=1e-15)


def test_coat_of_host_is_invisible():
    layered = coated_sphere([60, 100], 600.0, [GOLD, 1.33**2], 1.33)
    plain = sphere(60, 600.0, GOLD, 1.33)
    assert layered.c_ext == pytest.approx(plain.c_ext, rel=1e-11)
    assert layered.c_abs == pytest.approx(plain.c_abs, rel=1e-11)


def test_vanishing_core_is_invisible():
    """The core's effect is its volume, 1e-9 of the whole, times factors of order ten."""
    layered = coated_sphere([0.1, 100], 600.0, [17.0, GOLD], 1.33)
    assert layered.c_ext == pytest.approx(sphere(100, 600.0, GOLD, 1.33).c_ext, rel=1e-7)


def test_rayleigh_limit():
    """Quasistatic polarizability of a coated sphere, Bohren & Huffman (1983), equation 5.36."""
    inner, outer, host = 2.1, GOLD, 1.33**2
    shell = coated_sphere([0.14, 0.2], 600.0, [inner, outer], 1.33)
    f = 0.7**3
    top = (outer - host) * (inner + 2 * outer) + f * (inner - outer) * (host + 2 * outer)
    bottom = (outer + 2 * host) * (inner + 2 * outer)
    bottom += f * (2 * outer - 2 * host) * (inner - outer)
    alpha = 0.1**3 * top / bottom
    # The next order is the square of the size parameter, 2e-6, times a factor of the resonance.
    assert shell.c_abs == pytest.approx(4 * np.pi * shell.k * alpha.imag, rel=3e-5)
    expected = 8 * np.pi / 3 * shell.k**4 * abs(alpha) ** 2
    assert shell.c_sca == pytest.approx(expected, rel=3e-5)


def test_lossless_layers_absorb_nothing():
    s = coated_sphere([100, 140, 200], 500.0, [2.25, 12.0, 2.0], 1.33)
    assert abs(s.c_abs) < 1e-13 * s.c_ext


def test_strongly_absorbing_thick_coat_hides_the_core():
    """Im(m) k times the coat is 60: the core changes nothing, and nothing overflows."""
    hidden = coated_sphere([500, 3000], 500.0, [2.25, (1.5 + 4j) ** 2])
    plain = sphere(3000, 500.0, (1.5 + 4j) ** 2)
    assert hidden.c_ext == pytest.approx(plain.c_ext, rel=1e-11)


@pytest.mark.parametrize(
    ("diameters", "eps"),
    [([60, 80], [2.1, GOLD]), ([80, 120], [GOLD, 2.1]), ([40, 50, 80], [GOLD, 2.1, GOLD])],
)
def test_fields_are_continuous_at_every_boundary(diameters, eps):
    s = coated_sphere(diameters, 600.0, eps, 1.33)
    v = np.random.default_rng(5).normal(size=(40, 3))
    normal = v / np.linalg.norm(v, axis=1)[:, None]
    media = [*eps, 1.33**2]
    for layer, diameter in enumerate(diameters):
        points = normal * diameter / 2
        e_in, h_in = s.layer_fields(points, layer)
        e_out, h_out = s.layer_fields(points, layer + 1)
        assert np.abs(np.cross(normal, e_in - e_out)).max() < 1e-10 * np.abs(e_out).max()
        jump = np.sum(normal * (media[layer] * e_in - media[layer + 1] * e_out), axis=1)
        assert np.abs(jump).max() < 1e-10 * np.abs(media[layer + 1] * e_out).max()
        assert np.abs(h_in - h_out).max() < 1e-10 * np.abs(h_out).max()


def test_fields_pick_the_layer():
    s = coated_sphere([60, 80], 600.0, [2.1, GOLD], 1.33)
    points = np.array([[0, 0, 10.0], [0, 35.0, 0], [50.0, 0, 0]])
    e, _ = s.fields(points)
    for layer in range(3):
        assert np.allclose(e[layer], s.layer_fields(points[layer : layer + 1], layer)[0][0])


def test_bad_layers_are_refused():
    with pytest.raises(ValueError, match="grow"):
        coated_sphere([80, 60], 600.0, [2.1, GOLD])
    with pytest.raises(ValueError, match="as many"):
        coated_sphere([80], 600.0, [2.1, GOLD])
