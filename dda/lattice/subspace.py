"""Solutions of neighbouring systems, searched besides the Krylov space."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numba import njit


@dataclass(frozen=True, eq=False)
class Subspace:
    """Vectors that a solution is nearly made of, and what the operator makes of them.

    Attributes
    ----------
    vectors, images : ndarray of complex, shape (k, n)
        Rows v and ``A v``.
    inverse : ndarray of complex, shape (k, k)
        Pseudoinverse of ``v_i . A v_j``.
    """

    vectors: np.ndarray
    images: np.ndarray
    inverse: np.ndarray

    @classmethod
    def of(cls, operator, vectors: Sequence[np.ndarray]) -> Subspace | None:
        """Span of the vectors, orthonormalized; None when all vanish. Costs a product each."""
        lengths = [float(np.linalg.norm(v)) for v in vectors]
        used = [v / n for v, n in zip(vectors, lengths, strict=True) if n > 1e-9 * max(lengths)]
        if not used:
            return None
        q, r = np.linalg.qr(np.stack(used, axis=1))
        keep = np.abs(np.diag(r)) > 1e-6  # what the others already hold adds only rounding
        rows = np.ascontiguousarray(q[:, keep].T)
        images = np.stack([operator.matvec(v) for v in rows])
        return cls(rows, images, np.linalg.pinv(rows @ images.T, rcond=1e-10))

    def start(self, x: np.ndarray, r: np.ndarray) -> None:
        """Add to x the vector of the span that makes ``v . r = 0`` for all v, and renew r."""
        weights = self.inverse @ dots(self.vectors, r)
        add(self.vectors, weights.astype(x.dtype), x)
        add(self.images, -weights.astype(r.dtype), r)

    def remove(self, z: np.ndarray) -> None:
        """Take from z its part in the span, in the sense of ``u . A v``."""
        weights = self.inverse @ dots(self.images, z)
        add(self.vectors, -weights.astype(z.dtype), z)


@njit(nogil=True, cache=True)
def dots(rows, x):  # pragma: no cover - compiled
    """Sums of every row (k, n) times x, without a conjugate, in double precision."""
    out = np.zeros(len(rows), np.complex128)
    for k in range(len(rows)):
        for i in range(len(x)):
            out[k] += rows[k, i] * x[i]
    return out


@njit(nogil=True, cache=True)
def add(rows, weights, x):  # pragma: no cover - compiled
    """Add the weighted rows (k, n) to x."""
    for k in range(len(rows)):
        for i in range(len(x)):
            x[i] += weights[k] * rows[k, i]
