"""What a study would run: checked, measured, and solved nowhere."""

from __future__ import annotations

import math
import time
from dataclasses import dataclass

import shapes
from dda.lattice import memory_estimate, system
from dda.lattice.workers import Workers
from dda.study.estimate import Cost, expected_steps, measure_step
from dda.study.geometry import WINDOW, Geometries, Geometry, check_cells, geometry_of
from dda.study.levels import lights_of
from dda.study.media import Media, check_media, media_of
from dda.study.memory import available_memory
from dda.study.mistakes import Mistake
from dda.study.points import Point, points_of
from dda.study.reader import Study

#: |m| k d up to which the cells resolve the wave inside the particle well, and at all
#: (Draine & Flatau 1994 ask for 1, and for less where the accuracy matters).
GOOD_MKD, LARGEST_MKD = 0.5, 1.0
#: Cells across the thinnest part from which it is well described.
ENOUGH_ACROSS = 5.0


@dataclass(frozen=True)
class Prepared:
    """A study that can be run: every input has been checked, nothing has been computed.

    Attributes
    ----------
    study : Study
    points : tuple of Point
    geometries : Geometries
    media : Media
    """

    study: Study
    points: tuple[Point, ...]
    geometries: Geometries
    media: Media

    @property
    def geometry(self) -> Geometry:
        """The particle and its lattice."""
        return self.geometries.of(self.points[0])

    @property
    def cells(self) -> shapes.Cells:
        """The cells of the particle."""
        return self.geometry.cells


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
    """

    prepared: Prepared
    memory: int
    available: int
    cost: Cost
    figures: tuple[Figure, ...]


def prepare(study: Study) -> Prepared:
    """Check everything about a study that can be checked without solving.

    Raises
    ------
    InputError
        With the file, the line and the key at fault.
    """
    points = points_of(study)
    geometries = Geometries()
    try:
        geometry = geometries.of(points[0])
        media = media_of(points[0], geometry.particle.materials)
        check_media(media, [point.wavelength for point in points])
        check_cells(geometry, points[0])
    except Mistake as mistake:
        raise study.located(mistake) from None
    return Prepared(study, points, geometries, media)


def prepare_shape(study: Study) -> Geometry:
    """Check the particle of a study alone, and make its cells.

    Raises
    ------
    InputError
    """
    point = points_of(study)[0]
    try:
        geometry = geometry_of(point)
        check_cells(geometry, point)
    except Mistake as mistake:
        raise study.located(mistake) from None
    return geometry


def make_plan(study: Study) -> Plan:
    """Check a study, measure one step of the solver and say what a run would take.

    Raises
    ------
    InputError
    """
    prepared = prepare(study)
    return Plan(
        prepared,
        memory_estimate(prepared.cells.shape, prepared.cells.n, prepared.geometry.precision),
        available_memory(),
        _cost(prepared),
        validity(prepared),
    )


def validity(prepared: Prepared) -> tuple[Figure, ...]:
    """Return the figures on which it depends whether the method holds."""
    figures = [_wave_figure(prepared)]
    cells, particle = prepared.cells, prepared.geometry.particle
    thin = cells.thinnest if cells.thinnest is not None else particle.thinnest
    if thin is None:
        figures.append(Figure("thinnest part", "not known", True, "look at it with `dda look`"))
    else:
        across = thin / cells.spacing
        figures.append(
            Figure(
                "thinnest part",
                f"{thin:.3g} nm, {across:.1f} cells",
                across >= ENOUGH_ACROSS,
                "good"
                if across >= ENOUGH_ACROSS
                else f"use a spacing of {thin / ENOUGH_ACROSS:.2g} nm to have "
                f"{ENOUGH_ACROSS:.0f} cells",
            )
        )
    if particle.gap is not None:
        figures.append(_gap_figure(particle.gap, cells.spacing))
    return tuple(figures)


def _wave_figure(prepared: Prepared) -> Figure:
    """Return |m| k d, the phase across a cell inside the particle, where it is largest."""
    largest, where, what = 0.0, 0.0, ""
    for point in prepared.points:
        host = float(prepared.media.host.index(point.wavelength).real)
        kd = 2 * math.pi * host / point.wavelength * prepared.cells.spacing
        for name, m in prepared.media.relative_index(point.wavelength).items():
            if abs(m) * kd > largest:
                largest, where, what = abs(m) * kd, point.wavelength, name
    finer = prepared.cells.spacing * GOOD_MKD / largest
    remark = "good" if largest <= GOOD_MKD else f"coarse; a spacing of {finer:.2g} nm is better"
    if largest > LARGEST_MKD:
        remark = f"too coarse to trust; use a spacing of {finer:.2g} nm"
    value = f"{largest:.3g} ({what}, {where:g} nm)"
    return Figure("|m| k d at most", value, largest <= GOOD_MKD, remark)


def _gap_figure(gap: float, spacing: float) -> Figure:
    across = gap / spacing
    good = across >= WINDOW
    remark = "good" if good else f"the surfaces blur into it; use a spacing of {gap / 3:.2g} nm"
    return Figure("gap", f"{gap:.3g} nm, {across:.1f} cells", good, remark)


def _cost(prepared: Prepared) -> Cost:
    point = prepared.points[len(prepared.points) // 2]
    started = time.perf_counter()
    matrix = system(
        prepared.cells,
        wavelength=point.wavelength,
        host=prepared.media.host,
        materials=dict(prepared.media.particle),
        precision=point.solver.precision,
        workers=Workers(point.solver.threads),
    )
    setup = time.perf_counter() - started
    across = max(prepared.cells.shape)
    steps = tuple(
        len(lights_of(point))
        * max(
            expected_steps(m, across, point.solver.tolerance)
            for m in prepared.media.relative_index(point.wavelength).values()
        )
        for point in prepared.points
    )
    return Cost(setup, measure_step(matrix, lights_of(point)[0]), steps)
