"""Stop when the quantities asked for have settled, not when the residual has."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Protocol

import numpy as np

# Quantities are looked at every so many steps (twice as often at first), and their spread is
# taken over this part of all steps so far: a slow method must hold still for longer than a quick
# one.
_STRIDE = 4
_EARLY = 24
_WINDOW = 0.3
_LEAST_LOOKS = 6
_UNSETTLED = 5.0

# Where the error is of second order in the residual, only iterates are looked at whose residual is
# at most so many times the lowest of the last half of the steps: conjugate gradients throw in
# iterates that are off by far, and tell by their residual. What a value was off by when the
# residual was larger says what it is off by now; the factor makes up for what the rule of thumb
# leaves out. The plain spread of those values counts where it is smaller. Chosen on 134 mirror
# sectors of spheres, cubes and dimers of silver and gold: of four tolerances, no error was above
# 0.7 of what was allowed, with a quarter fewer products at 1e-3 than the spread of all iterates
# takes.
_GOOD = 1.5
_WINDOW_SCALED = 0.8
_MARGIN = 8.0
_WINDOW_GOOD = 0.4
_LEAST_GOOD = 8

# After a start from neighbouring solutions the values hardly move at first, right or wrong: they
# are watched for longer, and the estimate is never below this part of what is allowed.
_WINDOW_KNOWN = 0.5
_LEAST_LOOKS_KNOWN = 8
_LEAST_PART = 1 / 3


class Settling:
    """Watches quantities of an iterate; called after every step of a Krylov method.

    Parameters
    ----------
    quantities : callable
        ``quantities(x)`` gives the array (q,) of what is asked for.
    allowed : callable
        ``allowed(values)`` gives how far each may still move, shape (q,).
    after_step : callable, optional
        Called as ``after_step(step, x, residual)`` for progress; True stops the iteration.
    orders : float or (q,)
        Orders in the residual of the quantities' errors under conjugate gradients.

    Attributes
    ----------
    by_residual : bool
        Whether errors are judged by the residuals and `orders`, as conjugate gradients allow; set
        before the first step.

    Notes
    -----
    A Krylov method on a system with slowly damped short waves goes on moving in directions that
    no answer sees, so the residual says little. The estimate of the error of a quantity is the
    spread of its values over the last third of the steps, widened while the residual is large:
    a mode that has not shown yet may still come (one run in thirty on silver otherwise left an
    error four times its estimate). With `by_residual` it is the largest distance of an earlier
    value from the last, over most of the steps, scaled with that power of the residuals' ratio.
    """

    def __init__(
        self,
        quantities: Callable[[np.ndarray], np.ndarray],
        allowed: Callable[[np.ndarray], np.ndarray],
        after_step: Callable[[int, np.ndarray, float], bool] | None = None,
        orders: float | Sequence[float] = 2,
    ):
        self._orders = orders
        self._quantities = quantities
        self._allowed = allowed
        self._after_step = after_step
        self._window, self._least_looks, self._least_part = _WINDOW, _LEAST_LOOKS, 0.0
        self._history: list[float] = []
        self.by_residual = False
        self.steps: list[int] = []
        self.values: list[np.ndarray] = []
        self.residuals: list[float] = []

    def __call__(self, step: int, x: np.ndarray, residual: float) -> bool:
        """Whether to stop."""
        residual = 1.0 if np.isnan(residual) else residual  # not known: taken for unsettled
        self._history.append(residual)
        stop = bool(self._after_step and self._after_step(step, x, residual))
        if step % (_STRIDE if step > _EARLY else _STRIDE // 2) == 0 and self._worth(residual):
            self.look(step, x, residual)
            stop = stop or self.settled
        return stop

    def start_is_known(self) -> None:
        """Tell that the iteration starts from neighbouring solutions."""
        self._window, self._least_looks = _WINDOW_KNOWN, _LEAST_LOOKS_KNOWN
        self._least_part = _LEAST_PART

    def look(self, step: int, x: np.ndarray, residual: float) -> None:
        """Record the quantities of an iterate."""
        self.steps.append(step)
        self.values.append(np.asarray(self._quantities(x), float))
        self.residuals.append(residual)

    @property
    def settled(self) -> bool:
        """Whether every quantity has stopped moving by more than is allowed."""
        if len(self.values) < self._least_looks:
            return False
        return bool(np.all(self.spread <= self._allowed(self.values[-1])))

    @property
    def spread(self) -> np.ndarray:
        """Error estimate of each quantity, shape (q,); infinite before there is one."""
        if len(self.values) < self._least_looks:
            return np.full(len(self.values[-1]) if self.values else 1, np.inf)
        if self.by_residual:
            spread = self._scaled(self._latest(_WINDOW_SCALED, self._least_looks))
            if len(self.values) >= _LEAST_GOOD:
                good = self.values[-self._latest(_WINDOW_GOOD, _LEAST_GOOD) :]
                spread = np.minimum(spread, np.ptp(np.array(good), axis=0))
        else:
            looks = self._latest(self._window, self._least_looks)
            spread = np.ptp(np.array(self.values[-looks:]), axis=0)
        spread = (1 + _UNSETTLED * min(self.residuals[-1], 1.0)) * spread
        if self._least_part:
            allowed = np.asarray(self._allowed(self.values[-1]), float)
            least = self._least_part * np.where(np.isfinite(allowed), allowed, allowed.min())
            spread = np.maximum(spread, least)
        return spread

    def _latest(self, window: float, least: int) -> int:
        """Number of looks in the last part of the steps."""
        first = self.steps[-1] * (1 - window)
        return max(least - 1, sum(s >= first for s in self.steps))

    def _scaled(self, looks: int) -> np.ndarray:
        """Largest distance of the last looks' values from the last, by their residuals."""
        values = np.array(self.values[-looks:])
        ratio = self.residuals[-1] / np.maximum(self.residuals[-looks:], 1e-300)
        shrunk = np.minimum(1, _MARGIN * ratio[:, None] ** np.asarray(self._orders))
        return (shrunk * abs(values - values[-1])).max(axis=0)

    def _worth(self, residual: float) -> bool:
        """Whether an iterate is worth looking at."""
        recent = self._history[len(self._history) // 2 :]
        return not self.by_residual or residual <= _GOOD * min(recent)


class Goal(Protocol):
    """What a solution is for: says when a sector is solved well enough.

    `watch` makes the `Settling` for a sector and the light at its cells; `add` is told the
    sector's last iterate, so that later sectors are judged by their part in the whole.
    """

    def watch(self, sector, incident: np.ndarray, after_step: Callable | None) -> Settling: ...

    def add(self, watch: Settling) -> None: ...
