"""Amplitude and Mueller matrices in the convention of Bohren & Huffman (1983)."""

from __future__ import annotations

import numpy as np

from .angular_momentum import clebsch_gordan, irreducible
from .tmatrix import TMatrix
from .vector_waves import spectra

# Stokes parameters (I, Q, U, V) of (E_par E_par*, E_par E_per*, E_per E_par*, E_per E_per*).
_STOKES = np.array([[1, 0, 0, 1], [1, 0, 0, -1], [0, 1, 1, 0], [0, 1j, -1j, 0]])


def mueller_matrix(amplitudes: np.ndarray) -> np.ndarray:
    """Mueller matrices of amplitude matrices.

    Parameters
    ----------
    amplitudes : ndarray of complex, shape (..., 2, 2)
        [[S2, S3], [S4, S1]]: from the incident (parallel, perpendicular) to the scattered
        components, parallel and perpendicular to the scattering plane.

    Returns
    -------
    ndarray, shape (..., 4, 4)
        Of the Stokes parameters I, Q, U, V; S11 = k^2 dC_sca/dOmega for unpolarized light.

    References
    ----------
    Bohren, C. F., Huffman, D. R. (1983), Absorption and Scattering of Light by Small Particles,
    section 3.3.

    Examples
    --------
    >>> import numpy as np
    >>> mueller_matrix(np.array([[0.5, 0], [0, 1.0]]))[0, :2].round(3)  # a dipole at 60 degrees
    array([ 0.625, -0.375])
    """
    j = np.asarray(amplitudes, complex)
    products = np.einsum("...ab,...cd->...acbd", j, j.conj())
    return stokes_form(products.reshape(*j.shape[:-2], 4, 4))


def stokes_form(products: np.ndarray) -> np.ndarray:
    """From ``J x conj(J)`` (..., 4, 4), perhaps averaged, to the Mueller matrix."""
    return (_STOKES @ products @ np.linalg.inv(_STOKES)).real


