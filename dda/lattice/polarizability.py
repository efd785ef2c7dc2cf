"""Polarizabilities of the cells: interior, surface and staircase."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numba import njit

from .workers import Workers

POLARIZABILITIES = ("fcd", "ldr", "rr", "fcd-corners")

# Draine & Goodman (1993), table of the lattice dispersion relation for a cubic lattice.
_LDR = (-1.891531, 0.1648469, -1.7700004)


@dataclass(frozen=True)
class CellTensor:
    """A symmetric 3x3 tensor per cell, isotropic but at a few cells.

    Attributes
    ----------
    scalar : ndarray of complex, shape (n,)
        The isotropic value; ignored at the cells `where`.
    where : ndarray of int, shape (s,)
        Cells with a full tensor.
    full : ndarray of complex, shape (s, 6)
        xx, yy, zz, xy, xz, yz there.
    """

    scalar: np.ndarray
    where: np.ndarray
    full: np.ndarray

    def inverse(self) -> CellTensor:
        """The inverse of every cell's tensor."""
        matrices = np.linalg.inv(_matrices(self.full)) if len(self.where) else np.empty((0, 3, 3))
        return CellTensor(1 / self.scalar, self.where, components(matrices))

    def astype(self, dtype) -> CellTensor:
        """The same numbers in another precision."""
        return CellTensor(self.scalar.astype(dtype), self.where, self.full.astype(dtype))

    def apply(self, v: np.ndarray, out: np.ndarray) -> np.ndarray:
        """Write the product with the vectors `v` (n, 3) to `out` and return it."""
        _apply(self.scalar, self.where, self.full, v, out)
        return out

    @cached_property
    def _plain(self) -> np.ndarray:
        """The isotropic values, zero where there is a full tensor."""
        plain = self.scalar.copy()
        plain[self.where] = 0
        return plain

    def minus(self, v: np.ndarray, field: np.ndarray, workers: Workers) -> np.ndarray:
        """Replace `field` (n, 3) by the product with `v` less the field; return it."""
        plain = self._plain
        workers.run(lambda a, b: _isotropic_minus(plain, v, field, a, b), workers.split(len(plain)))
        _add_full(self.where, self.full, v, field)
        return field

    @property
    def nbytes(self) -> int:
        """Bytes held."""
        return self.scalar.nbytes + self.where.nbytes + self.full.nbytes


def inverse_polarizability(
    eps: np.ndarray, kind: str, k: float, spacing: float, s_factor: float | None = None
) -> np.ndarray:
    """Inverse polarizability of cubic cells.

    Parameters
    ----------
    eps : ndarray of complex
        Permittivity relative to the host.
    kind : {"fcd", "ldr", "rr", "fcd-corners"}
        Filtered coupled dipoles, lattice dispersion relation, radiative reaction alone, and the
        first with the corners of the Brillouin zone corrected as in `dda.lattice.green`.
    k : float
        Wave number in the host, 1/nm.
    spacing : float
        Edge d of a cell, nm.
    s_factor : float, optional
        ``S = sum_j (a_j e_j)^2`` of the LDR, a the direction and e the polarization.

    Returns
    -------
    ndarray of complex, like `eps`, nm^-3

    Raises
    ------
    ValueError
        If the kind is unknown, or "ldr" comes without `s_factor`.

    Notes
    -----
    ``alpha^-1 = (c(eps) - M)/d^3`` with ``c = (4 pi/3)(eps + 2)/(eps - 1)``.

    References
    ----------
    Piller & Martin (1998), IEEE Trans. Antennas Propag. 46, 1126 (fcd).
    Draine, B. T., Goodman, J. (1993), Astrophys. J. 405, 685 (ldr).
    Draine, B. T. (1988), Astrophys. J. 333, 848 (rr).

    Examples
    --------
    >>> import numpy as np
    >>> a = inverse_polarizability(np.array([2.25 + 0j]), "rr", k=0.01, spacing=1.0)
    >>> round(float(a[0].real) / (4 * np.pi / 3), 3)
    3.4
    """
    eps = np.asarray(eps, complex)
    x = k * spacing
    clausius = (4 * np.pi / 3) * (eps + 2) / (eps - 1)
    if kind in ("fcd", "fcd-corners"):
        m = 4 / 3 * x**2 + 2 / 3 * (1j + np.log((np.pi - x) / (np.pi + x)) / np.pi) * x**3
    elif kind == "rr":
        m = 2 / 3 * 1j * x**3
    elif kind == "ldr":
        if s_factor is None:
            raise ValueError("the LDR depends on the light: give s_factor")
        b1, b2, b3 = _LDR
        m = -(b1 + b2 * eps + b3 * eps * s_factor) * x**2 + 2 / 3 * 1j * x**3
    else:
        raise ValueError(f"unknown polarizability {kind!r}; known: {', '.join(POLARIZABILITIES)}")
    if kind == "fcd-corners":
        # a cell's own share of (8 pi/3)(1 - H): the filter sphere fills pi/6 of the zone
        m = m - (8 * np.pi / 3) * (1 - np.pi / 6)
    return (clausius - m) / spacing**3


def uniaxial(tangential: np.ndarray, normal_value: np.ndarray, normal: np.ndarray) -> np.ndarray:
    """Components of ``t (I - nn) + v nn``, shape (s, 6)."""
    extra = (normal_value - tangential)[:, None, None]
    return components(
        tangential[:, None, None] * np.eye(3) + extra * normal[:, :, None] * normal[:, None, :]
    )


def components(matrices: np.ndarray) -> np.ndarray:
    """xx, yy, zz, xy, xz, yz of symmetric matrices (s, 3, 3), shape (s, 6)."""
    return np.stack(
        [
            matrices[:, 0, 0],
            matrices[:, 1, 1],
            matrices[:, 2, 2],
            matrices[:, 0, 1],
            matrices[:, 0, 2],
            matrices[:, 1, 2],
        ],
        axis=1,
    ).astype(complex)


def _matrices(full: np.ndarray) -> np.ndarray:
    return full[:, [0, 3, 4, 3, 1, 5, 4, 5, 2]].reshape(-1, 3, 3)


@njit(nogil=True, cache=True)
def _isotropic_minus(scalar, v, field, start, stop):  # pragma: no cover - compiled
    for i in range(start, stop):
        for c in range(3):
            field[i, c] = scalar[i] * v[i, c] - field[i, c]


@njit(nogil=True, cache=True)
def _add_full(where, full, v, out):  # pragma: no cover - compiled
    for s in range(len(where)):
        i = where[s]
        a, b, c = v[i, 0], v[i, 1], v[i, 2]
        out[i, 0] += full[s, 0] * a + full[s, 3] * b + full[s, 4] * c
        out[i, 1] += full[s, 3] * a + full[s, 1] * b + full[s, 5] * c
        out[i, 2] += full[s, 4] * a + full[s, 5] * b + full[s, 2] * c


@njit(nogil=True, cache=True)
def _apply(scalar, where, full, v, out):  # pragma: no cover - compiled
    for i in range(len(scalar)):
        for c in range(3):
            out[i, c] = scalar[i] * v[i, c]
    for s in range(len(where)):
        i = where[s]
        a, b, c = v[i, 0], v[i, 1], v[i, 2]
        out[i, 0] = full[s, 0] * a + full[s, 3] * b + full[s, 4] * c
        out[i, 1] = full[s, 3] * a + full[s, 1] * b + full[s, 5] * c
        out[i, 2] = full[s, 4] * a + full[s, 5] * b + full[s, 2] * c
