"""How fast the error falls with the spacing, measured, and whether three methods agree at zero."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

import shapes
from dda.accuracy import extrapolate
from validation.cases import CASES
from validation.levels import level
from validation.results import Table, group, number, verdict

ACROSS = (12, 16, 20, 24, 28, 32)
SMOOTH = (
    "gold sphere 40 nm, 530 nm, host 1.33",
    "gold sphere 80 nm, 600 nm, host 1.33",
    "gold sphere 80 nm, 785 nm, host 1.33",
    "silver sphere 40 nm, 400 nm, host 1.33",
    "silica sphere 100 nm, 550 nm, host 1",
    "silicon sphere 100 nm, 500 nm, host 1",
    "silica 60 nm in gold 100 nm, 650 nm, host 1.33",
    "gold ellipsoid 40 x 20 x 20 nm, 620 nm, host 1.33",
    "copper ellipsoid 40 x 40 x 20 nm, 600 nm, host 1.33",
)
LEAST_SLOPE = 1.5  # the errors scatter around d^2; a staircase falls as d or not at all


@group("order", rank=16)
def order_for_smooth_bodies(quick: bool) -> Table:
    """Slope of the error in the spacing for smooth bodies with an exact solution."""
    text = f"""
Errors in % with {", ".join(map(str, ACROSS))} cells across against the exact value. The slope is
that of the least-squares line through log |error| over log d: 2 for the d² that the extrapolation
assumes. Errors that change sign on the way, or that are as small as the solver's (1e-4 here), have
no slope; they are left out ("-"). Allowed: no less than {LEAST_SLOPE:g} for C_ext.
"""
    columns = (
        "case", "source", "cross section", "errors, %", "slope", "allowed", "products", "verdict",
    )  # fmt: skip
    rows = []
    steps = ACROSS[:3] if quick else ACROSS
    for name in SMOOTH[4:5] if quick else SMOOTH:
        (case,) = [c for c in CASES if c.name == name]
        exact = case.reference()
        rungs = [
            level(case.particle(), case.wavelength, n, case.n_host, tolerance=1e-4, limit=2500)
            for n in steps
        ]
        products = str(sum(rung.products for rung in rungs))
        for q, label in enumerate(("C_ext", "C_abs")):
            if exact[q] == 0:
                continue
            errors = np.array([rung.sections[q] for rung in rungs]) / exact[q] - 1
            found = slope(steps, errors)
            good = verdict(found >= LEAST_SLOPE) if np.isfinite(found) and q == 0 else "-"
            rows.append(
                [case.name, case.source, label, ", ".join(f"{100 * e:+.2f}" for e in errors),
                 f"{found:.2f}" if np.isfinite(found) else "-",
                 f"≥ {LEAST_SLOPE:g}" if q == 0 else "-", products, good]
            )  # fmt: skip
    return Table("Order of the error: smooth bodies", text, columns, rows)


def slope(across: Sequence[int], errors: np.ndarray, least: float = 2e-4) -> float:
    """Least-squares slope of log |error| over log spacing; NaN if there is none.

    Parameters
    ----------
    across : sequence of int
        Cells across.
    errors : ndarray
        Relative.
    least : float
        Errors below it belong to the solver.
    """
    if np.any(errors * errors[0] <= 0) or np.any(np.abs(errors) < least):
        return float("nan")
    return float(-np.polyfit(np.log(across), np.log(np.abs(errors)), 1)[0])


# Name, particle, wavelength, cells across.
SHARP = (
    ("gold cube 40 nm, sharp edges, 560 nm",
     lambda: shapes.cube(edge=40, rounding=0, material="gold"), 560, (12, 16, 20, 24, 32, 40)),
    ("gold cube 40 nm, rounding 6 nm, 600 nm",
     lambda: shapes.cube(edge=40, rounding=6, material="gold"), 600, (12, 16, 20, 24, 32, 40)),
    ("dielectric cube 100 nm, index 1.5, sharp edges, 500 nm",
     lambda: shapes.cube(edge=100, rounding=0, material="1.5"), 500, (8, 12, 16, 24, 32, 48)),
    ("dimer of gold spheres 40 nm, gap 4 nm, light along the axis, 620 nm",
     lambda: shapes.dimer(shapes.sphere(40, "gold"), gap=4), 620, (42, 54, 66, 84, 105)),
    ("gold shell 4 nm on silica 40 nm, 700 nm",
     lambda: shapes.core_shell(shapes.sphere(40, "silica"), 4, "gold"), 700,
     (16, 20, 24, 32, 40, 52)),
)  # fmt: skip


@group("order-sharp", rank=17)
def order_for_other_bodies(quick: bool) -> Table:
    """Self-convergence of bodies with edges, corners, gaps and thin shells."""
    text = """
