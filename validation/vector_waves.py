"""Vector spherical waves of any degree, for the references without spherical symmetry.

With Y_nm the orthonormal spherical harmonics (Condon-Shortley phase) and z_n a spherical Bessel
function, M_nm = curl(r z_n Y_nm) / sqrt(n(n+1)) and N_nm = curl M_nm / k (Jackson 1999, section
9.7, up to a factor i).  Their angular parts X_nm and Z_nm = r_hat x X_nm have unit norm on the
sphere, so that outgoing amplitudes f scatter C_sca = sum |f|^2 / k^2.  Amplitudes of one degree m
are an array (2, N+1): row 0 for M, row 1 for N, column n for order n, zero below max(1, abs(m)).
"""

from __future__ import annotations

import numpy as np


def legendre(
    order: int, degree: int, cosine: np.ndarray
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Normalised Legendre functions and their relatives for one degree m.

    Parameters
    ----------
    order : int
        Highest order N >= 1.
    degree : int
        m, of either sign, abs(m) <= N.
    cosine : (P,) ndarray

    Returns
    -------
    p, pi, tau : (N+1, P) ndarrays
        P_nm with Y_nm = P_nm exp(i m phi); pi = m P_nm / sin(theta); tau = dP_nm / dtheta.  Rows
        below abs(m) are zero.
    """
    cosine = np.asarray(cosine, dtype=float)
    sine = np.sqrt((1 - cosine) * (1 + cosine))
    m = abs(degree)
    # q = P_nm / sin for m > 0, P_n0 for m = 0: regular on the axis.
    q = np.zeros((order + 2, *cosine.shape))
    start = np.full(cosine.shape, np.sqrt(1 / (4 * np.pi)))
    for j in range(1, m + 1):
        start = -start * np.sqrt((2 * j + 1) / (2 * j)) * (sine if j > 1 else 1)
    q[m] = start
    for n in range(m + 1, order + 2):
        up = np.sqrt((4 * n * n - 1) / (n * n - m * m))
        down = np.sqrt(((n - 1) ** 2 - m * m) / (4 * (n - 1) ** 2 - 1)) if n > m + 1 else 0.0
        q[n] = up * (cosine * q[n - 1] - (down * q[n - 2] if n > m + 1 else 0))
    orders = np.arange(order + 1)[:, None]
    if m == 0:
        p, pi = q[:-1], np.zeros_like(q[:-1])
        tau = np.sqrt(orders * (orders + 1)) * legendre(order, 1, cosine)[0]
        return p, pi, tau
    # sin dP/dtheta = n e_(n+1) P_(n+1) - (n+1) e_n P_(n-1), e_n = sqrt((n^2-m^2)/(4n^2-1))
    k = np.arange(order + 2)[:, None]
    e = np.sqrt(np.maximum(k**2 - m * m, 0) / np.maximum(4.0 * k**2 - 1, 1))
    below = np.concatenate([np.zeros_like(q[:1]), q[:-2]])
    tau = orders * e[1:] * q[1:] - (orders + 1) * e[:-1] * below
    tau[:m] = 0
    p, pi = q[:-1] * sine, m * q[:-1]
    if degree < 0:
        sign = (-1) ** m
        return sign * p, -sign * pi, sign * tau
    return p, pi, tau


def angular_parts(
    order: int, degree: int, cosine: np.ndarray
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Angular parts of the waves of one degree, without the factor exp(i m phi).

    Returns
    -------
    x, z : (N+1, P, 2) complex ndarrays
        theta and phi components of X_nm = (i pi, -tau) and Z_nm = (tau, i pi) over sqrt(n(n+1)).
    y : (N+1, P) ndarray
        sqrt(n(n+1)) P_nm: the radial component of N_nm is y z_n / rho.
    """
    p, pi, tau = legendre(order, degree, cosine)
    n = np.arange(order + 1)[:, None]
    norm = np.sqrt(n * (n + 1.0))
    inverse = np.where(n > 0, 1 / np.where(n > 0, norm, 1), 0)
    x = np.stack([1j * pi * inverse, -tau * inverse], axis=-1)
    z = np.stack([tau * inverse, 1j * pi * inverse], axis=-1)
    return x, z, norm * p


def plane_wave(
    order: int, degree: int, direction: np.ndarray, polarization: np.ndarray
) -> np.ndarray:
    """Amplitudes of the regular waves of one degree in a plane wave e0 exp(i k n.r), (2, N+1).

    p_nm = 4 pi i^n conj(X_nm(direction)).e0 for M, 4 pi i^(n-1) conj(Z_nm(direction)).e0 for N.

    Parameters
    ----------
    direction : (3,) ndarray
        Unit vector.
    polarization : (3,) complex ndarray
        e0, perpendicular to the direction.
    """
    frame, cosine, phi = spherical_frame(np.asarray(direction, dtype=float)[None])
    across = frame[0, 1:] @ np.asarray(polarization, dtype=complex)
    x, z, _ = angular_parts(order, degree, cosine)
    n = np.arange(order + 1)
    turn = 4 * np.pi * 1j**n * np.exp(-1j * degree * phi[0])
    return np.stack([turn * (x[:, 0].conj() @ across), turn / 1j * (z[:, 0].conj() @ across)])


def far_field(
    order: int, degree: int, directions: np.ndarray, amplitudes: np.ndarray
) -> np.ndarray:
    """Far field of outgoing waves of one degree, E r exp(-ikr) k, (P, 3) complex.

    Parameters
    ----------
    directions : (P, 3) ndarray
        Unit vectors.
    amplitudes : (2, N+1) complex ndarray
    """
    frame, cosine, phi = spherical_frame(directions)
    x, z, _ = angular_parts(order, degree, cosine)
    n = np.arange(order + 1)
    turn = (-1j) ** (n + 1)
    across = np.einsum("n,npc->pc", turn * amplitudes[0], x)
    across += np.einsum("n,npc->pc", 1j * turn * amplitudes[1], z)
    across *= np.exp(1j * degree * phi)[:, None]
    return np.einsum("pc,pck->pk", across, frame[:, 1:])


def spherical_frame(vectors: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Unit vectors r, theta, phi (P, 3, 3) at these places, cos(theta) (P,) and phi (P,).

    On the axis phi = 0 is taken.
    """
    vectors = np.asarray(vectors, dtype=float)
    radius = np.linalg.norm(vectors, axis=1)
    cylinder = np.hypot(vectors[:, 0], vectors[:, 1])
    cosine, sine = vectors[:, 2] / radius, cylinder / radius
    phi = np.arctan2(vectors[:, 1], vectors[:, 0])
    c, s, zero = np.cos(phi), np.sin(phi), np.zeros_like(phi)
    frame = np.stack(
        [
            np.stack([sine * c, sine * s, cosine], axis=-1),
            np.stack([cosine * c, cosine * s, -sine], axis=-1),
            np.stack([-s, c, zero], axis=-1),
        ],
        axis=1,
    )
    return frame, cosine, phi


def wave_fields(
    degree: int,
    points: np.ndarray,
    radial: np.ndarray,
    slope: np.ndarray,
    rho: np.ndarray,
    amplitudes: np.ndarray,
) -> tuple[np.ndarray, np.ndarray]:
    """Sum of waves of one degree and the same sum with M and N exchanged (its curl over k).

    Parameters
    ----------
    points : (P, 3) ndarray
        Relative to the centre of the waves, not the centre itself.
    radial, slope : (N+1, P) complex ndarrays
        z_n(rho) and (rho z_n(rho))' / rho.
    rho : (P,) complex ndarray
        Wavenumber times distance.
    amplitudes : (2, N+1) complex ndarray

    Returns
    -------
    field, curl : (P, 3) complex ndarrays
    """
    frame, cosine, phi = spherical_frame(points)
    x, z, y = angular_parts(len(radial) - 1, degree, cosine)
    sums = []
    for m, n in (amplitudes, amplitudes[::-1]):
        across = np.einsum("n,np,npc->pc", m, radial, x) + np.einsum("n,np,npc->pc", n, slope, z)
        along = np.einsum("n,np,np->p", n, radial, y) / rho
        local = np.concatenate([along[:, None], across], axis=1)
        local *= np.exp(1j * degree * phi)[:, None]
        sums.append(np.einsum("pc,pck->pk", local, frame))
    return sums[0], sums[1]
