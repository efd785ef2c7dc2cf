"""Preconditioners beside the block-diagonal one, deflation and blocks of vectors, to compare.

None of them pays, so none is in the package; the group "preconditioners" has the figures.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import scipy.fft
import scipy.linalg

from dda.lattice import System
from dda.lattice.krylov import Subspace

Preconditioner = Callable[[np.ndarray], np.ndarray]


def circulant(system: System) -> Preconditioner:
    """The inverse of a body of the mean inverse polarizability that fills the padded box.

    The interaction is translation invariant there, so a Fourier transform turns it into a 3x3
    matrix a wave. Chan, T. F. (1988), SIAM J. Sci. Stat. Comput. 9, 766 (circulant
    preconditioners).
    """
    kernel = system.convolution.kernel
    own = system.alpha_inverse.apply(
        np.tile(np.eye(3, dtype=complex)[0], (system.n, 1)), np.empty((system.n, 3), complex)
    )
    bulk = np.ones(system.n, bool)
    bulk[system.alpha_inverse.where] = False
    mean = own[bulk, 0].mean() if bulk.any() else own[:, 0].mean()
    lx, ly, lz = kernel.padded
    symbol = np.empty((lx, ly, lz, 3, 3), complex)
    places = [np.minimum(np.arange(n), n - np.arange(n)) for n in (lx, ly, lz)]
    signs = [np.where(np.arange(n) > n // 2, -1.0, 1.0) for n in (lx, ly, lz)]
    for component, (a, b) in enumerate(((0, 0), (1, 1), (2, 2), (0, 1), (0, 2), (1, 2))):
        part = kernel.spectrum[:, component][np.ix_(*places)] * (lx * ly * lz)
        if a != b:
            for axis in (a, b):
                shape = [1, 1, 1]
                shape[axis] = -1
                part = part * signs[axis].reshape(shape)
        symbol[..., a, b] = symbol[..., b, a] = part
    inverse = np.linalg.inv(mean * np.eye(3) - symbol)
    index = tuple(system.index.T)

    def apply(r: np.ndarray) -> np.ndarray:
        grid = np.zeros((lx, ly, lz, 3), complex)
        grid[index] = r.reshape(-1, 3)
        waves = scipy.fft.fftn(grid, axes=(0, 1, 2), workers=2, overwrite_x=True)
        waves = np.einsum("xyzab,xyzb->xyza", inverse, waves)
        grid = scipy.fft.ifftn(waves, axes=(0, 1, 2), workers=2, overwrite_x=True)
        return grid[index].reshape(r.shape)

    return apply


def coarse_grid(system: System) -> Preconditioner:
    """Block diagonal plus the exact solution for dipoles that are equal in cubes of 2^3 cells.

    The additive two-level method; the coarse matrix is computed a column a product, and factored.
    Dryja, M., Widlund, O. (1987), technical report 339, Courant Institute (additive Schwarz).
    """
    cubes = system.index // 2
    _, member = np.unique(cubes, axis=0, return_inverse=True)
    count = int(member.max()) + 1

    def restrict(r: np.ndarray) -> np.ndarray:
        out = np.zeros((count, 3), complex)
        np.add.at(out, member, r.reshape(-1, 3))
        return out.ravel()

    def prolong(v: np.ndarray) -> np.ndarray:
        return np.ascontiguousarray(v.reshape(count, 3)[member]).ravel()

    matrix = np.empty((3 * count, 3 * count), complex)
    for j in range(3 * count):
        unit = np.zeros(3 * count, complex)
        unit[j] = 1
        matrix[:, j] = restrict(system.matvec(prolong(unit)))
    factored = scipy.linalg.lu_factor(matrix)

    def apply(r: np.ndarray) -> np.ndarray:
        return system.precondition(r) + prolong(scipy.linalg.lu_solve(factored, restrict(r)))

    return apply


def slow_modes(system: System, b: np.ndarray, count: int, steps: int = 120) -> np.ndarray:
    """Harmonic Ritz vectors (count, 3n) of the preconditioned matrix nearest zero.

    Morgan, R. B. (2002), SIAM J. Sci. Comput. 24, 20 (deflated restarting).
    """
    v = np.zeros((steps + 1, len(b)), complex)
    h = np.zeros((steps + 1, steps), complex)
    first = system.precondition(b)
    v[0] = first / np.linalg.norm(first)
    for k in range(steps):
        w = system.precondition(system.matvec(v[k]))
        for _ in range(2):
            part = v[: k + 1].conj() @ w
            h[: k + 1, k] += part
            w -= part @ v[: k + 1]
        h[k + 1, k] = np.linalg.norm(w)
        v[k + 1] = w / h[k + 1, k]
    square, last = h[:steps], abs(h[steps, steps - 1]) ** 2
    unit = np.zeros(steps)
    unit[-1] = 1
    ritz = square + last * np.outer(np.linalg.solve(square.conj().T, unit), unit)
    values, vectors = np.linalg.eig(ritz)
    nearest = np.argsort(abs(values))[:count]
    return vectors[:, nearest].T @ v[:steps]


def deflation(system: System, modes: np.ndarray) -> Subspace | None:
    """The modes as a space that `cocg` keeps its residuals orthogonal to; a product each."""
    return Subspace.of(system, list(modes))


def block_cocg(
    system: System, b: np.ndarray, tolerance: float, limit: int
) -> tuple[np.ndarray, int]:
    """Conjugate gradients on several right-hand sides (k, n) that share a Krylov space.

    Returns the solutions and the steps until the largest preconditioned residual is below the
    tolerance. O'Leary, D. P. (1980), Linear Algebra Appl. 29, 293, without conjugates.
    """

    def rows(function: Preconditioner, block: np.ndarray) -> np.ndarray:
        return np.stack([function(v) for v in block])

    x, r = np.zeros_like(b), b.copy()
    z = rows(system.precondition, r)
    norms = np.linalg.norm(z, axis=1)
    p, steps = z.copy(), 0
    while steps < limit and (np.linalg.norm(z, axis=1) > tolerance * norms).any():
        p = np.ascontiguousarray(np.linalg.qr(p.T)[0].T)
        q = rows(system.matvec, p)
        square = p @ q.T
        a = np.linalg.solve(square, p @ r.T)
        x += a.T @ p
        r -= a.T @ q
        z = rows(system.precondition, r)
        p = z - np.linalg.solve(square, q @ z.T).T @ p
        steps += 1
    return x, steps
