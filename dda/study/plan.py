"""What a study would run: checked, measured, and solved nowhere."""

from __future__ import annotations

import math
import time
from dataclasses import dataclass

from dda.lattice import system
from dda.lattice.workers import Workers
from dda.study.column_cost import measure_columns
from dda.study.estimate import Cost, measure_step
from dda.study.geometry import WINDOW
from dda.study.lights import lights_of
from dda.study.memory import available_memory
from dda.study.near_plan import NearPlan, near_plan
from dda.study.prepare import Prepared, prepare
from dda.study.reader import Study

#: |m| k d up to which the cells resolve the wave inside the particle well, and at all
#: (Draine & Flatau 1994 ask for 1, and for less where the accuracy matters).
GOOD_MKD, LARGEST_MKD = 0.5, 1.0
#: A material whose index is this near to the host's hardly shows.
ALIKE = 1e-3
#: Cells across the thinnest part from which it is well described.
ENOUGH_ACROSS = 5.0


@dataclass(frozen=True)
class Figure:
    """A figure on which the validity of the method depends.

    ``name`` says what, ``value`` how much in words, ``remark`` what to think of it; ``good`` is
    False when it asks for attention.
    """

    name: str
    value: str
    good: bool
    remark: str


@dataclass(frozen=True)
class Plan:
    """What would run.

    Attributes
    ----------
    prepared : Prepared
    memory : int
        Bytes at the peak of a solve.
    available : int
        Bytes that are there.
    cost : Cost
    figures : tuple of Figure
    near : NearPlan or None
        Of one combination of varied keys, where near fields are asked for.
    """

    prepared: Prepared
    memory: int
    available: int
    cost: Cost
    figures: tuple[Figure, ...]
    near: NearPlan | None = None


def make_plan(study: Study) -> Plan:
    """Check a study, measure one step of the solver and say what a run would take.

    Raises
    ------
    InputError
    """
    prepared = prepare(study)
    finest = prepared.geometries.level(prepared.geometry, prepared.levels[-1])
    near = near_plan(prepared.points[len(prepared.points) // 2], finest, prepared.media)
    cost, figures = cost_of(prepared), validity(prepared)
    return Plan(prepared, prepared.memory, available_memory(), cost, figures, near)


def validity(prepared: Prepared) -> tuple[Figure, ...]:
    """Return the figures on which it depends whether the method holds."""
    figures = [_wave_figure(prepared)]
    particle, spacing = prepared.geometry.particle, prepared.spacing
    thin = particle.thinnest
    if thin is None:
        figures.append(Figure("thinnest part", "not known", True, "look at it with `dda look`"))
    else:
        figures.append(_thin_figure(thin, spacing))
    if particle.gap is not None:
        figures.append(_gap_figure(particle.gap, spacing))
    figures.extend(_alike_figures(prepared))
    return tuple(figures)


def _wave_figure(prepared: Prepared) -> Figure:
    """Return |m| k d, the phase across a cell inside the particle, where it is largest."""
    largest, where, what = 0.0, 0.0, ""
    for point in prepared.points:
        host = float(prepared.media.host.index(point.wavelength).real)
        kd = 2 * math.pi * host / point.wavelength * prepared.spacing
        for name, m in prepared.media.relative_index(point.wavelength).items():
            if abs(m) * kd > largest:
                largest, where, what = abs(m) * kd, point.wavelength, name
    finer = prepared.spacing * GOOD_MKD / largest
    remark = "good" if largest <= GOOD_MKD else f"coarse; a spacing of {finer:.2g} nm is better"
    if largest > LARGEST_MKD:
        remark = f"too coarse to trust; use a spacing of {finer:.2g} nm"
    value = f"{largest:.3g} ({what}, {where:g} nm)"
    return Figure("|m| k d at most", value, largest <= GOOD_MKD, remark)


def _thin_figure(thin: float, spacing: float) -> Figure:
    across = thin / spacing
    good = across >= ENOUGH_ACROSS
    finer = f"use a spacing of {thin / ENOUGH_ACROSS:.2g} nm to have {ENOUGH_ACROSS:.0f} cells"
    value = f"{thin:.3g} nm, {across:.1f} cells"
    return Figure("thinnest part", value, good, "good" if good else finer)


def _gap_figure(gap: float, spacing: float) -> Figure:
    across = gap / spacing
    good = across >= WINDOW
    remark = "good" if good else f"the surfaces blur into it; use a spacing of {gap / 3:.2g} nm"
    return Figure("gap", f"{gap:.3g} nm, {across:.1f} cells", good, remark)


def _alike_figures(prepared: Prepared) -> list[Figure]:
    """Point out materials that are optically the same as the host."""
    largest: dict[str, float] = {}
    for point in prepared.points:
        for name, m in prepared.media.relative_index(point.wavelength).items():
            largest[name] = max(largest.get(name, 0.0), abs(m - 1))
    remark = "it is optically the same as the host, so it neither absorbs nor scatters"
    return [
        Figure(f"contrast of {name}", f"|m - 1| at most {contrast:.1g}", False, remark)
        for name, contrast in largest.items()
        if contrast < ALIKE
    ]


def cost_of(prepared: Prepared) -> Cost:
    """Return the cost, measured at the finest spacing that is sure to be solved."""
    point = prepared.points[len(prepared.points) // 2]
    finest = prepared.levels[-1]
    cells = prepared.geometries.level(prepared.geometry, finest).cells
    for _ in range(2):  # the first time compiles
        started = time.perf_counter()
        matrix = system(
            cells,
            wavelength=point.wavelength,
            host=prepared.media.host,
            materials=dict(prepared.media.particle),
            precision=point.solver.precision,
            workers=Workers(point.solver.threads),
        )
        setup = time.perf_counter() - started
    columns = 1.0
    if point.averaged:
        measured = measure_columns(matrix)
        step, columns = measured.step_seconds, measured.columns
    else:
        step = measure_step(matrix, lights_of(point, prepared.geometry, matrix.k)[0])
    counted = prepared.geometry.count(prepared.spacing)
    steps = tuple(columns * weight / counted for weight in prepared.weights)
    return Cost(setup * len(prepared.levels), step, steps)
