"""Clebsch-Gordan coefficients, and T-matrices taken apart into irreducible tensors."""

from __future__ import annotations

from functools import lru_cache

import numpy as np


@lru_cache(maxsize=2048)
def clebsch_gordan(first: int, second: int) -> np.ndarray:
    """Coefficients ``<j1 m1 j2 m2 | L, m1 + m2>`` of two integer angular momenta.

    Parameters
    ----------
    first, second : int
        j1 and j2.

    Returns
    -------
    ndarray, shape (2 j1 + 1, 2 j2 + 1, 2 min + 1)
        Rows m1 = -j1..j1, columns m2 = -j2..j2, last axis L = abs(j1 - j2)..j1 + j2; zero where
        abs(m1 + m2) > L. Condon-Shortley phases.

    Notes
    -----
    For a given m1 + m2 the square of the total angular momentum is a tridiagonal matrix; its
    eigenvectors are the coefficients, with the sign that makes the one of the largest m1 positive.

    Examples
    --------
    >>> round(float(clebsch_gordan(1, 1)[2, 0, 2]) ** 2, 12)  # <1 1 1 -1 | 2 0>^2
    0.166666666667
    """
    j1, j2 = first, second
    low = abs(j1 - j2)
    out = np.zeros((2 * j1 + 1, 2 * j2 + 1, j1 + j2 - low + 1))
    for total in range(-j1 - j2, j1 + j2 + 1):
        m1 = np.arange(max(-j1, total - j2), min(j1, total + j2) + 1)
        m2 = total - m1
        diagonal = j1 * (j1 + 1) + j2 * (j2 + 1) + 2.0 * m1 * m2
        up = (j1 - m1[:-1]) * (j1 + m1[:-1] + 1) * (j2 + m2[:-1]) * (j2 - m2[:-1] + 1)
        off = np.sqrt(up.astype(float))
        vectors = np.linalg.eigh(np.diag(diagonal) + np.diag(off, 1) + np.diag(off, -1))[1]
        vectors = vectors * np.where(vectors[-1] < 0, -1, 1)
        start = max(low, abs(total)) - low
        out[m1 + j1, m2 + j2, start:] = vectors
    out.setflags(write=False)
    return out


def irreducible(matrix: np.ndarray, order: int) -> list[np.ndarray]:
    """Irreducible tensors of a T-matrix between states of two kinds.

    Parameters
    ----------
    matrix : ndarray, shape (2 N (N+2),) * 2
        Ordered as T-matrices are.
    order : int
        N.

    Returns
    -------
    list of ndarray, one for every L = 0..2N, shape (2, N, 2, N, 2 L + 1)
        ``t^L_M(i n, j n') = sum (-1)^m' <n m n' -m' | L M> T(i n m, j n' m')``. When the particle
        turns they mix over M only, as spherical harmonics of degree L do.
    """
    count = order * (order + 2)
    out = [np.zeros((2, order, 2, order, 2 * l + 1), complex) for l in range(2 * order + 1)]
    for n in range(1, order + 1):
        rows = slice(n * n - 1, (n + 1) ** 2 - 1)
        for p in range(1, order + 1):
            columns = slice(p * p - 1, (p + 1) ** 2 - 1)
            block = matrix.reshape(2, count, 2, count)[:, rows, :, columns]
            sign = (-1.0) ** np.arange(-p, p + 1)
            turned = (block * sign)[..., ::-1]  # columns by -m'
            table = clebsch_gordan(n, p)
            low = abs(n - p)
            for total in range(-n - p, n + p + 1):
                m = np.arange(max(-n, total - p), min(n, total + p) + 1)
                # (2, 2, m) entries with m1 + m2 = total
                entries = turned[:, m + n, :, total - m + p]
                parts = np.einsum("mij,ml->ijl", entries, table[m + n, total - m + p])
                for l in range(max(low, abs(total)), n + p + 1):
                    out[l][:, n - 1, :, p - 1, total + l] = parts[:, :, l - low]
    return out
