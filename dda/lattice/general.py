"""Krylov methods that need no symmetry: BiCGSTAB, GMRES and IDR(s)."""

from __future__ import annotations

import numpy as np

from .iteration import (
    Iteration,
    KrylovResult,
    Preconditioner,
    first_iterate,
    identity,
    judged,
    nothing_to_do,
)
from .subspace import add, dots


def bicgstab(
    operator,
    b: np.ndarray,
    preconditioner: Preconditioner | None = None,
    rules: Iteration = Iteration(),  # noqa: B008 - frozen
) -> KrylovResult:
    """Stabilized biconjugate gradients: two products a step.

    Parameters are those of `cocg`; the monitor is given NaN for the residual, which the method
    does not offer on its way.

    References
    ----------
    van der Vorst, H. A. (1992), SIAM J. Sci. Stat. Comput. 13, 631; the implementation is scipy's.
    """
    from scipy.sparse.linalg import LinearOperator
    from scipy.sparse.linalg import bicgstab as scipy_bicgstab

    solve = preconditioner or identity
    x, _, products = first_iterate(operator, b, rules)
    counted = [products, 0]
    last = [x]

    def product(v: np.ndarray) -> np.ndarray:
        counted[0] += 1
        return solve(operator.matvec(v.astype(b.dtype, copy=False)))

    def after_step(x: np.ndarray) -> None:
        counted[1] += 1
        if rules.monitor is not None and rules.monitor(counted[1], x, float("nan")):
            last[0] = x.copy()
            raise _StoppedError

    rhs = solve(b)
    norm_b = float(np.linalg.norm(rhs))
    if norm_b == 0:
        return nothing_to_do(b)
    system = LinearOperator(operator.shape, matvec=product, dtype=b.dtype)
    try:
        x, info = scipy_bicgstab(
            system, rhs, x0=last[0], rtol=rules.tolerance, maxiter=rules.limit, callback=after_step
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
    preconditioner: Preconditioner | None = None,
    rules: Iteration = Iteration(),  # noqa: B008 - frozen
) -> KrylovResult:
    """Generalized minimal residuals, restarted: slower than `cocg`, but it cannot break down.

    Parameters are those of `cocg`. The monitor sees the iterate at every restart only.

    References
    ----------
    Saad, Y., Schultz, M. H. (1986), SIAM J. Sci. Stat. Comput. 7, 856; the implementation is
    scipy's.
    """
    from scipy.sparse.linalg import LinearOperator
    from scipy.sparse.linalg import gmres as scipy_gmres

    solve = preconditioner or identity
    x, _, products = first_iterate(operator, b, rules)
    counted = [products]

    def product(v: np.ndarray) -> np.ndarray:
        counted[0] += 1
        return solve(operator.matvec(v))

    # Preconditioned from the left by hand, so that the residual is the one `cocg` reports.
    system = LinearOperator(operator.shape, matvec=product, dtype=b.dtype)
    rhs = solve(b)
    norm_b = float(np.linalg.norm(rhs))
    if norm_b == 0:
        return nothing_to_do(b)
    history: list[float] = []
    status = "limit"
    while status == "limit" and len(history) < rules.limit:
        inner: list[float] = []
        x, info = scipy_gmres(
            system,
            rhs,
            x0=x,
            rtol=rules.tolerance,
            restart=min(rules.restart, rules.limit - len(history)),
            maxiter=1,
            callback=inner.append,
            callback_type="pr_norm",
        )
        history += [float(v) for v in inner]
        if not inner:
            history.append(history[-1] if history else 0.0)
        if info == 0:
            status = "converged"
        elif rules.monitor is not None and rules.monitor(len(history), x, history[-1]):
            status = "stopped"
    residual = float(np.linalg.norm(rhs - product(x)) / norm_b)
    return KrylovResult(x, residual, len(history), counted[0], status, np.array(history))


# The stabilizing factor is enlarged where the residual and its image are nearly orthogonal
# (Sleijpen & van der Vorst 1995, Numer. Algorithms 10, 203).
_LEAST_ANGLE = 0.7


