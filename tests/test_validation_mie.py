"""The Mie series against published values, a library, limits and its own boundary conditions."""

import miepython
import numpy as np
import pytest
import scipy.special

from validation.mie import relative_index, sphere
from validation.riccati import riccati

INDICES = [1.33, 1.5 + 0.01j, 4 + 0.03j, 0.2 + 3j, 0.05 + 2.1j, 1.1 + 2.5j, 0.04 + 1.4142j, 5 + 5j]
# Johnson & Christy (1972), rounded, from memory: gold 530 and 785 nm, silver 400 nm, copper 600 nm.
METALS = [
    (80, 530, -4.7 + 2.4j),
    (80, 785, -22.5 + 1.4j),
    (40, 400, -4.4 + 0.2j),
    (100, 600, -12 + 1.5j),
]


@pytest.mark.parametrize(
    "z", [0.001, 0.1, np.pi, 5.0, 30.0, 0.3 + 2j, 5 + 5j, 20 + 40j, 40 + 1e-3j]
)
def test_riccati_bessel_against_library_functions(z):
    r = riccati(int(abs(z)) + 12, z)
    n = np.arange(len(r.psi))
    z = complex(z)
    h = z * np.sqrt(np.pi / 2 / z) * scipy.special.hankel1(n + 0.5, z)
    wronskian = r.psi * r.xi_prime - r.xi * r.psi_prime
    # 1e-12: the library's own error at abs(z) = 40.
    assert np.allclose(r.xi, h, rtol=1e-12, atol=0)
    assert np.allclose(wronskian, 1j, rtol=0, atol=1e-12)
    if z != np.pi:  # psi_0(pi) is a zero
        j = z * scipy.special.spherical_jn(n, z)
        assert np.allclose(r.psi, j, rtol=1e-12, atol=0)
        assert np.allclose(r.psi * r.d_psi, r.psi_prime, rtol=1e-12, atol=0)
        assert np.allclose(r.xi * r.d_xi, r.xi_prime, rtol=1e-12, atol=0)
        assert np.allclose(r.small_psi_prime, r.small_psi * r.d_psi, rtol=1e-11, atol=0)
        assert np.allclose(r.small_xi_prime, r.small_xi * r.d_xi, rtol=1e-11, atol=0)


def test_published_value():
    """Bohren & Huffman (1983), appendix A: x = 3, m = 1.33 + 1e-8 i gives Q_ext = 1.7534."""
    s = sphere(3 / np.pi, 1.0, (1.33 + 1e-8j) ** 2)
    assert s.q_ext == pytest.approx(1.7534, abs=5e-5)


@pytest.mark.parametrize("m", INDICES)
@pytest.mark.parametrize("x", [0.1, 0.5, 1, 3, 10, 30])
def test_efficiencies_against_library(x, m):
    s = sphere(x / np.pi, 1.0, complex(m) ** 2)
    q_ext, q_sca, _, g = miepython.efficiencies_mx(np.conj(m), x)
    # The library ends its series at a relative size of about 1e-9; 1e-8 is the aim.
    assert [s.q_ext, s.q_sca, s.asymmetry] == pytest.approx([q_ext, q_sca, g], rel=1e-8)


@pytest.mark.parametrize(("diameter", "wavelength", "eps"), METALS)
def test_metals_in_water_against_library(diameter, wavelength, eps):
    s = sphere(diameter, wavelength, eps, 1.33)
    m, x = np.conj(np.sqrt(eps) / 1.33), np.pi * diameter * 1.33 / wavelength
    q_ext, q_sca, _, g = miepython.efficiencies_mx(m, x)
    area = np.pi * diameter**2 / 4
    expected = [q_ext * area, q_sca * area, (q_ext - q_sca) * area, g]
    assert [s.c_ext, s.c_sca, s.c_abs, s.asymmetry] == pytest.approx(expected, rel=1e-8)


def test_amplitudes_against_library_and_optical_theorem():
    m, x = 1.5 + 0.1j, 4.0
    s = sphere(x / np.pi, 1.0, m**2)
    theta = np.linspace(0, np.pi, 13)
    s1, s2 = s.amplitudes(theta)
    r1, r2 = miepython.S1_S2(np.conj(m), x, np.cos(theta), norm="wiscombe")
    assert np.allclose(s1, np.conj(r1), rtol=1e-8, atol=1e-9)
    assert np.allclose(s2, np.conj(r2), rtol=1e-8, atol=1e-9)
    assert s.c_ext == pytest.approx(4 * np.pi / s.k**2 * s1[0].real, rel=1e-13)