def scattering_plane(
    direction: np.ndarray, e1: np.ndarray, e2: np.ndarray, angles: np.ndarray, azimuth: float
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Directions and unit vectors of the scattered light in a plane through the incident one.

    Parameters
    ----------
    direction, e1, e2 : ndarray, shape (3,)
        Right-handed triad (e1, e2, direction).
    angles : ndarray, shape (a,)
        Scattering angles, degrees.
    azimuth : float
        Of the scattering plane from e1, degrees.

    Returns
    -------
    outgoing, parallel, perpendicular : ndarray, shape (a, 3)
        Perpendicular x parallel = outgoing, as Bohren & Huffman have it.
    """
    theta, phi = np.deg2rad(np.asarray(angles, float))[:, None], np.deg2rad(azimuth)
    across = np.cos(phi) * e1 + np.sin(phi) * e2
    outgoing = np.cos(theta) * direction + np.sin(theta) * across
    parallel = np.cos(theta) * across - np.sin(theta) * direction
    perpendicular = np.sin(phi) * e1 - np.cos(phi) * e2
    return outgoing, parallel, np.broadcast_to(perpendicular, parallel.shape)


def amplitude_matrix(
    first: np.ndarray,
    second: np.ndarray,
    k: float,
    parallel: np.ndarray,
    perpendicular: np.ndarray,
    azimuth: float,
) -> np.ndarray:
    """Amplitude matrices [[S2, S3], [S4, S1]] from scattering amplitudes.

    Parameters
    ----------
    first, second : ndarray of complex, shape (a, 3)
        Vector amplitudes F in nm for light polarized along e1 and e2.
    k : float
        1/nm.
    parallel, perpendicular, azimuth
        From `scattering_plane`.

    Returns
    -------
    ndarray of complex, shape (a, 2, 2)
    """
    phi = np.deg2rad(azimuth)
    along = np.cos(phi) * first + np.sin(phi) * second
    across = np.sin(phi) * first - np.cos(phi) * second
    rows = [[np.sum(f * e, axis=1) for f in (along, across)] for e in (parallel, perpendicular)]
    return -1j * k * np.moveaxis(np.array(rows), -1, 0)


def averaged_mueller_matrix(t: TMatrix, angles) -> np.ndarray:
    """Mueller matrix averaged over all orientations of a particle.

    Parameters
    ----------
    t : TMatrix
    angles : array_like, shape (a,)
        Scattering angles, degrees.

    Returns
    -------
    ndarray, shape (a, 4, 4)
        Dimensionless; S11 = k^2 dC_sca/dOmega for unpolarized light.

    Notes
    -----
    Analytic. Turned, a T-matrix is the sum of its irreducible tensors of rank L, each times a
    D-matrix of that rank; the D-matrices are orthogonal over the rotations, so that the average
    of products of amplitudes is a sum over L of products of tensors (Mishchenko 1991;
    Khlebtsov 1992).

    References
    ----------
    Mishchenko, M. I. (1991), J. Opt. Soc. Am. A 8, 871.
    Khlebtsov, N. G. (1992), Appl. Opt. 31, 5359.

    Examples
    --------
    >>> import dda, shapes
    >>> cells = shapes.voxelize(shapes.rod(40, 16, material="gold"), cells=10)
    >>> t = dda.t_matrix(dda.system(cells, wavelength=700))
    >>> forward, aside = averaged_mueller_matrix(t, [0, 90])
    >>> bool(0.2 < -aside[0, 1] / aside[0, 0] < 0.5)  # a needle depolarizes: 1/3
    True
    """
    theta = np.deg2rad(np.atleast_1d(np.asarray(angles, float)))
    order = t.order
    tensors = irreducible(_to_helicity(t.matrix), order)
    outgoing, incident = _helicity_waves(order, theta)
    products = np.zeros((len(theta), 4, 4), complex)
    for rank, tensor in enumerate(tensors):
        amplitudes = np.zeros((len(theta), 2, 2, 2 * rank + 1, 2 * rank + 1), complex)
        for out, light in np.ndindex(2, 2):
            link = _links(order, rank, light, outgoing[:, out], incident)
            amplitudes[:, out, light] = np.einsum(
                "anpM,npQ->aMQ", link, tensor[out, :, light], optimize=True
            )
        flat = amplitudes.reshape(len(theta), 4, -1)
        products += flat @ flat.conj().transpose(0, 2, 1) / (2 * rank + 1)
    # (out light, out' light') -> (out out', light light')
    products = products.reshape(-1, 2, 2, 2, 2).transpose(0, 1, 3, 2, 4).reshape(-1, 4, 4)
    # Helicity + is (e_theta + i e_phi)/sqrt 2; parallel is e_theta, perpendicular minus e_phi.
    to_linear = np.sqrt(0.5) * np.array([[1, 1], [-1j, 1j]])
    change = np.kron(to_linear, to_linear.conj())
    return stokes_form(change @ products @ np.linalg.inv(change))


def _to_helicity(matrix: np.ndarray) -> np.ndarray:
    """T between the waves (M + N)/sqrt 2 (left, first) and (M - N)/sqrt 2."""
    count = len(matrix) // 2
    blocks = matrix.reshape(2, count, 2, count)
    mix = np.sqrt(0.5) * np.array([[1, 1], [1, -1]])
    return np.einsum("ik,klmn,jm->iljn", mix, blocks, mix).reshape(matrix.shape)


def _helicity_waves(order: int, theta: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Outgoing angular functions, and amplitudes of the incident wave along z.

    Returns
    -------
    outgoing : (a, 2, N (N+2)) ndarray
        Dimensionless amplitude of each wave of helicity +, - along its own polarization.
    incident : (2, N) ndarray
        Amplitude of the wave of order n and degree +1, -1 for light of helicity +, -.
    """
    zero = np.zeros_like(theta)
    directions = np.stack([np.sin(theta), zero, np.cos(theta)], axis=1)
    along = np.stack([np.cos(theta), zero, -np.sin(theta)], axis=1)
    count = order * (order + 2)
    raw = spectra(order, directions).reshape(-1, 3, 2, count)
    waves = [np.sqrt(0.5) * (raw[:, :, 0] + s * raw[:, :, 1]) for s in (1, -1)]
    outgoing = np.empty((len(theta), 2, count), complex)
    for i, s in enumerate((1, -1)):
        polarization = np.sqrt(0.5) * (along + s * 1j * np.array([0.0, 1, 0]))
        outgoing[:, i] = -np.einsum("acl,ac->al", waves[i], polarization.conj())
    forward = spectra(order, np.array([[0.0, 0, 1]])).reshape(3, 2, count)
    incident = np.empty((2, order), complex)
    for i, s in enumerate((1, -1)):
        polarization = np.sqrt(0.5) * np.array([1, s * 1j, 0])
        wave = np.sqrt(0.5) * (forward[:, 0] + s * forward[:, 1])
        place = np.arange(1, order + 1) * np.arange(2, order + 2) + s - 1
        incident[i] = 4 * np.pi * (polarization @ wave[:, place].conj())
    return outgoing, incident


def _links(order: int, rank: int, light: int, outgoing: np.ndarray, incident) -> np.ndarray:
    """What multiplies the tensors of a rank in the amplitude, (a, N, N, 2 rank + 1)."""
    degree = 1 - 2 * light
    link = np.zeros((len(outgoing), order, order, 2 * rank + 1), complex)
    for n in range(1, order + 1):
        for p in range(max(1, abs(n - rank)), min(order, n + rank) + 1):
            m = np.arange(max(-n, degree - rank), min(n, degree + rank) + 1)
            table = clebsch_gordan(n, p)[m + n, p - degree, rank - abs(n - p)]
            wave = outgoing[:, n * (n + 1) - 1 + m]
            link[:, n - 1, p - 1, m - degree + rank] = -wave * table * incident[light, p - 1]
    return link