def idr(
    operator,
    b: np.ndarray,
    preconditioner: Preconditioner | None = None,
    rules: Iteration = Iteration(),  # noqa: B008 - frozen
) -> KrylovResult:
    """Induced dimension reduction, IDR(s): a product a step, 3 s + 5 vectors.

    Parameters are those of `cocg`.

    References
    ----------
    Sonneveld, P., van Gijzen, M. B. (2008), SIAM J. Sci. Comput. 31, 1035.
    van Gijzen, M. B., Sonneveld, P. (2011), ACM Trans. Math. Softw. 38, 5 (the variant with
    biorthogonal residuals, which is this one).
    """
    solve = preconditioner or identity
    norm_b = float(np.linalg.norm(solve(b)))
    if norm_b == 0:
        return nothing_to_do(b)
    x, r, products = first_iterate(operator, b, rules)
    r = solve(r)  # preconditioned from the left, so that the residual is the one `cocg` reports
    n, s = len(b), min(rules.shadow, len(b))
    shadow = _shadow_space(n, s).astype(b.dtype)  # conjugated already
    images = np.zeros((s, n), b.dtype)
    steps = np.zeros((s, n), b.dtype)
    m = np.eye(s, dtype=complex)
    omega = 1.0 + 0j
    residual = float(np.linalg.norm(r)) / norm_b
    history: list[float] = []
    status = "converged" if residual <= rules.tolerance else "limit"

    def moved(update: np.ndarray, image: np.ndarray, by: complex) -> None:
        nonlocal residual, status
        a = b.dtype.type(by)
        x[:] += a * update
        r[:] -= a * image
        residual = float(np.linalg.norm(r)) / norm_b
        history.append(residual)
        status = judged(rules, len(history), x, residual)
        if status == "limit" and len(history) >= rules.limit:
            status = "over"

    while status == "limit" and len(history) < rules.limit:
        f = dots(shadow, r)
        for k in range(s):
            c = _solve_lower(m[k:, k:], f[k:])
            v = r.copy()
            add(images[k:], -c.astype(b.dtype), v)
            v *= b.dtype.type(omega)
            add(steps[k:], c.astype(b.dtype), v)
            steps[k] = v
            images[k] = solve(operator.matvec(steps[k]))
            products += 1
            for i in range(k):
                a = b.dtype.type(np.dot(shadow[i], images[k]) / m[i, i])
                images[k] -= a * images[i]
                steps[k] -= a * steps[i]
            m[k:, k] = dots(shadow[k:], images[k])
            if m[k, k] == 0 or not np.isfinite(m[k, k]):
                status = "stalled"
                break
            moved(steps[k], images[k], f[k] / m[k, k])
            if status != "limit":
                break
            f[k + 1 :] -= f[k] / m[k, k] * m[k + 1 :, k]
        if status != "limit":
            break
        v = r.copy()
        t = solve(operator.matvec(v))
        products += 1
        omega = _stabilizing(t, r)
        if omega == 0:
            status = "stalled"
            break
        moved(v, t, omega)
    status = "limit" if status == "over" else status
    return KrylovResult(x, residual, len(history), products, status, np.array(history))


def _shadow_space(n: int, s: int) -> np.ndarray:
    """Orthonormal random vectors (s, n), the same every time."""
    random = np.random.default_rng(0).normal(size=(n, s, 2)) @ [1, 1j]
    return np.ascontiguousarray(np.linalg.qr(random)[0].T)


def _solve_lower(m: np.ndarray, f: np.ndarray) -> np.ndarray:
    from scipy.linalg import solve_triangular

    return solve_triangular(m, f, lower=True)


def _stabilizing(t: np.ndarray, r: np.ndarray) -> complex:
    norm_t, norm_r = float(np.linalg.norm(t)), float(np.linalg.norm(r))
    if norm_t == 0:
        return 0
    tr = complex(np.vdot(t, r))
    angle = abs(tr) / (norm_t * norm_r)
    omega = tr / norm_t**2
    return omega * _LEAST_ANGLE / angle if 0 < angle < _LEAST_ANGLE else omega