C_ext / C_abs in nm² (host 1.33) of bodies without an exact solution, as the cells become finer. The
order is the one that fits all spacings best, |values - (a + b dᵖ)|² least over p; "three finest" is
the one through those alone ("-" where they do not tell: values that wander by as little as the
solver's error, or a sharp edge of metal, which converges more slowly than any order of this range).
"At zero" is the program's extrapolation (a line in d²) with its error bar; the row passes when the
limit a of the free order lies within two bars of it.
"""
    columns = (
        "body", "cross section", "values, nm² (cells across)", "order", "three finest",
        "at zero, d²", "at zero, free order", "products", "time, s", "verdict",
    )  # fmt: skip
    rows = []
    for name, build, wavelength, steps in SHARP[2:3] if quick else SHARP:
        rungs = [
            level(build(), wavelength, n, tolerance=1e-4, limit=1500)
            for n in (steps[:4] if quick else steps)
        ]
        low, high = build().bounds
        d = np.array([rung.spacing for rung in rungs])
        cost = [str(sum(r.products for r in rungs)), f"{sum(r.seconds for r in rungs):.1f}"]
        for q, label in enumerate(("C_ext", "C_abs")):
            y = np.array([rung.sections[q] for rung in rungs])
            if y[-1] < 1e-3 * rungs[-1].sections[0]:
                continue
            errors = np.array([rung.solver_error[q] for rung in rungs])
            fit = extrapolate(d, y, errors, rungs[-1].sections[0], float(np.max(high - low)))
            power, limit = free_order(d, y)
            told = 0.5 < power < 4  # at the ends of its range no order fits
            values = ", ".join(f"{number(v)} ({n})" for v, n in zip(y, steps, strict=False))
            rows.append(
                [name, label, values, f"{power:.2f}" if told else "-",
                 f"{fit.order:.2f}" if np.isfinite(fit.order) else "-",
                 f"{number(fit.value)} ± {number(fit.error, 2)}", number(limit) if told else "-",
                 *cost, verdict(abs(limit - fit.value) <= 2 * fit.error) if told else "-"]
            )  # fmt: skip
    return Table("Order of the error: edges, corners, gaps, shells", text, columns, rows)


def free_order(d: np.ndarray, y: np.ndarray, least: float = 0.5) -> tuple[float, float]:
    """Order p and limit a of the best ``a + b d^p``, least <= p <= 4; steps weigh as 1/d^2."""
    best = (np.inf, np.nan, np.nan)
    weight = d**-2.0
    for p in np.linspace(least, 4, 351):
        model = np.stack([np.ones_like(d), d**p], axis=1)
        fit, *_ = np.linalg.lstsq(model * weight[:, None], y * weight, rcond=None)
        rest = float(np.sum((weight * (model @ fit - y)) ** 2))
        best = min(best, (rest, float(p), float(fit[0])))
    return best[1], best[2]


TOGETHER = (
    ("gold cube 40 nm, rounding 6 nm, 520 nm",
     lambda: shapes.cube(edge=40, rounding=6, material="gold"), 520, (12, 16, 24, 32, 48, 64)),
    ("dielectric cube 100 nm, index 1.5, sharp edges, 500 nm",
     lambda: shapes.cube(edge=100, rounding=0, material="1.5"), 500, (8, 12, 16, 24, 32, 48)),
    ("dielectric sphere 100 nm, index 2, 500 nm",
     lambda: shapes.sphere(100, "2.0"), 500, (12, 16, 24, 32, 48, 64)),
)  # fmt: skip
METHODS: tuple[tuple[str, dict[str, Any]], ...] = (
    ("window, fcd-corners (default)", {}),
    ("staircase, filtered (fcd)", {"surface": "whole", "polarizability": "fcd"}),
    ("staircase, LDR", {"surface": "whole", "polarizability": "ldr"}),
)


@group("one-limit", rank=18)
def one_limit(quick: bool) -> Table:
    """The staircase, LDR and the default tend to one value."""
    text = """
C_ext in nm² (host 1.33) by three methods as the cells become finer. "At zero" is the limit of the
best a + b dᵖ with 1 ≤ p ≤ 4; for the staircase, which jumps about, the bar is what leaving out any
one spacing changes at most, plus the largest step among the three finest. A row passes when its
limit agrees with the default's within both bars added.
"""
    columns = (
        "body", "method", "C_ext, nm² (cells across)", "order", "at zero", "from the default, %",
        "allowed, %", "products", "time, s", "verdict",
    )  # fmt: skip
    rows = []
    for name, build, wavelength, steps in TOGETHER[1:2] if quick else TOGETHER:
        base = None
        for method, options in METHODS:
            used = steps[:4] if quick else steps
            rungs = [
                level(build(), wavelength, n, tolerance=1e-3, limit=800, **options) for n in used
            ]
            d = np.array([rung.spacing for rung in rungs])
            y = np.array([rung.sections[0] for rung in rungs])
            power, limit = free_order(d, y, 1.0)
            without = [free_order(np.delete(d, i), np.delete(y, i), 1.0)[1] for i in range(len(d))]
            bar = float(np.max(np.abs(np.array(without) - limit)) + np.ptp(y[-3:]))
            base = base or (limit, bar)
            away, allowed = limit / base[0] - 1, (bar + base[1]) / base[0]
            values = ", ".join(f"{number(v)} ({n})" for v, n in zip(y, used, strict=True))
            rows.append(
                [name, method, values,
                 f"{power:.2f}", f"{number(limit)} ± {number(bar, 2)}", f"{100 * away:+.2f}",
                 f"{100 * allowed:.2f}", str(sum(r.products for r in rungs)),
                 f"{sum(r.seconds for r in rungs):.1f}", verdict(abs(away) <= allowed)]
            )  # fmt: skip
    return Table("Three methods, one limit", text, columns, rows)
