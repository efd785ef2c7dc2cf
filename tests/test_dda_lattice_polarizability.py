"""Polarizabilities against their published formulas, energy, and tensors of surface cells."""

import numpy as np
import pytest

from dda.lattice.polarizability import CellTensor, inverse_polarizability, uniaxial

D, K = 3.0, 0.05  # nm, 1/nm
X = K * D


def static(eps):
    """Clausius-Mossotti polarizability of a cell, nm^3."""
    return 3 * D**3 / (4 * np.pi) * (eps - 1) / (eps + 2)


@pytest.mark.parametrize("kind", ["fcd", "ldr", "rr"])
@pytest.mark.parametrize("eps", [2.25, 12.0, -15 + 1.2j, -2.5 + 0.1j])
def test_small_cells_are_clausius_mossotti(kind, eps):
    """The corrections are of order (kd)^2 = 1e-8 here, times eps for the LDR."""
    inverse = inverse_polarizability(np.array([eps]), kind, 1e-4 / D, D, s_factor=0.0)
    assert inverse[0] * static(eps) == pytest.approx(1, abs=1e-6)


def test_radiative_reaction_by_its_own_formula():
    """alpha = alpha_CM / (1 - (2/3) i k^3 alpha_CM) (Draine 1988)."""
    eps = np.array([-9.4 + 1.4j, 2.0 + 0j])
    alpha = static(eps) / (1 - 2j / 3 * K**3 * static(eps))
    assert 1 / inverse_polarizability(eps, "rr", K, D) == pytest.approx(alpha, rel=1e-13)


def test_lattice_dispersion_relation_by_its_own_formula():
    """Draine & Goodman (1993): alpha_CM / (1 + (alpha_CM/d^3)[(b1 + m^2 b2 + m^2 b3 S)(kd)^2
    - (2/3) i (kd)^3]), with b1, b2, b3 from memory."""
    m2, s = (1.7 + 0.1j) ** 2, 0.25
    bracket = (-1.891531 + m2 * 0.1648469 - m2 * 1.7700004 * s) * X**2 - 2j / 3 * X**3
    alpha = static(m2) / (1 + static(m2) / D**3 * bracket)
    ours = 1 / inverse_polarizability(np.array([m2]), "ldr", K, D, s_factor=s)
    assert ours[0] == pytest.approx(alpha, rel=1e-13)


def test_filtered_dipoles_by_the_integral_of_the_filtered_tensor():
    """M = (4/3)(kd)^2 + (2/3)[i + ln((pi - kd)/(pi + kd))/pi](kd)^3 is d^3 times the filtered
    tensor at its own place beyond the static part: k^2 (2/3) d^3 (2/pi) int q^2/(q^2 - k^2) dq."""
    cut = np.pi / D
    principal = cut + K / 2 * np.log((cut - K) / (cut + K))
    self_field = 2 / 3 * K**2 * D**3 * (2 / np.pi * principal + 1j * K)
    eps = np.array([-12.9 + 0.8j])
    ours = inverse_polarizability(eps, "fcd", K, D)
    assert (1 / static(eps) - ours) * D**3 == pytest.approx(self_field, rel=1e-12)


@pytest.mark.parametrize("kind", ["fcd", "fcd-corners", "ldr", "rr"])
def test_lossless_cells_lose_by_radiation_alone(kind):
    """Im(alpha^-1) = -(2/3) k^3 where eps is real (optical theorem of a dipole)."""
    eps = np.array([1.3, 2.25, 12.0, -5.0], complex)
    inverse = inverse_polarizability(eps, kind, K, D, s_factor=0.1)
    assert inverse.imag == pytest.approx(-2 / 3 * K**3, rel=1e-9)


def test_absorbing_cells_lose_more():
    inverse = inverse_polarizability(np.array([-5 + 1j, 2 + 0.1j]), "fcd", K, D)
    assert np.all(inverse.imag < -2 / 3 * K**3)


def test_bad_arguments_are_refused():
    with pytest.raises(ValueError, match="fcd, ldr, rr"):
        inverse_polarizability(np.array([2.0]), "other", K, D)
    with pytest.raises(ValueError, match="s_factor"):
        inverse_polarizability(np.array([2.0]), "ldr", K, D)


def some_tensors(n=12, seed=3):
    """Isotropic values with full tensors at a few cells, and the dense matrices."""
    generator = np.random.default_rng(seed)
    scalar = generator.normal(size=(n, 2)) @ [1, 1j]
    where = np.array([1, 4, 5, n - 1])
    values = generator.normal(size=(2, 4, 2)) @ [1, 1j]
    normal = generator.normal(size=(4, 3))
    normal /= np.linalg.norm(normal, axis=1)[:, None]
    full = uniaxial(values[0], values[1], normal)
    matrices = scalar[:, None, None] * np.eye(3)
    for i, t, v, u in zip(where, *values, normal, strict=True):
        matrices[i] = t * (np.eye(3) - np.outer(u, u)) + v * np.outer(u, u)
    return CellTensor(scalar, where, full), matrices


def test_tensors_of_surface_cells():
    tensors, matrices = some_tensors()
    v = np.random.default_rng(4).normal(size=(12, 3, 2)) @ [1, 1j]
    ours = tensors.apply(v, np.empty_like(v))
    assert ours == pytest.approx(np.einsum("nab,nb->na", matrices, v), rel=1e-12)
    back = tensors.inverse().apply(ours, np.empty_like(ours))
    assert back == pytest.approx(v, rel=1e-10)  # the matrices are well conditioned


def test_tensors_in_single_precision():
    tensors, _ = some_tensors()
    single = tensors.astype(np.complex64)
    assert single.full.dtype == single.scalar.dtype == np.complex64
    assert single.nbytes < 0.6 * tensors.nbytes
