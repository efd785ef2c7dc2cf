"""Cells of anisotropic materials: tensors mixed at surfaces, and their polarizabilities."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from .polarizability import CellTensor, components

# An off-diagonal element smaller than this part of a tensor is rounding.
_ROUNDING = 1e-12


def anisotropic_cells(
    parts: np.ndarray,
    rest: np.ndarray,
    where: np.ndarray,
    normal: np.ndarray,
    tensors: np.ndarray,
    inverse: Callable[[np.ndarray], np.ndarray],
    spacing: float,
) -> CellTensor:
    """Inverse polarizabilities of cells whose materials have permittivity tensors.

    Parameters
    ----------
    parts : ndarray of complex, shape (n, m)
        Fractions of the materials in each cell.
    rest : ndarray, shape (n,)
        Fraction of the host.
    where : ndarray of int, shape (s,)
        Cells with a surface in them.
    normal : ndarray, shape (s, 3)
        Unit normals of those surfaces.
    tensors : ndarray of complex, shape (m, 3, 3)
        Symmetric, relative to the host.
    inverse : callable
        Inverse polarizability of an isotropic permittivity (see `inverse_polarizability`).
    spacing : float
        nm.

    Returns
    -------
    CellTensor
        With full tensors at the surfaces and wherever there is an anisotropic material.
    """
    scalar = parts @ tensors[:, 0, 0] + rest
    bent = abs(tensors - tensors[:, :1, :1] * np.eye(3)).max(axis=(1, 2)) > 0
    full_at = (parts[:, bent] != 0).any(axis=1)
    full_at[where] = True
    full_at = np.flatnonzero(full_at)
    mixed = np.einsum("nm,mij->nij", parts[full_at], tensors)
    mixed += rest[full_at, None, None] * np.eye(3)
    surface = np.searchsorted(full_at, where)
    mixed[surface] = mixed_across(parts[where], rest[where], normal, tensors)
    # The scalars of the other cells are right; those here are replaced.
    scalar[full_at] = 2.0
    full = components(tensor_inverse_polarizability(mixed, inverse, spacing))
    return CellTensor(inverse(scalar), full_at, full)


def mixed_across(
    parts: np.ndarray, rest: np.ndarray, normal: np.ndarray, tensors: np.ndarray
) -> np.ndarray:
    """Permittivity tensors of cells that hold a surface.

    Parameters
    ----------
    parts : ndarray of complex, shape (s, m)
    rest : ndarray, shape (s,)
    normal : ndarray, shape (s, 3)
    tensors : ndarray of complex, shape (m, 3, 3)

    Returns
    -------
    ndarray of complex, shape (s, 3, 3)

    Notes
    -----
    Across a surface the normal component of D and the tangential ones of E are continuous. What
    gives the others, (-E_n, D_t), in terms of them is ``tau(eps)``, and this is what is averaged:
    ``tau_nn = -1/eps_nn``, ``tau_nt = eps_nt/eps_nn``, ``tau_tt = eps_tt - eps_tn eps_nt/eps_nn``.
    Isotropic materials give ``sum f eps`` along the surface and ``1/sum(f/eps)`` across it.

    References
    ----------
    Kottke, C., Farjadpour, A., Johnson, S. G. (2008), Phys. Rev. E 77, 036611.

    Examples
    --------
    >>> import numpy as np
    >>> half, z = np.array([[0.5]]), np.array([[0.0, 0.0, 1.0]])
    >>> mixed = mixed_across(half, np.array([0.5]), z, 3 * np.eye(3)[None])
    >>> np.diag(mixed[0]).real
    array([2. , 2. , 1.5])
    """
    frame = _frames(normal)
    one = np.zeros((len(normal), 3, 3), complex)
    one += rest[:, None, None] * _tau(np.eye(3, dtype=complex))
    for m, eps in enumerate(tensors):
        local = frame @ eps @ frame.transpose(0, 2, 1)
        one += parts[:, m, None, None] * _tau(local)
    return frame.transpose(0, 2, 1) @ _from_tau(one) @ frame


def tensor_inverse_polarizability(
    eps: np.ndarray, inverse: Callable[[np.ndarray], np.ndarray], spacing: float
) -> np.ndarray:
    """Inverse polarizabilities (s, 3, 3), nm^-3, of permittivity tensors (s, 3, 3).

    The function `inverse` of a scalar is ``4 pi/(d^3 (eps - 1)) + a + b eps``, whatever the kind;
    of a tensor it is the same with the inverse matrix. Along principal axes that is the
    polarizability of each principal value.

    Examples
    --------
    >>> from functools import partial
    >>> from dda.lattice.polarizability import inverse_polarizability
    >>> of = partial(inverse_polarizability, kind="rr", k=0.01, spacing=1.0)
    >>> eps = np.diag([2.0, 3.0, 4.0]).astype(complex)
    >>> tensor = tensor_inverse_polarizability(eps[None], of, 1.0)[0]
    >>> bool(np.allclose(tensor, np.diag(of(np.diag(eps)))))
    True
    """
    pole = 4 * np.pi / spacing**3
    at = np.array([2.0, 3.0], complex)
    smooth = inverse(at) - pole / (at - 1)
    slope = smooth[1] - smooth[0]
    one = np.eye(3)
    return pole * np.linalg.inv(eps - one) + (smooth[0] - 2 * slope) * one + slope * eps


def kept_mirrors(tensors: np.ndarray) -> tuple[bool, bool, bool]:
    """Whether the mirrors across x, y and z leave all tensors (m, 3, 3) as they are.

    >>> kept_mirrors(np.diag([1.0, 2.0, 3.0])[None])
    (True, True, True)
    """
    size = abs(tensors).max(axis=(1, 2))
    kept = []
    for axis in range(3):
        others = [b for b in range(3) if b != axis]
        kept.append(bool((abs(tensors[:, axis, others]).max(axis=1) <= _ROUNDING * size).all()))
    return (kept[0], kept[1], kept[2])


def _frames(normal: np.ndarray) -> np.ndarray:
    """Rotations (s, 3, 3) whose first rows are the normals."""
    helper = np.eye(3)[abs(normal).argmin(axis=1)]
    second = np.cross(normal, helper)
    second /= np.linalg.norm(second, axis=1)[:, None]
    return np.stack([normal, second, np.cross(normal, second)], axis=1)


def _tau(eps: np.ndarray) -> np.ndarray:
    nn = eps[..., :1, :1]
    row, column = eps[..., :1, 1:], eps[..., 1:, :1]
    return np.block([[-1 / nn, row / nn], [column / nn, eps[..., 1:, 1:] - column @ row / nn]])


def _from_tau(tau: np.ndarray) -> np.ndarray:
    nn = tau[..., :1, :1]
    row, column = tau[..., :1, 1:], tau[..., 1:, :1]
    return np.block([[-1 / nn, -row / nn], [-column / nn, tau[..., 1:, 1:] - column @ row / nn]])
