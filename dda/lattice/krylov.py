"""Krylov methods.

Each takes an operator (anything with `matvec`, `shape` and `dtype`) and a preconditioner (a
function of a vector), and knows nothing else of what it solves.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np
from numba import njit

# An iterate is kept every so many steps, to fall back on when the recurrence breaks down; a
# residual so many times the best one (or the right-hand side) is taken for a breakdown. Healthy
# runs on silver pass through residuals of 50.
_KEEP = 20
_DIVERGED = 1e4


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
        weights = self.inverse @ _products(self.vectors, r)
        _add(self.vectors, weights.astype(x.dtype), x)
        _add(self.images, -weights.astype(x.dtype), r)

    def remove(self, z: np.ndarray) -> None:
        """Take from z its part in the span, in the sense of ``u . A v``."""
        weights = self.inverse @ _products(self.images, z)
        _add(self.vectors, -weights.astype(z.dtype), z)


def cocg(
    operator,
    b: np.ndarray,
    preconditioner: Callable[[np.ndarray], np.ndarray] | None = None,
    *,
    start: np.ndarray | None = None,
    subspace: Subspace | None = None,
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
    subspace : Subspace, optional
        Searched besides the Krylov space: all residuals stay orthogonal to it.
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
    Saad, Y., Yeung, M., Erhel, J., Guyomarc'h, F. (2000), SIAM J. Sci. Comput. 21, 1909 (conjugate
    gradients with a subspace).

    Notes
    -----
    Of the functional ``b . x`` the error is of second order in the residual as long as the
    residual is orthogonal to the first guess. A first guess alone loses that; a subspace that
    holds it does not.

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
    if subspace is not None:
        subspace.start(x, r)
    z = solve(r)
    p = z.copy()
    if subspace is not None:
        subspace.remove(p)
    rho = np.dot(r, z)
    residual = float(np.linalg.norm(z) / norm_b)
    history: list[float] = []
    status = "converged" if residual <= tolerance else "limit"
    step = 0
    best, best_residual = x.copy(), residual
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
        if not residual < _DIVERGED * max(1.0, best_residual):
            status = "stalled"
            break
        if residual < best_residual and step % _KEEP == 0:
            best[:], best_residual = x, residual
        if residual <= tolerance:
            status = "converged"
        elif monitor is not None and monitor(step, x, residual):
            status = "stopped"
        else:
            fresh = np.dot(r, z)
            if subspace is not None:
                subspace.remove(z)
            _extend(p, z, b.dtype.type(fresh / rho))
            rho = fresh
    if status == "stalled" and not residual <= best_residual:
        x, residual = best, best_residual
    return KrylovResult(x, residual, step, products, status, np.array(history))


def cocr(
    operator,
    b: np.ndarray,
    preconditioner: Callable[[np.ndarray], np.ndarray] | None = None,
    *,
    start: np.ndarray | None = None,
    tolerance: float = 1e-5,
    limit: int = 2000,
    monitor: Callable[[int, np.ndarray, float], bool] | None = None,
) -> KrylovResult:
    """Conjugate orthogonal conjugate residuals: smoother than `cocg`, a vector more.

    Parameters are those of `cocg`.

    References
    ----------
    Sogabe, T., Zhang, S.-L. (2007), J. Comput. Appl. Math. 199, 297.
    """
    solve = preconditioner or (lambda r: r.copy())
    x = np.zeros_like(b) if start is None else start.astype(b.dtype).copy()
    norm_b = float(np.linalg.norm(solve(b)))
    if norm_b == 0:
        return KrylovResult(np.zeros_like(b), 0.0, 0, 0, "converged", np.empty(0))
    products = 1
    z = solve(b) if start is None else solve(b - operator.matvec(x))
    p, az = z.copy(), operator.matvec(z)
    products += start is not None
    q = az.copy()
    rho = np.dot(z, az)
    history: list[float] = []
    residual = float(np.linalg.norm(z)) / norm_b
    status = "converged" if residual <= tolerance else "limit"
    while status == "limit" and len(history) < limit:
        mq = solve(q)
        qmq = np.dot(q, mq)
        if qmq == 0 or rho == 0 or not np.isfinite(qmq):
            status = "stalled"
            break
        _step(x, z, p, mq, b.dtype.type(rho / qmq))
        residual = float(np.linalg.norm(z)) / norm_b
        history.append(residual)
        if residual <= tolerance:
            status = "converged"
        elif not residual < _DIVERGED:
            status = "stalled"
        elif monitor is not None and monitor(len(history), x, residual):
            status = "stopped"
        else:
            az = operator.matvec(z)
            products += 1
            fresh = np.dot(z, az)
            beta = b.dtype.type(fresh / rho)
            _extend(p, z, beta)
            _extend(q, az, beta)
            rho = fresh
    return KrylovResult(x, residual, len(history), products, status, np.array(history))


def bicgstab(
    operator,
    b: np.ndarray,
    preconditioner: Callable[[np.ndarray], np.ndarray] | None = None,
    *,
    start: np.ndarray | None = None,
    tolerance: float = 1e-5,
    limit: int = 2000,
    monitor: Callable[[int, np.ndarray, float], bool] | None = None,
) -> KrylovResult:
    """Stabilized biconjugate gradients: two products a step, no need of symmetry.

    Parameters are those of `cocg`; the monitor is given NaN for the residual, which the method
    does not offer on its way.

    References
    ----------
    van der Vorst, H. A. (1992), SIAM J. Sci. Stat. Comput. 13, 631; the implementation is scipy's.
    """
    from scipy.sparse.linalg import LinearOperator
    from scipy.sparse.linalg import bicgstab as scipy_bicgstab

    solve = preconditioner or (lambda r: r.copy())
    counted = [0, 0]
    last = [np.zeros_like(b) if start is None else start.astype(b.dtype)]

    def product(v: np.ndarray) -> np.ndarray:
        counted[0] += 1
        return solve(operator.matvec(v.astype(b.dtype, copy=False)))

    def after_step(x: np.ndarray) -> None:
        counted[1] += 1
        if monitor is not None and monitor(counted[1], x, float("nan")):
            last[0] = x.copy()
            raise _StoppedError

    rhs = solve(b)
    norm_b = float(np.linalg.norm(rhs))
    if norm_b == 0:
        return KrylovResult(np.zeros_like(b), 0.0, 0, 0, "converged", np.empty(0))
    system = LinearOperator(operator.shape, matvec=product, dtype=b.dtype)
    try:
        x, info = scipy_bicgstab(
            system, rhs, x0=last[0], rtol=tolerance, maxiter=limit, callback=after_step
        )
        status = "converged" if info == 0 else ("limit" if info > 0 else "stalled")
    except _StoppedError:
        x, status = last[0], "stopped"
    residual = float(np.linalg.norm(rhs - product(x)) / norm_b)
    return KrylovResult(x, residual, counted[1], counted[0], status, np.array([residual]))


class _StoppedError(Exception):
    """Ends a library's iteration from its callback."""