def test_rayleigh_limit():
    """alpha = a^3 (eps-1)/(eps+2); the next order is x^2 smaller."""
    s = sphere(0.1, 500.0, -5 + 2j, 1.33)
    eps = (-5 + 2j) / 1.33**2
    alpha = 0.05**3 * (eps - 1) / (eps + 2)
    assert s.c_abs == pytest.approx(4 * np.pi * s.k * alpha.imag, rel=10 * s.x**2)
    assert s.c_sca == pytest.approx(8 * np.pi / 3 * s.k**4 * abs(alpha) ** 2, rel=10 * s.x**2)


def test_lossless_sphere_absorbs_nothing():
    s = sphere(2.0, 500.0, 2.25, 1.33)
    assert abs(s.c_abs) < 1e-14 * s.c_ext


@pytest.mark.parametrize(
    ("diameter", "wavelength", "eps", "n_host"),
    [
        (80, 530, -5 + 2.3j, 1.33),
        (150, 400, 17 + 0.3j, 1.0),
        (10, 800, -25 + 1j, 1.33),
        (1500, 500, 2.25, 1),
    ],
)
def test_fields_are_continuous_at_the_surface(diameter, wavelength, eps, n_host):
    s = sphere(diameter, wavelength, eps, n_host)
    normal = _directions(60)
    points = normal * diameter / 2
    e_in, h_in = s.inner_fields(points)
    e_out, h_out = s.fields(points * (1 + 1e-14))
    scale = np.abs(e_out).max()
    assert np.abs(np.cross(normal, e_in - e_out)).max() < 1e-10 * scale
    jump = np.sum(normal * (eps * e_in - n_host**2 * e_out), axis=1)
    assert np.abs(jump).max() < 1e-10 * scale * n_host**2
    assert np.abs(h_in - h_out).max() < 1e-10 * np.abs(h_out).max()


@pytest.mark.parametrize("inside", [True, False])
def test_fields_obey_maxwells_curl_equations(inside):
    """curl E = i k H and curl H = -i k eps E (relative units), by central differences."""
    eps = -5 + 2.3j
    s = sphere(80.0, 530.0, eps, 1.33)
    points = _directions(5) * (25.0 if inside else 47.0)
    relative = eps / 1.33**2 if inside else 1.0
    e, h = s.fields(points)
    # Step 0.02 nm: truncation (0.02/25)^2, rounding 1e-12.
    assert np.allclose(_curl(s, points, 0), 1j * s.k * h, rtol=0, atol=2e-5 * s.k * np.abs(h).max())
    expected = -1j * s.k * relative * e
    assert np.allclose(_curl(s, points, 1), expected, rtol=0, atol=2e-5 * np.abs(expected).max())


def test_centre_field_of_a_small_sphere():
    """Electrostatics: 3/(eps+2) of the incident field, everywhere inside."""
    s = sphere(0.1, 500.0, -5 + 2j)
    e, _ = s.fields(np.array([[0, 0, 0], [0.01, 0.02, -0.03]]))
    assert np.allclose(e, [3 / (-3 + 2j), 0, 0], rtol=0, atol=10 * s.x)


def test_far_field_agrees_with_amplitudes():
    """E_s along x-z plane: S2 exp(ikr)/(-ikr) (Bohren & Huffman 1983, equation 3.12)."""
    s = sphere(120.0, 500.0, 4 + 1j)
    theta = np.array([0.3, 1.4, 2.8])
    distance = 1e7
    points = distance * np.stack([np.sin(theta), 0 * theta, np.cos(theta)], axis=1)
    e, _ = s.scattered_fields(points)
    along = np.stack([np.cos(theta), 0 * theta, -np.sin(theta)], axis=1)
    kr = s.k * distance
    got = np.sum(e * along, axis=1) * (-1j * kr) * np.exp(-1j * kr)
    assert np.allclose(
        got, s.amplitudes(theta)[1], rtol=1e-4
    )  # next order 1/(kr) = 8e-6, phase 1e-9


def test_gain_is_refused():
    with pytest.raises(ValueError, match="Im eps >= 0"):
        relative_index(2 - 0.1j, 1.0)


def _directions(count):
    v = np.random.default_rng(3).normal(size=(count, 3))
    return v / np.linalg.norm(v, axis=1)[:, None]


def _curl(s, points, which, step=0.02):
    slopes = []
    for axis in range(3):
        shift = step * np.eye(3)[axis]
        slopes.append(
            (s.fields(points + shift)[which] - s.fields(points - shift)[which]) / (2 * step)
        )
    d = np.array(slopes)  # axis, point, component
    return np.stack(
        [d[1, :, 2] - d[2, :, 1], d[2, :, 0] - d[0, :, 2], d[0, :, 1] - d[1, :, 0]], axis=1
    )
