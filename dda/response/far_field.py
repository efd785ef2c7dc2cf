"""The field far from the particle."""

from __future__ import annotations

import numpy as np
from numba import njit

from ..lattice.solution import Polarization


def scattering_amplitude(polarization: Polarization, directions: np.ndarray) -> np.ndarray:
    """Vector scattering amplitude F, with ``E_sca -> F exp(ikr)/r``.

    Parameters
    ----------
    polarization : Polarization
    directions : ndarray, shape (m, 3)
        Unit vectors of observation.

    Returns
    -------
    ndarray of complex, shape (m, 3), nm
        Perpendicular to the directions.

    Notes
    -----
    ``F(n) = k^2 (I - nn) . sum_j p_j exp(-i k n.r_j)``.

    References
    ----------
    Purcell, E. M., Pennypacker, C. R. (1973), Astrophys. J. 186, 705.
    """
    system = polarization.system
    n = np.ascontiguousarray(directions, float)
    step = system.k * system.cells.spacing
    total = radiated(system.index, np.ascontiguousarray(polarization.p, np.complex128), n, step)
    total *= np.exp(-1j * system.k * (n @ system.cells.origin))[:, None]
    return system.k**2 * (total - n * (n * total).sum(axis=1, keepdims=True))


@njit(nogil=True, cache=True, parallel=False)
def radiated(index, p, directions, step):  # pragma: no cover - compiled
    """Sum of the dipoles with their phases; phases along each axis come from a table."""
    size = index.max() + 1
    out = np.zeros((len(directions), 3), np.complex128)
    phase = np.empty((3, size), np.complex128)
    for d in range(len(directions)):
        for a in range(3):
            for i in range(size):
                phase[a, i] = np.exp(-1j * step * directions[d, a] * i)
        for c in range(len(index)):
            f = phase[0, index[c, 0]] * phase[1, index[c, 1]] * phase[2, index[c, 2]]
            for a in range(3):
                out[d, a] += f * p[c, a]
    return out


def sphere_quadrature(order: int, half_turned: bool = False) -> tuple[np.ndarray, np.ndarray]:
    """Gauss-Legendre points in cos(theta) times the trapezoid rule in phi.

    Exact for spherical harmonics up to degree ``2 order - 1``. With `half_turned` and an even
    order no direction lies on a coordinate plane.

    Returns
    -------
    directions : ndarray, shape (2 order^2, 3)
    weights : ndarray, shape (2 order^2,)
        They sum to 4 pi.
    """
    cosine, weight = np.polynomial.legendre.leggauss(order)
    phi = np.pi / order * (np.arange(2 * order) + (0.5 if half_turned else 0))
    sine = np.sqrt(1 - cosine**2)
    x = sine[:, None] * np.cos(phi)
    y = sine[:, None] * np.sin(phi)
    z = np.broadcast_to(cosine[:, None], x.shape)
    directions = np.stack([x, y, z], axis=-1).reshape(-1, 3)
    return directions, np.repeat(weight * np.pi / order, 2 * order)


def quadrature_order(size_parameter: float) -> int:
    """Order that integrates ``|F|^2`` of a body of circumscribed size parameter k r.

    The amplitude holds multipoles up to about ``x + 4 x^(1/3) + 2`` (Wiscombe 1980, Appl. Opt.
    19, 1505); its square twice that, which `order` Gauss points integrate exactly.
    """
    return int(np.ceil(size_parameter + 4 * size_parameter ** (1 / 3) + 3))
