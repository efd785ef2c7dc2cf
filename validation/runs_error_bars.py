"""Do the error bars hold? Particles with an exact solution, refined as a user's study would be."""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence

import numpy as np

from dda.accuracy import Refined, refine_at, refine_to
from validation.cases import CASES, Case, drawn
from validation.compare import percent
from validation.levels import level
from validation.results import Table, group, number, verdict

LADDER = (12, 16, 20, 26, 32)
ACROSS = 24
TOLERANCE = 1e-3
LIMIT = 1500

#: How many cases are drawn, and the seed.
DRAWN, SEED = 60, 20261202

#: An error bar is good when at least this part of the true errors lies within it ...
LEAST_INSIDE = 0.90
#: ... and none is larger than so many bars.
MOST_BARS = 3.0

COLUMNS = (
    "case", "source", "ours C_ext / C_abs, nm²", "reference, nm²", "error, %", "bar, %",
    "error in bars", "inside", "cells", "products", "time, s", "verdict",
)  # fmt: skip


@group("error-bars", rank=13)
def extrapolated_values(quick: bool) -> Table:
    """Error bars of values extrapolated to zero spacing, on cases with an exact solution."""
    text = f"""
Each case climbs the ladder {LADDER} of cells across with a target that it cannot meet, so that the
bar is that of the whole ladder; solver tolerance {TOLERANCE:g}. The bar is the stated error:
spacing and solver added. C_abs of a particle that does not absorb is measured against C_ext. A row
fails when an error is more than {MOST_BARS:g} bars; the last row counts how many of the true errors
lie within theirs, and allowed is no less than {100 * LEAST_INSIDE:g} %. The constants of
`dda/accuracy/extrapolation.py` were set on these very cases (with ladders of three to five levels);
the cases themselves were chosen before any result was seen.
"""

    def refine(solve: Callable, size: float) -> Refined:
        return refine_to(solve, 1e-9, size, ladder=LADDER)

    return _table("Error bars after extrapolation", text, refine, quick)


@group("error-bars-at", rank=14)
def values_at_a_spacing(quick: bool) -> Table:
    """Error bars of values at a given spacing, from two coarser ones."""
    text = f"""
The same cases with {ACROSS} cells across asked for: the value is the one at that spacing, its bar
comes from two coarser spacings, 0.5 and 0.71 times as fine. Counted as above.
"""

    def refine(solve: Callable, size: float) -> Refined:
        return refine_at(solve, ACROSS, size)

    return _table("Error bars at a given spacing", text, refine, quick)


@group("error-bars-drawn", rank=14.5)
def drawn_cases(quick: bool) -> Table:
    """Error bars on cases drawn at random, which nothing was tuned on."""
    text = f"""
{DRAWN} cases drawn at random once (`validation.cases.drawn`, seed {SEED}), refined as those of the
first table of error bars. No constant of the program was set on them, so this is the better judge.
A first draw (36 cases, seed 20261201) had 86 % of the errors inside and the worst at 2.5 bars; the
bars were then widened by 1.3, and this is the first and only draw that judges them.
"""

    def refine(solve: Callable, size: float) -> Refined:
        return refine_to(solve, 1e-9, size, ladder=LADDER)

    return _table("Error bars of cases drawn at random", text, refine, quick, drawn(DRAWN, SEED))


def _table(
    title: str, text: str, refine: Callable, quick: bool, cases: Sequence[Case] = CASES
) -> Table:
    rows, ratios = [], []
    for case in cases[:: 24 if quick else 1]:
        cells, bars = checked(case, refine)
        rows.append(cells)
        ratios.append(bars)
    every = np.concatenate(ratios)
    inside = float((every <= 1).mean())
    whole = [float(np.max(bars) <= 1) for bars in ratios]
    good = inside >= LEAST_INSIDE and bool(every.max() <= MOST_BARS)
    summary = (
        f"{len(every)} errors of {len(rows)} cases: {100 * inside:.1f} % inside, "
        f"cases with both inside {100 * np.mean(whole):.1f} %"
    )
    counted = [f"at most {every.max():.2f}", f"{100 * inside:.1f} %"]
    rows.append([summary, *["-"] * 5, *counted, *["-"] * 3, verdict(good)])
    return Table(title, text, COLUMNS, rows)


def checked(case: Case, refine: Callable) -> tuple[list[str], np.ndarray]:
    """A row of the table, and the true errors of C_ext and C_abs in units of their bars."""
    particle = case.particle()
    low, high = particle.bounds
    begin = time.perf_counter()

    def solve(across: int):
        return level(
            particle, case.wavelength, across, case.n_host, tolerance=TOLERANCE, limit=LIMIT
        )

    found = refine(solve, float(np.max(high - low)))
    seconds = time.perf_counter() - begin
    exact = case.reference()
    lossless = exact[1] == 0
    against = np.array([exact[0], exact[0] if lossless else exact[1]])
    off = np.array(found.sections[:2]) - exact[:2]
    bar = np.array(found.error[:2])
    bars = np.abs(off) / bar
    row = [
        case.name,
        case.source,
        " / ".join(number(v) for v in found.sections[:2]),
        " / ".join(number(v) for v in exact[:2]),
        " / ".join(percent(v) for v in off / against),
        " / ".join(f"{100 * v:.2g}" for v in bar / against),
        " / ".join(f"{v:.2f}" for v in bars),
        " / ".join("yes" if v <= 1 else "no" for v in bars),
        str(found.levels[-1].cells),
        str(sum(v.products for v in found.levels)),
        f"{seconds:.1f}",
        verdict(bool(bars.max() <= MOST_BARS)),
    ]
    return row, bars
