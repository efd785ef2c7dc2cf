"""Rotations and reflections of vector spherical waves (Wigner D-matrices)."""

from __future__ import annotations

from functools import lru_cache

import numpy as np

from .vector_waves import ELECTRIC, MAGNETIC, real_to_complex


def rotation_matrix(order: int, matrix: np.ndarray) -> np.ndarray:
    """Matrix that rotates amplitudes of complex vector waves.

    Parameters
    ----------
    order : int
        Highest order N.
    matrix : array_like, shape (3, 3)
        Orthogonal; with determinant -1 it also reflects.

    Returns
    -------
    ndarray of complex, shape (2 N (N+2),) * 2
        Unitary D: the field sum a_l W_l turned by the matrix R, ``R F(R^-1 r)``, is
        sum (D a)_l W_l. The T-matrix of a turned particle is ``D T D^H``.

    Notes
    -----
    ``D^n = exp(-i alpha J_z) exp(-i beta J_y) exp(-i gamma J_z)`` for R = Rz(alpha) Ry(beta)
    Rz(gamma), with the exponential of J_y from its eigenvectors, which is stable for every order.

    Examples
    --------
    >>> import numpy as np
    >>> turn = np.array([[0.0, -1, 0], [1, 0, 0], [0, 0, 1]])  # 90 degrees about z
    >>> d = rotation_matrix(1, turn)
    >>> np.round(np.diag(d)[:3], 12)  # exp(-i m pi/2) at m = -1, 0, 1
    array([0.+1.j, 1.+0.j, 0.-1.j])
    """
    r = np.asarray(matrix, float)
    if r.shape != (3, 3) or not np.allclose(r @ r.T, np.eye(3), atol=1e-9):
        raise ValueError("a rotation needs an orthogonal 3x3 matrix")
    proper = np.linalg.det(r) > 0
    alpha, beta, gamma = euler_angles(r if proper else -r)
    count = order * (order + 2)
    out = np.zeros((2 * count, 2 * count), complex)
    for n in range(1, order + 1):
        m = np.arange(-n, n + 1)
        values, vectors = _turning(n)
        block = (vectors * np.exp(-1j * beta * values)) @ vectors.conj().T
        block = np.exp(-1j * alpha * m)[:, None] * block * np.exp(-1j * gamma * m)
        # Inversion turns F(r) into -F(-r): N_n has the parity (-1)^n of Y_n, its curl the other.
        signs = (1, 1) if proper else (-((-1) ** n), (-1) ** n)
        for kind, sign in zip((MAGNETIC, ELECTRIC), signs, strict=True):
            part = slice(kind * count + n * n - 1, kind * count + (n + 1) ** 2 - 1)
            out[part, part] = sign * block
    return out


def real_rotation_matrix(order: int, matrix: np.ndarray) -> np.ndarray:
    """The same between amplitudes of real waves: real and orthogonal."""
    u = real_to_complex(order)
    turned = u.T @ rotation_matrix(order, matrix)
    return np.ascontiguousarray((turned @ u.conj()).real)


def euler_angles(matrix: np.ndarray) -> tuple[float, float, float]:
    """alpha, beta, gamma with R = Rz(alpha) Ry(beta) Rz(gamma), radians."""
    r = np.asarray(matrix, float)
    beta = float(np.arctan2(np.hypot(r[2, 0], r[2, 1]), r[2, 2]))
    if np.sin(beta) > 1e-9:
        alpha, gamma = np.arctan2(r[1, 2], r[0, 2]), np.arctan2(r[2, 1], -r[2, 0])
    else:  # only alpha + gamma (or alpha - gamma) is determined
        alpha, gamma = np.arctan2(r[1, 0], r[1, 1]), 0.0
    return float(alpha), beta, float(gamma)


def turn_to(direction: np.ndarray) -> np.ndarray:
    """A rotation that takes the z axis to a direction, shape (3, 3)."""
    u = np.asarray(direction, float) / np.linalg.norm(direction)
    cosine, sine = u[2], np.hypot(u[0], u[1])
    c, s = (u[0] / sine, u[1] / sine) if sine > 0 else (1.0, 0.0)
    return np.array([[c * cosine, -s, u[0]], [s * cosine, c, u[1]], [-sine, 0, cosine]])


@lru_cache(maxsize=128)
def _turning(n: int) -> tuple[np.ndarray, np.ndarray]:
    """Eigenvalues and eigenvectors of J_y in the states m = -n..n."""
    m = np.arange(-n, n)
    up = np.diag(np.sqrt((n - m) * (n + m + 1.0)), -1)
    values, vectors = np.linalg.eigh((up - up.T) / 2j)
    return np.round(values), vectors
