"""SERS factors of a study, on a surface around the particle."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from dda.design.sers import Sers, sers_averaged, sers_factor, summed_up, turned_mean
from dda.lattice import Polarization, System
from dda.response.surface_points import SurfacePoints, cover_surface
from dda.study.geometry import Geometry
from dda.study.levels import worst
from dda.study.near_levels import NearLevels, widening
from dda.study.near_region import cover, sers_wavelengths
from dda.study.near_table import NearFieldTable


@dataclass(frozen=True, eq=False)
class SersAnswer:
    """SERS factors on a surface.

    Attributes
    ----------
    laser, stokes : float
        Wavelengths in vacuum, nm.
    height : float
        nm.
    best : Sers
        On the finer lattice; the place from the particle's centre.
    mean_error, maximum_error : float
        Error bars: from the coarser lattice and, of an average over orientations, from fewer of
        them.
    status : str
        Of the solver, the worst.
    averaged : bool
        Whether the particle takes every orientation.
    """

    laser: float
    stokes: float
    height: float
    best: Sers
    mean_error: float
    maximum_error: float
    status: str
    averaged: bool


def sers_answer(table: NearFieldTable, levels: NearLevels) -> SersAnswer:
    """Solve for the laser and the Raman line on two lattices and compare."""
    assert table.sers is not None
    wavelengths = sers_wavelengths(table)
    pair = levels.at(wavelengths[0])
    surface = cover(table, levels.particle, pair[1].spacing)
    if table.sers.height_nm is not None:
        surface = cover_surface(levels.particle, surface.step, table.sers.height_nm)
    averaged = table.sers.orientation == "average"
    solve = _averaged if averaged else _fixed
    statuses: list[str] = []
    coarse, fine = (solve(wavelengths, level, surface, levels, statuses) for level in pair)
    wider = widening(pair)
    # Differences of both signs must not cancel in the mean.
    apart = float(np.average(np.abs(coarse.factor - fine.factor), weights=surface.areas))
    largest = max(abs(coarse.maximum - fine.maximum), apart / fine.mean * fine.maximum)
    return SersAnswer(
        *wavelengths,
        surface.height,
        fine,
        wider * apart + fine.mean_error,
        wider * largest + fine.maximum_error,
        worst(statuses),
        averaged,
    )


def _fixed(
    wavelengths: tuple[float, float],
    level: Geometry,
    surface: SurfacePoints,
    levels: NearLevels,
    statuses: list[str],
) -> Sers:
    """Factors for the light of the study."""
    pairs = []
    for wavelength in wavelengths:
        fields, _, status = levels.fields(wavelength, level, (surface.points,))
        pairs.append(fields[0])
        statuses.append(status)
    if len(pairs[0]) == 1:
        factor = sers_factor(pairs[0][0].e2, pairs[1][0].e2)
    else:  # unpolarized: the mean over all polarizations follows from two
        factor = turned_mean(*([f.e for f in pair] for pair in pairs))
    trusted = np.all([f.trusted for pair in pairs for f in pair], axis=0)
    return summed_up(factor, surface.points - levels.centre, surface.areas, trusted)


def _averaged(
    wavelengths: tuple[float, float],
    level: Geometry,
    surface: SurfacePoints,
    levels: NearLevels,
    statuses: list[str],
) -> Sers:
    """Factors of the particle in every orientation."""

    def solved(system: System, light: object) -> Polarization:
        # Errors of single fields hardly show in a mean over many: 0.03 % for gold at 785 nm.
        found = levels.solve(system, light, levels.point.solver.tolerance)
        statuses.append(found.status)
        return found

    def progress(done: int, of: int) -> None:
        levels.doing = f"SERS, all orientations: {done} of {of} incident fields"
        levels.part = done / of

    progress(0, 1)
    found = sers_averaged(
        levels.system(wavelengths[0], level),
        levels.system(wavelengths[1], level),
        surface.points,
        surface.areas,
        particle=levels.particle,
        solver=solved,
        progress=progress,
    )
    levels.advance()
    levels.advance()
    return replace(found, place=found.place - levels.centre)
