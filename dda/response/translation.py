"""Vector spherical waves about one centre as regular waves about another.

A wave is a superposition of plane waves (its spectrum); a shift multiplies each plane wave by a
phase, and the phase is a sum of Legendre polynomials times spherical Bessel functions. The angular
integrals that are left are integrals of polynomials, done exactly by Gauss points. With Hankel
functions in the place of Bessel functions outgoing waves become regular ones (Cruzan 1962; Stein
1961), valid nearer to the new centre than the old one is.
"""

from __future__ import annotations

import numpy as np
from scipy.sparse import csr_array
from scipy.special import eval_legendre, spherical_jn, spherical_yn

from .vector_waves import spectra, wave_count, wave_labels
from .wave_rotations import rotation_matrix, turn_to


def regular_to_regular(order_to: int, order_from: int, shift, k: float) -> np.ndarray:
    """Matrix from amplitudes of regular waves about a centre to those about a shifted one.

    Parameters
    ----------
    order_to, order_from : int
        Orders kept about the new centre and present about the old one.
    shift : array_like, shape (3,)
        New centre less old one, nm.
    k : float
        1/nm.

    Returns
    -------
    ndarray of complex, shape (2 N(N+2) of `order_to`, of `order_from`)
        Its conjugate transpose takes outgoing amplitudes about the shifted centre to the old one.
    """
    return _translation(order_to, order_from, shift, k, outgoing=False)


def outgoing_to_regular(order_to: int, order_from: int, shift, k: float) -> np.ndarray:
    """Matrix from amplitudes of outgoing waves to those of regular ones about another centre.

    Parameters and result as of `regular_to_regular`.
    """
    return _translation(order_to, order_from, shift, k, outgoing=True)


def _translation(order_to: int, order_from: int, shift, k: float, outgoing: bool) -> np.ndarray:
    d = np.asarray(shift, float)
    distance = float(np.linalg.norm(d))
    if distance == 0:
        if outgoing:
            raise ValueError("outgoing waves are not regular about their own centre")
        return np.eye(wave_count(order_to), wave_count(order_from), dtype=complex)
    axial = _axial(order_to, order_from, k * distance, outgoing)
    turn = turn_to(d)
    # Turn the shift to the z axis, go along it, and turn back; turns leave orders apart.
    back = csr_array(rotation_matrix(order_from, turn).conj())
    ahead = csr_array(rotation_matrix(order_to, turn))
    return ahead @ (back @ axial.T).T


def _axial(order_to: int, order_from: int, kd: float, outgoing: bool) -> np.ndarray:
    """Along +z, where the degree m is kept."""
    top = order_to + order_from
    q = np.arange(top + 1)
    radial = spherical_jn(q, kd).astype(complex)
    if outgoing:
        radial += 1j * spherical_yn(q, kd)
    cosine, weight = np.polynomial.legendre.leggauss(top + 2)
    sine = np.sqrt((1 - cosine) * (1 + cosine))
    directions = np.stack([sine, np.zeros_like(sine), cosine], axis=1)
    polynomials = weight * eval_legendre(q[:, None], cosine)
    new = spectra(order_to, directions)
    old = new if order_to == order_from else spectra(order_from, directions)
    to, from_ = wave_labels(order_to), wave_labels(order_from)
    out = np.zeros((len(to), len(from_)), complex)
    factor = 2 * np.pi * (2 * q + 1) * 1j**q * radial
    for m in range(-min(order_to, order_from), min(order_to, order_from) + 1):
        rows, columns = np.flatnonzero(to[:, 2] == m), np.flatnonzero(from_[:, 2] == m)
        products = np.einsum("pca,pcb->abp", new[:, :, rows].conj(), old[:, :, columns])
        integrals = products @ polynomials.T
        # Outside this triangle, and for one parity, integrals vanish; what rounding leaves there
        # would be multiplied by huge Hankel functions.
        n, l = to[rows, 1][:, None], from_[columns, 1][None]
        mixed = to[rows, 0][:, None] != from_[columns, 0][None]
        there = (q >= abs(n - l)[..., None]) & (q <= (n + l)[..., None])
        there &= ((n + l + mixed)[..., None] + q) % 2 == 0
        out[np.ix_(rows, columns)] = (integrals * there) @ factor
    return out
