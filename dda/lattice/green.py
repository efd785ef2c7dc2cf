"""Green tensors between the cells of a cubic lattice.

On a cubic lattice the distance between two cells depends only on the integer
``m = (i^2 + j^2 + k^2)``, so the special functions of the filtered tensor are evaluated once
per integer and looked up for every pair of cells.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numba import njit
from scipy.special import sici

KERNELS = ("fcd", "point", "fcd-corners")


@dataclass(frozen=True)
class RadialTable:
    """The two radial functions of ``G = a(R) I + b(R) RR`` at ``R = d sqrt(m)``.

    Attributes
    ----------
    isotropic, dyadic : ndarray of complex, shape (m_max + 1,)
        ``a`` and ``b`` in nm^-3; entry 0 (a cell with itself) is zero, because a cell's own
        field is part of its polarizability.
    """

    isotropic: np.ndarray
    dyadic: np.ndarray


def radial_table(kernel: str, spacing: float, k: float, m_max: int) -> RadialTable:
    """Tabulate the Green tensor over squared lattice distances.

    Parameters
    ----------
    kernel : {"fcd", "point", "fcd-corners"}
        Filtered coupled dipoles, point dipoles, or filtered coupled dipoles whose corners of the
        Brillouin zone answer like longitudinal waves (see Notes).
    spacing : float
        Edge d of a cell, nm.
    k : float
        Wave number in the host, 1/nm.
    m_max : int
        Largest squared distance in units of the spacing.

    Returns
    -------
    RadialTable

    Raises
    ------
    ValueError
        If the kernel is unknown or the spacing does not resolve the wave (k d >= pi).

    Notes
    -----
    The filtered tensor removes all spatial frequencies above ``k_F = pi/d`` from the
    free-space tensor, which a lattice of that spacing cannot carry. It leaves the corners of the
    cubic Brillouin zone, outside the sphere of radius k_F, without interaction; there a cell
    answers with its polarizability alone, which is resonant at eps = -2. "fcd-corners" gives
    those waves the interaction of longitudinal ones, ``-4 pi/d^3``, resonant at eps = 0 only:
    with H(R) the sphere's low-pass kernel it subtracts ``(8 pi/3)(1 - H)/d^3`` from the tensor.
    That is this project's own; in the sphere nothing changes.

    References
    ----------
    Piller, N. B., Martin, O. J. F. (1998), IEEE Trans. Antennas Propag. 46, 1126.
    Yurkin, M. A., Min, M., Hoekstra, A. G. (2010), Phys. Rev. E 82, 036703.

    Examples
    --------
    >>> table = radial_table("point", spacing=2.0, k=0.01, m_max=3)
    >>> table.isotropic.shape
    (4,)
    """
    m = np.arange(1, m_max + 1)
    r = spacing * np.sqrt(m)
    if kernel == "point":
        iso, dyad = _point(r, k)
    elif kernel in ("fcd", "fcd-corners"):
        if k * spacing >= np.pi:
            raise ValueError(f"k d = {k * spacing:.3g} is not below pi: the spacing is too coarse")
        iso, dyad = _filtered(r, k, np.pi / spacing, corners=kernel == "fcd-corners")
    else:
        raise ValueError(f"unknown kernel {kernel!r}; known are {', '.join(KERNELS)}")
    zero = np.zeros(1, complex)
    return RadialTable(np.concatenate([zero, iso]), np.concatenate([zero, dyad]))


def _point(r: np.ndarray, k: float) -> tuple[np.ndarray, np.ndarray]:
    wave = np.exp(1j * k * r) / r
    near = (1 - 1j * k * r) / r**2
    return wave * (k**2 - near), wave * (3 * near - k**2)


def _filtered(
    r: np.ndarray, k: float, k_filter: float, corners: bool
) -> tuple[np.ndarray, np.ndarray]:
    si_sum, ci_sum = sici((k_filter + k) * r)
    si_dif, ci_dif = sici((k_filter - k) * r)
    sine, cosine = np.sin(k * r), np.cos(k * r)
    outgoing = 1j * np.pi + ci_dif - ci_sum
    standing = si_sum + si_dif
    # u and its partner v obey u' = k v + 2 sin(kF r)/(pi r), v' = -k u, so all derivatives
    # follow without a difference quotient.
    u = (sine * outgoing + cosine * standing) / np.pi
    v = (cosine * outgoing - sine * standing) / np.pi
    edge_sin, edge_cos = np.sin(k_filter * r), np.cos(k_filter * r)
    u1 = k * v + 2 * edge_sin / (np.pi * r)
    u2 = -(k**2) * u + (2 / np.pi) * (k_filter * edge_cos / r - edge_sin / r**2)
    g = u / r
    g1 = u1 / r - u / r**2
    g2 = u2 / r - 2 * u1 / r**2 + 2 * u / r**3
    delta = (edge_sin - k_filter * r * edge_cos) / (2 * np.pi**2 * r**3)
    # the sphere's low pass: a third of it belongs to the tensor, the corners add two thirds
    weight = 4 * np.pi if corners else 4 * np.pi / 3
    return k**2 * g + g1 / r + weight * delta, g2 - g1 / r


# Order of the six independent components everywhere in this package.
COMPONENTS = ((0, 0), (1, 1), (2, 2), (0, 1), (0, 2), (1, 2))


@njit(nogil=True, cache=True)
def _fill_octant(iso, dyad, a, b, out):  # pragma: no cover - compiled
    nx, ny, nz = out.shape
    for i in range(nx):
        for j in range(ny):
            for l in range(nz):
                m = i * i + j * j + l * l
                if m == 0:
                    out[i, j, l] = 0.0
                    continue
                va = i if a == 0 else (j if a == 1 else l)
                vb = i if b == 0 else (j if b == 1 else l)
                value = dyad[m] * (va * vb / m)
                if a == b:
                    value += iso[m]
                out[i, j, l] = value


def octant(table: RadialTable, component: int, shape: tuple[int, int, int]) -> np.ndarray:
    """One component of the tensor for all non-negative lattice displacements.

    Parameters
    ----------
    table : RadialTable
    component : int
        Index into `COMPONENTS`.
    shape : (nx, ny, nz)
        Number of displacements 0 .. n-1 along each axis.

    Returns
    -------
    ndarray of complex, shape (nx, ny, nz), nm^-3
    """
    a, b = COMPONENTS[component]
    out = np.empty(shape, complex)
    _fill_octant(table.isotropic, table.dyadic, a, b, out)
    return out


def tensor(table: RadialTable, displacements: np.ndarray) -> np.ndarray:
    """Dense tensors for integer displacements, for checks and small direct solutions.

    Parameters
    ----------
    table : RadialTable
    displacements : ndarray of int, shape (..., 3)

    Returns
    -------
    ndarray of complex, shape (..., 3, 3), nm^-3
    """
    v = np.asarray(displacements)
    m = (v**2).sum(-1)
    unit = v / np.sqrt(np.maximum(m, 1))[..., None]
    dyad = unit[..., :, None] * unit[..., None, :]
    return table.isotropic[m][..., None, None] * np.eye(3) + table.dyadic[m][..., None, None] * dyad
