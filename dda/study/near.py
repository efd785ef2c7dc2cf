"""Near fields of a study: solved at two spacings, after its spectrum."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from dda.design.sers import Sers, sers_factor, summed_up, turned_mean
from dda.errors import ComputationError
from dda.response.near_error import RefinedField, refined
from dda.response.near_field import NearField, fields_at
from dda.response.near_points import Region
from dda.response.smeared import SmearedField
from dda.response.surface_points import SurfacePoints, cover_surface
from dda.study.geometry import Geometry
from dda.study.levels import Memory, Watch, solutions, worst
from dda.study.near_region import cover, region_of, sers_wavelengths, surface_region
from dda.study.near_table import NearFieldTable
from dda.study.plan import Prepared
from dda.study.points import Point
from dda.study.rows import Row
from dda.study.spectrum import find_peak

#: Relative solver error on the cross sections; dipoles settle later than these, so it is small.
TOLERANCE = 1e-4
#: The two spacings differ by this factor at least, or no error could be told from them.
_APART = 1.15


@dataclass(frozen=True, eq=False)
class Sampled:
    """Fields at a region's points.

    Attributes
    ----------
    region : Region
        Its points start at the particle's centre.
    fields : tuple of NearField
        On the finer lattice, one for each incident wave: two where the light is unpolarized.
    best : RefinedField
        ``|E|^2``, averaged over the waves, with its error.
    """

    region: Region
    fields: tuple[NearField, ...]
    best: RefinedField

    @property
    def material(self) -> np.ndarray:
        """Index into the particle's materials; -1 in the host, (n,)."""
        return self.fields[0].material


