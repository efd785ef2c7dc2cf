"""Krylov methods, all called alike.

Each takes an operator (anything with `matvec`, `shape` and `dtype`), a right-hand side, a
preconditioner (a function of a vector) and an `Iteration`, and knows nothing else of what it
solves.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from .conjugate import cocg, cocr
from .general import bicgstab, gmres, idr
from .iteration import Iteration, KrylovResult, Preconditioner
from .subspace import Subspace

__all__ = [
    "METHODS", "Iteration", "KrylovResult", "Preconditioner", "Subspace", "bicgstab", "cocg",
    "cocr", "gmres", "idr", "iterate",
]  # fmt: skip

#: The methods by name, as a study's ``[solver] method`` gives them.
METHODS: dict[str, Callable[..., KrylovResult]] = {
    "cocg": cocg,
    "cocr": cocr,
    "bicgstab": bicgstab,
    "gmres": gmres,
    "idr": idr,
}

# What one round of single precision takes the residual down to, and the most rounds.
_ROUND = 1e-4
_ROUNDS = 20


def iterate(
    method: str,
    operator,
    b: np.ndarray,
    preconditioner: Preconditioner | None = None,
    rules: Iteration = Iteration(),  # noqa: B008 - frozen
) -> KrylovResult:
    """Solve with a method; where it breaks down, GMRES goes on from its best iterate.

    Parameters
    ----------
    method : str
        A key of `METHODS`.
    operator, b, preconditioner, rules
        As in `cocg`.

    Returns
    -------
    KrylovResult
    """
    first = _run(METHODS[method], operator, b, preconditioner, rules)
    if first.status != "stalled":
        return first
    rest = replace(
        rules, start=first.x, subspace=None, limit=max(1, rules.limit - first.iterations)
    )
    second = _run(gmres, operator, b, preconditioner, rest)
    return _after(first, second)


def _run(method, operator, b, preconditioner, rules: Iteration) -> KrylovResult:
    if rules.exact is None or method is cocg:
        return method(operator, b, preconditioner, rules)
    return _refined(method, operator, b, preconditioner, rules)


def _refined(method, operator, b, preconditioner, rules: Iteration) -> KrylovResult:
    """Rounds in single precision, each for what the sum of the earlier ones leaves in double.

    Wilkinson, J. H. (1963), Rounding Errors in Algebraic Processes (iterative refinement).
    """
    solve = preconditioner or (lambda r: r)
    exact, low = rules.exact, operator.dtype
    assert exact is not None
    norm_b = float(np.linalg.norm(solve(b.astype(low))))
    x = np.zeros_like(b) if rules.start is None else rules.start.astype(b.dtype)
    done = KrylovResult(x, 1.0, 0, 0, "limit", np.empty(0))
    first = True
    for _ in range(_ROUNDS):
        r = b - exact.matvec(x) if (x != 0).any() else b
        left = float(np.linalg.norm(solve(r.astype(low)))) / norm_b if norm_b > 0 else 0.0
        done = replace(done, x=x, residual=left, products=done.products + 1)
        if left <= rules.tolerance:
            return replace(done, status="converged")
        if done.status not in ("limit", "converged") or done.iterations >= rules.limit:
            return done
        round_ = method(operator, (r / left).astype(low), preconditioner, replace(
            rules, exact=None, start=None, subspace=rules.subspace if first else None,
            tolerance=max(_ROUND, 0.5 * rules.tolerance / left),
            limit=rules.limit - done.iterations,
            monitor=_shifted(rules.monitor, x, left, done.iterations),
        ))  # fmt: skip
        first = False
        x = x + left * round_.x.astype(b.dtype)
        done = _after(done, replace(round_, x=x, residual=left * round_.residual))
        if round_.iterations == 0:
            return replace(done, status="stalled")
    return done


def _shifted(monitor, x: np.ndarray, scale: float, steps: int):
    if monitor is None:
        return None
    return lambda step, part, residual: monitor(steps + step, x + scale * part, scale * residual)


def _after(first: KrylovResult, second: KrylovResult) -> KrylovResult:
    return KrylovResult(
        second.x,
        second.residual,
        first.iterations + second.iterations,
        first.products + second.products,
        second.status,
        np.concatenate([first.history, second.history]),
    )
