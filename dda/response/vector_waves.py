"""Vector spherical waves at the cells, in directions, and as coefficients of a plane wave.

With Y_nm the orthonormal spherical harmonics (Condon-Shortley phase) and z_n a spherical Bessel
function, ``M_nm = curl(r z_n Y_nm) / sqrt(n(n+1))`` and ``N_nm = curl M_nm / k`` (Jackson 1999,
section 9.7, up to a factor i). Regular waves have z = j, outgoing ones z = h^(1); outgoing
amplitudes f scatter ``C_sca = sum |f|^2 / k^2``.

Every Cartesian component of M_nm is a sum of the scalar waves z_n Y_nm' with fixed numbers, and so
is every one of N_nm with those of orders n-1 and n+1. The waves are therefore the scalar ones
times a constant matrix, which has no trouble at the origin or on the axis, and fields and moments
of cells are matrix products.

The solver works in *real waves*: cos(m phi) and sin(m phi) instead of exp(i m phi). Regular ones
are real fields, even or odd in every coordinate plane, and the T-matrix between them is symmetric.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numba import njit
from scipy.sparse import block_diag, csr_array, diags_array, hstack, lil_array

MAGNETIC, ELECTRIC = 0, 1  # the two kinds: M waves and N waves


def wave_count(order: int) -> int:
    """Number of vector waves up to an order, both kinds: ``2 N (N + 2)``."""
    return 2 * order * (order + 2)


def wave_labels(order: int) -> np.ndarray:
    """Kind (0 for M, 1 for N), order n and degree m of every wave, shape (2 N (N+2), 3).

    This is the order of rows and columns of T-matrices: kind first, then n, then m = -n..n. For
    real waves m > 0 stands for cos(m phi) and m < 0 for sin(abs(m) phi).

    Examples
    --------
    >>> wave_labels(1).tolist()
    [[0, 1, -1], [0, 1, 0], [0, 1, 1], [1, 1, -1], [1, 1, 0], [1, 1, 1]]
    """
    rows = [(n, m) for n in range(1, order + 1) for m in range(-n, n + 1)]
    return np.array([(kind, n, m) for kind in (MAGNETIC, ELECTRIC) for n, m in rows], int)


def regular_waves(order: int, positions: np.ndarray, k: float) -> np.ndarray:
    """Regular real waves at positions.

    Parameters
    ----------
    order : int
        Highest order N.
    positions : ndarray, shape (n, 3)
        nm, relative to the centre of the waves.
    k : float
        Wave number, 1/nm.

    Returns
    -------
    ndarray, shape (n, 3, 2 N (N+2))

    Examples
    --------
    >>> import numpy as np
    >>> waves = regular_waves(1, np.zeros((1, 3)), k=0.01)
    >>> np.round(waves[0, :, 3:] * np.sqrt(6 * np.pi), 12)  # electric dipoles: y, z and x
    array([[0., 0., 1.],
           [1., 0., 0.],
           [0., 1., 0.]])
    """
    scalar = scalar_waves(order + 1, positions, k)
    return np.stack([scalar @ numbers for numbers in real_numbers(order)], axis=1)


def fields_of(coefficients: np.ndarray, positions: np.ndarray, k: float) -> np.ndarray:
    """Sums of regular real waves at positions.

    Parameters
    ----------
    coefficients : ndarray, shape (c, 2 N (N+2))
        Of c fields.
    positions : ndarray, shape (n, 3)
        nm, relative to the centre of the waves.
    k : float

    Returns
    -------
    ndarray, shape (c, n, 3)
    """
    order = order_of(coefficients.shape[1])
    numbers = np.stack([n @ coefficients.T for n in real_numbers(order)], axis=2)
    flat = numbers.reshape(len(numbers), -1)
    out = np.empty((len(positions), *numbers.shape[1:]), flat.dtype)
    for part in _parts(len(positions)):
        scalar = scalar_waves(order + 1, positions[part], k)
        out[part] = (scalar @ flat).reshape(-1, *numbers.shape[1:])
    return out.transpose(1, 0, 2)


def moments_of(vectors: np.ndarray, positions: np.ndarray, k: float, order: int) -> np.ndarray:
    """Sums over positions of the regular real waves times vectors (no conjugate).

    Parameters
    ----------
    vectors : ndarray, shape (c, n, 3)
    positions : ndarray, shape (n, 3)
    k : float
    order : int

    Returns
    -------
    ndarray, shape (c, 2 N (N+2))
    """
    count = len(vectors)
    total = np.zeros(((order + 2) ** 2, count * 3), vectors.dtype)
    for part in _parts(len(positions)):
        scalar = scalar_waves(order + 1, positions[part], k)
        total += scalar.T @ vectors[:, part].transpose(1, 0, 2).reshape(-1, count * 3)
    total = total.reshape(-1, count, 3)
    return sum((n.T @ total[:, :, a]).T for a, n in enumerate(real_numbers(order)))


def spectra(order: int, directions: np.ndarray) -> np.ndarray:
    """Plane-wave spectra A_l of the complex waves: ``W_l(r) = int A_l(u) exp(ik u.r) du / 4 pi``.

    They are orthonormal on the sphere. A plane wave e exp(ik u.r) holds the regular waves
    ``4 pi conj(A_l(u)).e``; outgoing waves f radiate ``F(u) = -(i/k) sum f_l A_l(u)``.

    Parameters
    ----------
    order : int
    directions : ndarray, shape (d, 3)
        Unit vectors u.

    Returns
    -------
    ndarray of complex, shape (d, 3, 2 N (N+2))
    """
    angular = real_harmonics(order + 1, np.atleast_2d(np.asarray(directions, float)))
    q = np.repeat(np.arange(order + 2), 2 * np.arange(order + 2) + 1)
    turned = angular * (-1j) ** q
    change = real_to_complex(order).T
    return np.stack([(turned @ n) @ change for n in real_numbers(order)], axis=1)


def plane_wave_coefficients(order: int, direction, polarization) -> np.ndarray:
    """Amplitudes of the complex regular waves in a plane wave of unit amplitude.

    Parameters
    ----------
    order : int
    direction, polarization : array_like, shape (3,)
        Unit vectors; the polarization may be complex.

    Returns
    -------
    ndarray of complex, shape (2 N (N+2),)
    """
    spectrum = spectra(order, np.asarray(direction, float)[None])[0]
    return 4 * np.pi * (np.asarray(polarization, complex) @ spectrum.conj())


def order_of(count: int) -> int:
    """Highest order of a set of `count` waves."""
    order = round(np.sqrt(count / 2 + 1) - 1)
    if wave_count(order) != count:
        raise ValueError(f"{count} is not a number of vector waves 2 N (N + 2)")
    return order


def first_order(size_parameter: float) -> int:
    """Highest order that matters for a body of circumscribed size parameter k r, a first guess.

    Wiscombe (1980), Appl. Opt. 19, 1505: ``x + 4 x^(1/3)`` less a margin, because the fields
    of interest here are the far ones at the accuracy of a discretization.
    """
    x = size_parameter
    return max(1, int(np.ceil(x + 1.5 * x ** (1 / 3) - 0.3)))


# -- the constant matrix -----------------------------------------------------------------------


@lru_cache(maxsize=32)
def real_numbers(order: int) -> tuple[csr_array, csr_array, csr_array]:
    """x, y, z components of the real waves in real scalar waves, ((N+2)^2, 2 N (N+2)) each."""
    scalar = _real_in_complex(order + 1, start=0)
    change = _real_in_complex(order, start=1)
    vector = block_diag([change, change], format="csr").conj()
    out = []
    for numbers in complex_numbers(order):
        real = scalar.T @ numbers @ vector
        assert abs(real.imag).max() < 1e-12
        out.append(csr_array(real.real))
    return out[0], out[1], out[2]


@lru_cache(maxsize=32)
def real_to_complex(order: int) -> csr_array:
    """Unitary U with ``complex wave_l = sum_r U[l, r] real wave_r``, shape (2 N(N+2),) * 2.

    Amplitudes a of complex waves are ``U.T a`` in real ones; a matrix T between amplitudes of real
    waves is ``conj(U) T U.T`` between those of complex ones.
    """
    block = _real_in_complex(order, start=1)
    return csr_array(block_diag([block, block], format="csr"))


@lru_cache(maxsize=32)
def complex_numbers(order: int) -> tuple[csr_array, csr_array, csr_array]:
    """x, y, z components of the vector waves in the scalar waves z_q Y_qs."""
    n = np.repeat(np.arange(1, order + 1), 2 * np.arange(1, order + 1) + 1)
    columns = slice(1, (order + 1) ** 2)
    scale = diags_array(-1j / np.sqrt(n * (n + 1.0)))
    # M = -i L psi / sqrt(n(n+1)), N = curl M / k
    magnetic = [csr_array(lift[:, columns] @ scale) for lift in _angular_momentum(order + 1)]
    slope = gradients(order + 1)
    out = []
    for a in range(3):
        b, c = (a + 1) % 3, (a + 2) % 3
        electric = slope[b] @ magnetic[c] - slope[c] @ magnetic[b]
        out.append(csr_array(hstack([magnetic[a], electric])))
    return out[0], out[1], out[2]


def _real_in_complex(order: int, start: int) -> csr_array:
    """Y_nm in real harmonics, n = start..order."""
    size = (order + 1) ** 2 - start**2
    out = lil_array((size, size), dtype=complex)
    half = np.sqrt(0.5)
    for n in range(start, order + 1):
        middle = n * (n + 1) - start**2
        out[middle, middle] = 1
        for m in range(1, n + 1):
            sign = (-1) ** m
            out[middle + m, middle + m], out[middle + m, middle - m] = sign * half, 1j * sign * half
            out[middle - m, middle + m], out[middle - m, middle - m] = half, -1j * half
    return csr_array(out)


def _angular_momentum(order: int) -> tuple[csr_array, csr_array, csr_array]:
    """L on scalar waves up to an order."""
    q = np.arange(order + 1)
    n = np.repeat(q, 2 * q + 1)
    m = np.arange(len(n)) - n * (n + 1)
    up = diags_array(np.sqrt((n - m) * (n + m + 1.0))[:-1], offsets=-1)
    return (
        csr_array((up + up.T) / 2),
        csr_array((up - up.T) / 2j),
        csr_array(diags_array(m.astype(float))),
    )


def gradients(order: int) -> tuple[csr_array, csr_array, csr_array]:
    """Derivatives along x, y, z of scalar waves up to an order, in units of k.

    Edmonds (1957), section 5.7; parts of higher order are left out.
    """
    size = (order + 1) ** 2
    plus, minus, z = (lil_array((size, size), dtype=complex) for _ in range(3))
    for n in range(order + 1):
        below, above = (2 * n - 1) * (2 * n + 1), (2 * n + 1) * (2 * n + 3)
        for m in range(-n, n + 1):
            here = n * (n + 1) + m
            lower, upper = (n - 1) * n + m, (n + 1) * (n + 2) + m
            if abs(m) < n:
                z[lower, here] = np.sqrt((n * n - m * m) / below)
            if m + 1 <= n - 1:
                plus[lower + 1, here] = np.sqrt((n - m) * (n - m - 1) / below)
            if m - 1 >= -(n - 1):
                minus[lower - 1, here] = -np.sqrt((n + m) * (n + m - 1) / below)
            if n < order:
                z[upper, here] = -np.sqrt(((n + 1) ** 2 - m * m) / above)
                plus[upper + 1, here] = np.sqrt((n + m + 1) * (n + m + 2) / above)
                minus[upper - 1, here] = -np.sqrt((n - m + 1) * (n - m + 2) / above)
    return csr_array((plus + minus) / 2), csr_array((plus - minus) / 2j), csr_array(z)


# -- scalar waves ------------------------------------------------------------------------------


def scalar_waves(order: int, positions: np.ndarray, k: float) -> np.ndarray:
    """``j_q(kr)`` times the real harmonics, q = 0..order, shape (n, (order+1)^2)."""
    positions = np.ascontiguousarray(positions, float)
    out = np.empty((len(positions), (order + 1) ** 2))
    _scalar_waves(order, positions, k, out)
    return out


def real_harmonics(order: int, directions: np.ndarray) -> np.ndarray:
    """Real spherical harmonics, sqrt(2) P cos(m phi) at m > 0, shape (d, (order+1)^2)."""
    directions = np.ascontiguousarray(directions, float)
    out = np.empty((len(directions), (order + 1) ** 2))
    _harmonics_of(order, directions, out)
    return out


def _parts(n: int, size: int = 8192) -> list[slice]:
    """Slices that keep the scalar waves of some cells in cache."""
    return [slice(start, min(n, start + size)) for start in range(0, n, size)]


@njit(nogil=True, cache=True)
def _scalar_waves(order, positions, k, out):  # pragma: no cover - compiled
    bessel = np.empty(order + 1)
    for i in range(len(positions)):
        x, y, z = positions[i, 0], positions[i, 1], positions[i, 2]
        r = np.sqrt(x * x + y * y + z * z)
        if r > 0:
            _harmonics(order, x / r, y / r, z / r, out[i])
        else:
            _harmonics(order, 0.0, 0.0, 1.0, out[i])
        _bessel(order, k * r, bessel)
        for n in range(order + 1):
            for s in range(n * n, (n + 1) * (n + 1)):
                out[i, s] *= bessel[n]


@njit(nogil=True, cache=True)
def _harmonics_of(order, directions, out):  # pragma: no cover - compiled
    for i in range(len(directions)):
        _harmonics(order, directions[i, 0], directions[i, 1], directions[i, 2], out[i])


@njit(nogil=True, cache=True)
def _harmonics(order, x, y, z, out):  # pragma: no cover - compiled
    """All real harmonics of one direction; sin(theta)^m exp(i m phi) = (x + iy)^m."""
    cosine, sine = 1.0, 0.0  # of m phi, times sin(theta)^m
    start = np.sqrt(1 / (4 * np.pi))
    for m in range(order + 1):
        if m:
            cosine, sine = cosine * x - sine * y, cosine * y + sine * x
            start *= np.sqrt((2 * m + 1) / (2 * m))
        scale = np.sqrt(2.0) if m else 1.0
        before, now = 0.0, start
        for n in range(m, order + 1):
            middle = n * (n + 1)
            out[middle + m] = scale * now * cosine
            if m:
                out[middle - m] = scale * now * sine
            up = np.sqrt((4.0 * (n + 1) ** 2 - 1) / ((n + 1) ** 2 - m * m))
            down = np.sqrt((n * n - m * m) / (4.0 * n * n - 1)) if n > m else 0.0
            before, now = now, up * (z * now - down * before)


@njit(nogil=True, cache=True)
def _bessel(order, x, out):  # pragma: no cover - compiled
    """Spherical Bessel functions j_0..j_order, downward from where the start is forgotten."""
    if x < 1e-8:
        out[0] = 1.0
        for n in range(1, order + 1):
            out[n] = out[n - 1] * x / (2 * n + 1)
        return
    start = int(max(float(order), x) + 4 * x ** (1 / 3) + 20)
    above, here = 0.0, 1e-280
    for n in range(start, 0, -1):
        above, here = here, (2 * n + 1) / x * here - above
        if n - 1 <= order:
            out[n - 1] = here
        if abs(here) > 1e250:
            above *= 1e-250
            here *= 1e-250
            for m in range(n - 1, order + 1):
                out[m] *= 1e-250
    # Scale by the larger of j_0 and j_1: one of them may be at a zero.
    zeroth = np.sin(x) / x
    first = zeroth / x - np.cos(x) / x
    if order == 0 or abs(zeroth) >= abs(first):
        scale = zeroth / out[0]
    else:
        scale = first / out[1]
    for n in range(order + 1):
        out[n] *= scale
