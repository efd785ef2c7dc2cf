"""Conjugate gradients and conjugate residuals of complex symmetric systems."""

from __future__ import annotations

import numpy as np
from numba import njit

from .iteration import (
    DIVERGED,
    Iteration,
    KrylovResult,
    Preconditioner,
    first_iterate,
    identity,
    judged,
    nothing_to_do,
)

# An iterate is kept every so many steps, to fall back on when the recurrence breaks down.
_KEEP = 20

# With products in single precision the residual is computed anew in double whenever it has fallen
# to this part of the largest one since the last time.
_RENEW = 3e-3


def cocg(
    operator,
    b: np.ndarray,
    preconditioner: Preconditioner | None = None,
    rules: Iteration = Iteration(),  # noqa: B008 - frozen
) -> KrylovResult:
    """Conjugate orthogonal conjugate gradients.

    Parameters
    ----------
    operator
        Complex symmetric; has `matvec`.
    b : ndarray of complex, shape (n,)
    preconditioner : callable, optional
        Complex symmetric approximation of the inverse.
    rules : Iteration

    Returns
    -------
    KrylovResult

    References
    ----------
    van der Vorst, H. A., Melissen, J. B. M. (1990), IEEE Trans. Magn. 26, 706.
    Saad, Y., Yeung, M., Erhel, J., Guyomarc'h, F. (2000), SIAM J. Sci. Comput. 21, 1909 (conjugate
    gradients with a subspace).
    van der Vorst, H. A., Ye, Q. (2000), SIAM J. Sci. Comput. 22, 835 (residuals renewed).

    Notes
    -----
    Of the functional ``b . x`` the error is of second order in the residual as long as the
    residual is orthogonal to the first guess. A first guess alone loses that; a subspace that
    holds it does not.

    With `rules.exact` the answer is added up in double precision and everything else kept in that
    of `operator`. The residual is then renewed in double now and then; the search direction is
    kept, so that the conjugacy of the steps survives.

    Examples
    --------
    >>> import numpy as np
    >>> from scipy.sparse.linalg import aslinearoperator
    >>> a = np.array([[4 + 1j, 1], [1, 3]])
    >>> b = np.array([1.0, 2.0], complex)
    >>> result = cocg(aslinearoperator(a), b, rules=Iteration(tolerance=1e-12))
    >>> result.status, bool(np.allclose(a @ result.x, [1, 2]))
    ('converged', True)
    """
    solve = preconditioner or identity
    exact, subspace = rules.exact, rules.subspace
    x, r, products = first_iterate(operator if exact is None else exact, b, rules)
    working = operator.dtype if exact is not None else b.dtype
    r = r.astype(working, copy=False)
    norm_b = float(np.linalg.norm(solve(b.astype(working, copy=False))))
    if norm_b == 0:
        return nothing_to_do(b)
    z = solve(r)
    p = z.copy()
    if subspace is not None:
        subspace.remove(p)
    rho = _dot(r, z)
    residual = float(np.linalg.norm(z)) / norm_b
    history: list[float] = []
    status = "converged" if residual <= rules.tolerance else "limit"
    step = 0
    best, best_residual, best_step, largest = x.copy(), residual, 0, residual
    while status == "limit" and step < rules.limit:
        step += 1
        q = operator.matvec(p)
        products += 1
        pq = _dot(p, q)
        if pq == 0 or rho == 0 or not np.isfinite(pq):
            status = "stalled"  # the recurrence broke down: x is still the last good iterate
            break
        _step(x, r, p, q, x.dtype.type(rho / pq), r.dtype.type(rho / pq))
        z = solve(r)
        residual = float(np.linalg.norm(z)) / norm_b
        largest = max(largest, residual)
        if exact is not None and residual <= max(_RENEW * largest, rules.tolerance):
            r = (b - exact.matvec(x)).astype(working)
            products += 1
            z = solve(r)
            residual = largest = float(np.linalg.norm(z)) / norm_b
        history.append(residual)
        if not residual < DIVERGED * max(1.0, best_residual):
            status = "stalled"
            break
        if residual < best_residual and step % _KEEP == 0:
            best[:], best_residual, best_step = x, residual, step
        if residual <= rules.tolerance:
            status = "converged"
        elif rules.monitor is not None and rules.monitor(step, x, residual):
            status = "stopped"
        else:
            fresh = _dot(r, z)
            if subspace is not None:
                subspace.remove(z)
            _extend(p, z, p.dtype.type(fresh / rho))
            rho = fresh
    fall_back = status == "stalled" or (status == "limit" and 2 * best_step > step)
    if fall_back and not residual <= best_residual:
        x, residual = best, best_residual
    return KrylovResult(x, residual, step, products, status, np.array(history))


def cocr(
    operator,
    b: np.ndarray,
    preconditioner: Preconditioner | None = None,
    rules: Iteration = Iteration(),  # noqa: B008 - frozen
) -> KrylovResult:
    """Conjugate orthogonal conjugate residuals: smoother than `cocg`, a vector more.

    Parameters are those of `cocg`.

    References
    ----------
    Sogabe, T., Zhang, S.-L. (2007), J. Comput. Appl. Math. 199, 297.
    """
    solve = preconditioner or identity
    norm_b = float(np.linalg.norm(solve(b)))
    if norm_b == 0:
        return nothing_to_do(b)
    x, r, products = first_iterate(operator, b, rules)
    z = solve(r)
    p, az = z.copy(), operator.matvec(z)
    products += 1
    q = az.copy()
    rho = _dot(z, az)
    history: list[float] = []
    residual = float(np.linalg.norm(z)) / norm_b
    status = "converged" if residual <= rules.tolerance else "limit"
    while status == "limit" and len(history) < rules.limit:
        mq = solve(q)
        qmq = _dot(q, mq)
        if qmq == 0 or rho == 0 or not np.isfinite(qmq):
            status = "stalled"
            break
        a = b.dtype.type(rho / qmq)
        _step(x, z, p, mq, a, a)
        residual = float(np.linalg.norm(z)) / norm_b
        history.append(residual)
        status = judged(rules, len(history), x, residual)
        if status == "limit":
            az = operator.matvec(z)
            products += 1
            fresh = _dot(z, az)
            beta = b.dtype.type(fresh / rho)
            _extend(p, z, beta)
            _extend(q, az, beta)
            rho = fresh
    return KrylovResult(x, residual, len(history), products, status, np.array(history))


def _dot(a: np.ndarray, b: np.ndarray) -> complex:
    """Without a conjugate; summed in double precision."""
    if a.dtype == np.complex128:
        return complex(np.dot(a, b))
    return complex(_long_dot(a, b))


@njit(nogil=True, cache=True, fastmath=True)
def _long_dot(a, b):  # pragma: no cover - compiled
    total = 0j
    for i in range(len(a)):
        total += np.complex128(a[i]) * np.complex128(b[i])
    return total


@njit(nogil=True, cache=True)
def _step(x, r, p, q, a, a_of_r):  # pragma: no cover - compiled
    for i in range(len(x)):
        x[i] += a * p[i]
        r[i] -= a_of_r * q[i]


@njit(nogil=True, cache=True)
def _extend(p, z, beta):  # pragma: no cover - compiled
    for i in range(len(p)):
        p[i] = z[i] + beta * p[i]