@dataclass(frozen=True, eq=False)
class NearAnswer:
    """The near field at one wavelength.

    Attributes
    ----------
    wavelength : float
        In vacuum, nm.
    peak : bool
        Whether the study asked for the peak.
    spacing, coarser : float
        Of the two lattices, nm.
    materials : tuple of str
        That `Sampled.material` counts.
    status : str
        Of the solver, the worst.
    region, surface : Sampled
        What was asked for, and the surface at the height of the statistics.
    cover : SurfacePoints
        The latter in pieces, in the particle's coordinates.
    """

    wavelength: float
    peak: bool
    spacing: float
    coarser: float
    materials: tuple[str, ...]
    status: str
    region: Sampled
    surface: Sampled
    cover: SurfacePoints


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
        Error bars from the coarser lattice.
    status : str
        Of the solver, the worst.
    """

    laser: float
    stokes: float
    height: float
    best: Sers
    mean_error: float
    maximum_error: float
    status: str


def near_steps(table: NearFieldTable) -> int:
    """Return how often a near field is solved, for the progress bar."""
    return 2 * (len(table.wavelengths) + (2 if table.sers is not None else 0))


class NearRun:
    """Near fields of a prepared study whose spectrum is known.

    Parameters
    ----------
    prepared : Prepared
    rows : sequence of Row
        The spectrum.
    watch : callable
        As for ``dda.study.runner.run_points``.
    advance : callable
        Called after each solve.
    """

    def __init__(self, prepared: Prepared, rows: Sequence[Row], watch: Watch, advance=lambda: None):
        table = prepared.study.tables.near_field
        assert table is not None
        self.table, self.prepared, self.rows = table, prepared, rows
        self.watch, self.advance = watch, advance
        self.memory = Memory(prepared.geometries)
        self.particle = prepared.geometry.particle
        self.centre = np.add(*self.particle.bounds) / 2

    def answers(self) -> Iterator[NearAnswer]:
        """Yield the near field at each wavelength, in the study's order, none twice."""
        done = set()
        for wanted in self.table.wavelengths:
            wavelength = peak_of(self.rows) if wanted == "peak" else float(wanted)
            if wavelength not in done:
                yield self._answer(wavelength, wanted == "peak")
            done.add(wavelength)

    def sers(self) -> SersAnswer | None:
        """Return the SERS factors, None where they are not asked for."""
        if self.table.sers is None:
            return None
        laser, stokes = sers_wavelengths(self.table)
        levels = self._levels(laser)
        height = self.table.sers.height_nm
        surface = cover(self.table, self.particle, levels[-1].spacing)
        if height is not None:
            surface = cover_surface(self.particle, surface.step, height)
        found, statuses = [], []
        for level in levels:
            pairs = []
            for wavelength in (laser, stokes):
                fields, status = self._solve(wavelength, level, (surface.points,), False)
                pairs.append(fields[0])
                statuses.append(status)
            if len(pairs[0]) == 1:
                factor = sers_factor(pairs[0][0].e2, pairs[1][0].e2)
            else:  # unpolarized: the mean over all polarizations follows from two
                factor = turned_mean(*([f.e for f in pair] for pair in pairs))
            trusted = np.all([f.trusted for pair in pairs for f in pair], axis=0)
            places = surface.points - self.centre
            found.append(summed_up(factor, places, surface.areas, trusted))
        coarse, fine = found
        wider = _widening(levels)
        return SersAnswer(
            laser,
            stokes,
            surface.height,
            fine,
            wider * abs(coarse.mean - fine.mean),
            wider * abs(coarse.maximum - fine.maximum),
            worst(statuses),
        )

    def _answer(self, wavelength: float, peak: bool) -> NearAnswer:
        levels = self._levels(wavelength)
        surface = cover(self.table, self.particle, levels[-1].spacing)
        regions = [surface_region(surface, self.centre)]
        if self.table.kind != "surface":
            regions.append(region_of(self.table, self.prepared.study))
        sets = tuple(region.points + self.centre for region in regions)
        coarse, first = self._solve(wavelength, levels[0], sets, False)
        fine, second = self._solve(wavelength, levels[1], sets, self.table.magnetic)
        sampled = [
            Sampled(region, tuple(b), refined([_together(a), _together(b)]))
            for region, a, b in zip(regions, coarse, fine, strict=True)
        ]
        return NearAnswer(
            wavelength,
            peak,
            levels[1].spacing,
            levels[0].spacing,
            levels[1].cells.materials,
            worst((first, second)),
            sampled[-1],
            sampled[0],
            surface,
        )

    def _levels(self, wavelength: float) -> tuple[Geometry, Geometry]:
        """Return a coarser lattice and the finest that the spectrum used near a wavelength."""
        geometry = self.prepared.geometry
        if self.prepared.points[0].accuracy.target is not None:
            solved = [row for row in self.rows if row.answered]
            if not solved:
                raise ComputationError("the spectrum has no answer, so no spacing is known to do")
            row = min(solved, key=lambda row: abs(row.wavelength_nm - wavelength))
            geometry = self.prepared.geometries.level(geometry, geometry.size / row.spacing_nm)
        across = geometry.size / geometry.spacing
        apart = [n for n in geometry.coarser() if across >= _APART * n]
        coarser = max(apart, default=across / _APART)
        return self.prepared.geometries.level(geometry, coarser), geometry

    def _solve(
        self, wavelength: float, level: Geometry, sets: Sequence[np.ndarray], magnetic: bool
    ) -> tuple[list[list[NearField]], str]:
        """Fields for each set of points and each incident wave, and the solver's status."""
        point = self._point(wavelength)
        solved = solutions(point, level, self.memory, self.watch)
        found: list[list[NearField]] = [[] for _ in sets]
        for settled in solved:
            sampler = SmearedField(settled.polarization)
            for into, points in zip(found, sets, strict=True):

                def tell(done: int, of: int) -> None:
                    label = f"{wavelength:g} nm: field at {done} of {of} points"
                    self.watch(label, 0.5 + 0.5 * done / max(of, 1))

                into.append(
                    fields_at(
                        settled.polarization,
                        points,
                        particle=self.particle,
                        magnetic=magnetic,
                        progress=tell,
                        sampler=sampler,
                    )
                )
        self.advance()
        return found, worst(each.polarization.status for each in solved)

    def _point(self, wavelength: float) -> Point:
        point = self.prepared.points[0]
        tolerance = min(point.solver.tolerance, TOLERANCE)
        solver = point.solver.model_copy(update={"tolerance": tolerance})
        return point.at(wavelength, solver=solver)


def peak_of(rows: Sequence[Row]) -> float:
    """Return the wavelength of the highest extinction, nm to a hundredth.

    Where the spectrum has no maximum inside, that of the highest row.

    Raises
    ------
    ComputationError
        No row has an answer.
    """
    answered = [row for row in rows if row.answered]
    if not answered:
        raise ComputationError("there is no peak: no wavelength of the spectrum has an answer")
    peak = find_peak([r.wavelength_nm for r in answered], [r.c_ext_nm2 for r in answered])
    if peak is not None:
        return round(peak.position, 2)
    return max(answered, key=lambda row: row.c_ext_nm2).wavelength_nm


def _together(fields: Sequence[NearField]) -> NearField:
    """One field whose |E|^2 is the mean over the waves: their components side by side."""
    if len(fields) == 1:
        return fields[0]
    share = 1 / np.sqrt(len(fields))
    return replace(fields[0], e=share * np.hstack([field.e for field in fields]))


def _widening(levels: tuple[Geometry, Geometry]) -> float:
    """Factor that makes the difference of two spacings an error bar (error ~ spacing^2)."""
    ratio = levels[0].spacing / levels[1].spacing
    return 1.5 * max(1.0, 1 / (ratio**2 - 1))
