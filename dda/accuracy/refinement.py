"""Solve coarse to fine until the error is what was asked for."""

from __future__ import annotations

import math
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from .extrapolation import Estimate, extrapolate

#: Cells across the largest extent, coarse to fine; neighbours differ by a fifth to a third.
LADDER = (12, 16, 20, 26, 32, 40, 50, 64, 80, 100, 128, 160)
# Fewer levels than this do not tell a trend from the irregular part of the error.
_LEAST_LEVELS = 3


@dataclass(frozen=True)
class Level:
    """The cross sections at one spacing.

    Attributes
    ----------
    spacing : float
        nm.
    sections : (3,) tuple of float
        C_ext, C_abs, C_sca, nm^2.
    solver_error : (3,) tuple of float
        The solver's share of their errors, nm^2.
    cells, iterations, products : int
    residual : float
    status : str
    seconds : float
    """

    spacing: float
    sections: tuple[float, float, float]
    solver_error: tuple[float, float, float]
    cells: int
    iterations: int
    products: int
    residual: float
    status: str
    seconds: float


@dataclass(frozen=True)
class Refined:
    """Cross sections with error bars.

    Attributes
    ----------
    sections, spacing_error, solver_error : (3,) tuple of float
        C_ext, C_abs, C_sca, nm^2, and the two parts of their errors.
    estimates : tuple of Estimate
        The extrapolations of C_ext, C_abs, C_sca; empty with a single level.
    levels : tuple of Level
        Coarse to fine.
    stopped : {"target", "ladder", "memory", "minutes", "asked"}
        Why there is no finer level; "asked" when the spacing was given.
    """

    sections: tuple[float, float, float]
    spacing_error: tuple[float, float, float]
    solver_error: tuple[float, float, float]
    estimates: tuple[Estimate, ...]
    levels: tuple[Level, ...]
    stopped: str

    @property
    def error(self) -> tuple[float, float, float]:
        """All parts added, nm^2."""
        a, b, c = (x + y for x, y in zip(self.spacing_error, self.solver_error, strict=True))
        return a, b, c

    @property
    def relative(self) -> float:
        """The larger of the relative errors of C_ext and C_abs (see `relative_error`)."""
        return relative_error(self.sections, self.error)


def relative_error(sections: Sequence[float], error: Sequence[float]) -> float:
    """Error by which a target is judged: relative, on C_ext and C_abs.

    A C_abs below a hundredth of C_ext is asked for to the target of that hundredth: its own
    relative error means nothing for a particle that hardly absorbs.
    """
    c_ext, c_abs = abs(sections[0]), abs(sections[1])
    return max(error[0] / c_ext, error[1] / max(c_abs, 1e-2 * c_ext)) if c_ext else math.inf


def refine_to(
    solve: Callable[[int], Level],
    target: float,
    size: float,
    *,
    ladder: Sequence[int] = LADDER,
    fits: Callable[[int], bool] = lambda across: True,
    seconds: float = math.inf,
) -> Refined:
    """Climb the ladder of cells until the error is below the target.

    Parameters
    ----------
    solve : callable
        ``solve(cells across the largest extent)`` solves one level.
    target : float
        Relative, on C_ext and C_abs, e.g. 0.02.
    size : float
        Largest extent of the particle, nm.
    ladder : sequence of int
        Cells across, coarse to fine.
    fits : callable
        Whether a level's memory is there.
    seconds : float
        No level is begun that would, by the growth so far, end after this time.

    Returns
    -------
    Refined
        Extrapolated to zero spacing.
    """
    started = time.perf_counter()
    levels: list[Level] = []
    best: Refined | None = None
    stopped = "ladder"
    for across in ladder:
        if not fits(across):
            stopped = "memory"
            break
        if levels and _expected(levels, size / across) + time.perf_counter() - started > seconds:
            stopped = "minutes"
            break
        levels.append(solve(across))
        if len(levels) >= _LEAST_LEVELS:
            best = combined(levels, size, "target")
            if best.relative <= target:
                return best
    if len(levels) < 2:
        # Not even a pair: one level more is always solved, the error of a single one is unknown.
        for across in [a for a in ladder if a not in {round(size / v.spacing) for v in levels}]:
            levels.append(solve(across))
            if len(levels) == 2:
                break
    return combined(levels, size, stopped)


def refine_at(
    solve: Callable[[float], Level],
    across: float,
    size: float,
    *,
    coarser: Sequence[float] | None = None,
) -> Refined:
    """Solve at a given fineness and at two coarser ones that tell its error.

    Parameters
    ----------
    solve, size
        As in `refine_to`.
    across : float
        Cells across asked for.
    coarser : sequence of float, optional
        Cells across of the coarser levels, coarse to fine; about a half and 0.71 of `across` by
        default.

    Returns
    -------
    Refined
        The values at the spacing asked for, not extrapolated.
    """
    if coarser is None:
        coarser = sorted({math.floor(across * f) for f in (0.5, 0.71)})
        coarser = [n for n in coarser if 4 <= n < across]
    levels = [solve(n) for n in coarser] + [solve(across)]
    finest = levels[-1]
    if len(levels) == 1:
        nan = (math.nan,) * 3
        return Refined(finest.sections, nan, finest.solver_error, (), (finest,), "asked")
    estimates = _estimates(levels, size)
    e, a, s = (estimate.finest_error for estimate in estimates)
    return Refined(
        finest.sections, (e, a, s), finest.solver_error, estimates, tuple(levels), "asked"
    )


def combined(levels: Sequence[Level], size: float, stopped: str) -> Refined:
    """Extrapolate levels, coarse to fine, to zero spacing."""
    estimates = _estimates(levels, size)
    ext, absorbed, scattered = estimates
    return Refined(
        (ext.value, absorbed.value, scattered.value),
        (ext.spacing_error, absorbed.spacing_error, scattered.spacing_error),
        (ext.solver_error, absorbed.solver_error, scattered.solver_error),
        estimates,
        tuple(levels),
        stopped,
    )


def _estimates(levels: Sequence[Level], size: float) -> tuple[Estimate, ...]:
    d = np.array([level.spacing for level in levels])
    values = np.array([level.sections for level in levels])
    errors = np.array([level.solver_error for level in levels])
    return tuple(
        extrapolate(d, values[:, i], errors[:, i], scale=values[-1, 0], size=size) for i in range(3)
    )


def _expected(levels: Sequence[Level], spacing: float) -> float:
    """Seconds of the next level: cells times steps grow about as d^-3.5."""
    last = levels[-1]
    return last.seconds * (last.spacing / spacing) ** 3.5
