"""What every Krylov method is told and what it returns."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any, Protocol

import numpy as np

from .subspace import Subspace


class Operator(Protocol):
    """A square matrix that is known by its products."""

    @property
    def shape(self) -> tuple[int, int]: ...

    @property
    def dtype(self) -> Any: ...

    def matvec(self, vector: np.ndarray) -> np.ndarray: ...


Preconditioner = Callable[[np.ndarray], np.ndarray]
Monitor = Callable[[int, np.ndarray, float], bool]


@dataclass(frozen=True, eq=False)
class Iteration:
    """How to iterate.

    Attributes
    ----------
    tolerance : float
        Stop when the preconditioned residual's norm is below this part of that of `b`.
    limit : int
        Most steps.
    start : ndarray, optional
        First iterate; zero by default.
    subspace : Subspace, optional
        Searched besides the Krylov space. `cocg` keeps all residuals orthogonal to it, the others
        take no more than the first iterate from it.
    monitor : callable, optional
        Called as ``monitor(step, x, residual)`` after each step; True stops the iteration.
    exact : operator, optional
        The operator in double precision where the one iterated with is in single: the answer, and
        the residual from time to time, are then those of this one.
    restart : int
        Vectors kept by `gmres`.
    shadow : int
        Dimension s of the shadow space of `idr`.
    """

    tolerance: float = 1e-5
    limit: int = 2000
    start: np.ndarray | None = None
    subspace: Subspace | None = None
    monitor: Monitor | None = None
    exact: Operator | None = None
    restart: int = 80
    shadow: int = 4


@dataclass(frozen=True, eq=False)
class KrylovResult:
    """What an iteration arrived at.

    Attributes
    ----------
    x : ndarray
        The best iterate by residual.
    residual : float
        ``|b - A x| / |b|`` of it, in the norm of the preconditioned residual where a
        preconditioner was given.
    iterations, products : int
        Steps taken and products with the operator, those in double precision included.
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


def first_iterate(operator, b: np.ndarray, rules: Iteration) -> tuple[np.ndarray, np.ndarray, int]:
    """First iterate, what it leaves of `b`, and the products that took."""
    x = np.zeros_like(b) if rules.start is None else rules.start.astype(b.dtype)
    r, products = b.copy(), 0
    if rules.start is not None:
        r -= operator.matvec(x)
        products = 1
    if rules.subspace is not None:
        rules.subspace.start(x, r)
    return x, r, products


#: A residual so many times that of the right-hand side is taken for a breakdown. Healthy runs on
#: silver pass through residuals of 50.
DIVERGED = 1e4


def judged(rules: Iteration, step: int, x: np.ndarray, residual: float) -> str:
    """What a step comes to: "converged", "stalled", "stopped", or "limit" to go on."""
    if residual <= rules.tolerance:
        return "converged"
    if not residual < DIVERGED:
        return "stalled"
    if rules.monitor is not None and rules.monitor(step, x, residual):
        return "stopped"
    return "limit"


def nothing_to_do(b: np.ndarray) -> KrylovResult:
    """The solution for a right-hand side that vanishes."""
    return KrylovResult(np.zeros_like(b), 0.0, 0, 0, "converged", np.empty(0))


def identity(r: np.ndarray) -> np.ndarray:
    """No preconditioner."""
    return r.copy()
