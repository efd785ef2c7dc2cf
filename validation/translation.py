"""Outgoing vector spherical waves about one centre as regular waves about another on the z axis.

The translation theorem (Cruzan 1962; Mackowski 1991).  Instead of recurrences or 3j symbols the
angular integrals are done by Gauss quadrature, exact here because the integrands are polynomials:
a wave is a superposition of plane waves with the weight X_nm, the shift multiplies each plane wave
by a phase, and the phase is expanded in Legendre polynomials times spherical Bessel functions;
replacing those by Hankel functions turns regular waves into outgoing ones.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from scipy.special import eval_legendre

from validation.riccati import riccati
from validation.vector_waves import angular_parts


def axial_translations(
    order: int, highest: int, distances: list[tuple[float, float, float]]
) -> Iterator[tuple[int, list[np.ndarray]]]:
    """Scaled translation matrices along z, which keep the degree m.

    Parameters
    ----------
    order : int
        Highest order N of both expansions.
    highest : int
        Degrees m = -highest..highest are wanted.
    distances : list of (kd, x_to, x_from)
        kd: signed wavenumber times distance, from the outgoing waves' centre to the regular waves';
        x_to, x_from: the size parameters by which the waves are scaled, see below.

    Yields
    ------
    m : int
    list of (2, N+1, 2, N+1) complex ndarrays
        S[i, nu, j, n], kinds 0 for M and 1 for N: the outgoing wave (j, n) in units of
        (2n-1)!!/x_from**n holds the regular wave (i, nu) in units of (2nu+1)!!/x_to**(nu+1), with
        which every element is of order one and nothing overflows.  Valid nearer to the new centre
        than the old one is.
    """
    n, q = np.arange(order + 1), np.arange(2 * order + 1)
    # The integrals vanish outside the triangle |nu - n| <= q <= nu + n and for one parity of the
    # sum; what rounding leaves there would be multiplied by huge Hankel functions.
    total, gap = (n[:, None] + n)[..., None], np.abs(n[:, None] - n)[..., None]
    triangle = (q <= total) & (q >= gap)
    even = (total + q) % 2 == 0
    steps = []
    for kd, x_to, x_from in distances:
        hankel = 2 * np.pi * (2 * q + 1) * 1j ** (q % 4) * np.sign(kd) ** q
        hankel = hankel * riccati(2 * order, abs(kd)).small_xi
        steps.append(hankel * triangle * np.exp(_log_sizes(order, abs(kd), x_to, x_from)))
    turn = 1j ** ((n[:, None] - n) % 4)

    cosine, weight = np.polynomial.legendre.leggauss(2 * order + 2)
    polynomials = weight * eval_legendre(q[:, None], cosine)
    for m in range(highest + 1):
        same, other = _integrals(order, m, cosine, polynomials)
        same, other = same * even, other * ~even
        keeps = [turn * np.einsum("abq,abq->ab", same, step) for step in steps]
        # i^(nu-1-n) times the i of conj(z).x
        swaps = [turn * np.einsum("abq,abq->ab", other, step) for step in steps]
        yield m, [_matrix(a, b) for a, b in zip(keeps, swaps, strict=True)]
        if m:
            yield -m, [_matrix(a, -b) for a, b in zip(keeps, swaps, strict=True)]


def _integrals(
    order: int, m: int, cosine: np.ndarray, polynomials: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Integrals over cos(theta) of conj(x_nu).x_n P_q and conj(z_nu).x_n P_q / i; (nu, n, q)."""
    x, z, _ = angular_parts(order, m, cosine)
    size = order + 1
    same = np.einsum("apc,bpc->abp", x.conj(), x).real.reshape(size * size, -1)
    other = np.einsum("apc,bpc->abp", z.conj(), x).imag.reshape(size * size, -1)
    return (
        (same @ polynomials.T).reshape(size, size, -1),
        (other @ polynomials.T).reshape(size, size, -1),
    )


def _matrix(keep: np.ndarray, swap: np.ndarray) -> np.ndarray:
    """M to M and N to N are `keep`, M to N and N to M are `swap`."""
    matrix = np.empty((2, len(keep), 2, len(keep)), dtype=complex)
    matrix[0, :, 0], matrix[1, :, 1] = keep, keep
    matrix[1, :, 0], matrix[0, :, 1] = swap, swap
    return matrix


def log_double_factorials(order: int) -> np.ndarray:
    """log (2n-1)!! for n = 0..order."""
    n = np.arange(1, order + 1)
    return np.concatenate([[0.0], np.cumsum(np.log(2.0 * n - 1))])


def _log_sizes(order: int, kd: float, x_to: float, x_from: float) -> np.ndarray:
    """log of x_to^(nu+1)/(2nu+1)!! * (2q-1)!!/kd^(q+1) / ((2n-1)!!/x_from^n); (nu, n, q)."""
    n, q = np.arange(order + 1), np.arange(2 * order + 1)
    odd = log_double_factorials(2 * order + 1)
    regular = (n + 1) * np.log(x_to) - odd[n + 1]
    hankel = odd[q] - (q + 1) * np.log(kd)
    outgoing = n * np.log(x_from) - odd[n]
    sizes = regular[:, None, None] + outgoing[None, :, None] + hankel
    # Far outside the triangle the logarithm can be large where the integral is zero.
    return np.where(q <= n[:, None, None] + n[None, :, None], sizes, 0.0)