def gmres(
    operator,
    b: np.ndarray,
    preconditioner: Callable[[np.ndarray], np.ndarray] | None = None,
    *,
    start: np.ndarray | None = None,
    tolerance: float = 1e-5,
    limit: int = 2000,
    monitor: Callable[[int, np.ndarray, float], bool] | None = None,
    restart: int = 80,
) -> KrylovResult:
    """Generalized minimal residuals, restarted: slower than `cocg`, but it cannot break down.

    Parameters are those of `cocg`; `restart` vectors are kept. The monitor sees the iterate at
    every restart only.

    References
    ----------
    Saad, Y., Schultz, M. H. (1986), SIAM J. Sci. Stat. Comput. 7, 856; the implementation is
    scipy's.
    """
    from scipy.sparse.linalg import LinearOperator
    from scipy.sparse.linalg import gmres as scipy_gmres

    solve = preconditioner or (lambda r: r.copy())
    counted = [0]

    def product(v: np.ndarray) -> np.ndarray:
        counted[0] += 1
        return solve(operator.matvec(v))

    # Preconditioned from the left by hand, so that the residual is the one `cocg` reports.
    system = LinearOperator(operator.shape, matvec=product, dtype=b.dtype)
    rhs = solve(b)
    norm_b = float(np.linalg.norm(rhs))
    x = np.zeros_like(b) if start is None else start.astype(b.dtype)
    if norm_b == 0:
        return KrylovResult(x, 0.0, 0, 0, "converged", np.empty(0))
    history: list[float] = []
    status = "limit"
    while status == "limit" and len(history) < limit:
        inner: list[float] = []
        x, info = scipy_gmres(
            system,
            rhs,
            x0=x,
            rtol=tolerance,
            restart=min(restart, limit - len(history)),
            maxiter=1,
            callback=inner.append,
            callback_type="pr_norm",
        )
        history += [float(v) for v in inner]
        if not inner:
            history.append(history[-1] if history else 0.0)
        if info == 0:
            status = "converged"
        elif monitor is not None and monitor(len(history), x, history[-1]):
            status = "stopped"
    residual = float(np.linalg.norm(rhs - product(x)) / norm_b)
    return KrylovResult(x, residual, len(history), counted[0], status, np.array(history))


#: The methods by name, as a study's ``[solver] method`` gives them.
METHODS = {"cocg": cocg, "cocr": cocr, "bicgstab": bicgstab, "gmres": gmres}


@njit(nogil=True, cache=True)
def _products(rows, x):  # pragma: no cover - compiled
    out = np.zeros(len(rows), np.complex128)
    for k in range(len(rows)):
        for i in range(len(x)):
            out[k] += rows[k, i] * x[i]
    return out


@njit(nogil=True, cache=True)
def _add(rows, weights, x):  # pragma: no cover - compiled
    for k in range(len(rows)):
        for i in range(len(x)):
            x[i] += weights[k] * rows[k, i]


@njit(nogil=True, cache=True)
def _step(x, r, p, q, a):  # pragma: no cover - compiled
    for i in range(len(x)):
        x[i] += a * p[i]
        r[i] -= a * q[i]


@njit(nogil=True, cache=True)
def _extend(p, z, beta):  # pragma: no cover - compiled
    for i in range(len(p)):
        p[i] = z[i] + beta * p[i]
