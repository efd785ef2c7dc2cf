"""Krylov methods for complex symmetric systems.

Each takes an operator (anything with `matvec`, `shape` and `dtype`) and a preconditioner (a
function of a vector), and knows nothing else of what it solves.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
from numba import njit


@dataclass(frozen=True, eq=False)
class KrylovResult:
    """What an iteration arrived at.

    Attributes
    ----------
    x : ndarray
        The best iterate by residual.
    residual : float
        ``|b - A x| / |b|`` of it, true (recomputed), in the norm of the preconditioned residual
        where a preconditioner was given.
    iterations, products : int
        Steps taken and products with the operator.
    status : {"converged", "stalled", "limit", "stopped"}
        "stopped" when the monitor asked for it.
    history : ndarray
        Residual of every step.
    """

    x: np.ndarray
    residual: float
    iterations: int
    products: int
    status: str
    history: np.ndarray = field(repr=False)


def cocg(
    operator,
    b: np.ndarray,
    preconditioner: Callable[[np.ndarray], np.ndarray] | None = None,
    *,
    start: np.ndarray | None = None,
    tolerance: float = 1e-5,
    limit: int = 2000,
    monitor: Callable[[int, np.ndarray, float], bool] | None = None,
) -> KrylovResult:
    """Conjugate orthogonal conjugate gradients.

    Parameters
    ----------
    operator
        Complex symmetric; has `matvec`.
    b : ndarray of complex, shape (n,)
    preconditioner : callable, optional
        Complex symmetric approximation of the inverse.
    start : ndarray, optional
        First iterate; zero by default.
    tolerance : float
        Stop when the preconditioned residual's norm is below this part of that of `b`.
    limit : int
        Most steps.
    monitor : callable, optional
        Called as ``monitor(step, x, residual)`` after each step; True stops the iteration.

    Returns
    -------
    KrylovResult

    References
    ----------
    van der Vorst, H. A., Melissen, J. B. M. (1990), IEEE Trans. Magn. 26, 706.

    Examples
    --------
    >>> import numpy as np
    >>> from scipy.sparse.linalg import aslinearoperator
    >>> a = np.array([[4 + 1j, 1], [1, 3]])
    >>> result = cocg(aslinearoperator(a), np.array([1.0, 2.0], complex), tolerance=1e-12)
    >>> result.status, bool(np.allclose(a @ result.x, [1, 2]))
    ('converged', True)
    """
    solve = preconditioner or (lambda r: r.copy())
    x = np.zeros_like(b) if start is None else start.astype(b.dtype).copy()
    products = 0
    r = b.copy()
    if start is not None:
        r -= operator.matvec(x)
        products += 1
    norm_b = np.linalg.norm(solve(b))
    if norm_b == 0:
        return KrylovResult(x, 0.0, 0, products, "converged", np.empty(0))
    z = solve(r)
    p = z.copy()
    rho = np.dot(r, z)
    residual = float(np.linalg.norm(z) / norm_b)
    history = []
    status = "converged" if residual <= tolerance else "limit"
    step = 0
    while status == "limit" and step < limit:
        step += 1
        q = operator.matvec(p)
        products += 1
        pq = np.dot(p, q)
        if pq == 0 or rho == 0 or not np.isfinite(pq):
            status = "stalled"  # the recurrence broke down: x is still the last good iterate
            break
        _step(x, r, p, q, b.dtype.type(rho / pq))
        z = solve(r)
        residual = float(np.linalg.norm(z) / norm_b)
        history.append(residual)
        if residual <= tolerance:
            status = "converged"
        elif monitor is not None and monitor(step, x, residual):
            status = "stopped"
        else:
            fresh = np.dot(r, z)
            _extend(p, z, b.dtype.type(fresh / rho))
            rho = fresh
    return KrylovResult(x, residual, step, products, status, np.array(history))


@njit(nogil=True, cache=True)
def _step(x, r, p, q, a):  # pragma: no cover - compiled
    for i in range(len(x)):
        x[i] += a * p[i]
        r[i] -= a * q[i]


@njit(nogil=True, cache=True)
def _extend(p, z, beta):  # pragma: no cover - compiled
    for i in range(len(p)):
        p[i] = z[i] + beta * p[i]
