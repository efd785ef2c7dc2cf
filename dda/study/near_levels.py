"""What all near fields of a point share: its two lattices, its solutions, its peak."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from dda.errors import ComputationError
from dda.lattice import Polarization, System
from dda.response import Settled, settle
from dda.response.near_field import NearField, fields_at
from dda.response.smeared import SmearedField
from dda.study.geometry import Geometries, Geometry
from dda.study.levels import Memory, Watch, solutions, system_of, worst
from dda.study.lights import centre_of
from dda.study.points import Point
from dda.study.rows import Row
from dda.study.spectrum import find_peak

#: Relative solver error on the cross sections; dipoles settle later than these, so it is small.
TOLERANCE = 1e-4
#: The two spacings differ by this factor at least, or no error could be told from them.
_APART = 1.15


class NearLevels:
    """Solves a point on two lattices, at any wavelength.

    Parameters
    ----------
    point : Point
        Its wavelength does not matter.
    rows : sequence of Row
        The spectrum of the same point.
    geometries : Geometries
    watch : callable
        As for `dda.study.runner.compute`.
    advance : callable
        Called after each step that `near_steps` counts.
    """

    def __init__(
        self,
        point: Point,
        rows: Sequence[Row],
        geometries: Geometries,
        watch: Watch,
        advance: Callable[[], None],
    ) -> None:
        self.point, self.rows = point, rows
        self.watch, self.advance = watch, advance
        self.geometries = geometries
        self.geometry = geometries.of(point)
        self.memory = Memory(geometries)
        self.particle = self.geometry.particle
        self.centre = centre_of(self.geometry)
        # What `solve` tells the watch.
        self.doing, self.part = "", 0.0

    def wavelength(self, wanted: float | str) -> float:
        """Return a wavelength that the study gives as a number or as "peak", nm."""
        return peak_of(self.rows) if wanted == "peak" else float(wanted)

    def at(self, wavelength: float) -> tuple[Geometry, Geometry]:
        """Return a coarser lattice and the finest that the spectrum used near a wavelength."""
        geometry = self.geometry
        if self.point.accuracy.target is not None:
            solved = [row for row in self.rows if row.answered]
            if not solved:
                raise ComputationError("the spectrum has no answer, so no spacing is known to do")
            row = min(solved, key=lambda row: abs(row.wavelength_nm - wavelength))
            geometry = self.geometries.level(geometry, geometry.size / row.spacing_nm)
        return self.geometries.level(geometry, coarser_across(geometry)), geometry

    def settled(self, wavelength: float, level: Geometry) -> list[Settled]:
        """Return the solutions for every incident field."""
        return solutions(self._point(wavelength), level, self.memory, self.watch)

    def system(self, wavelength: float, level: Geometry) -> System:
        """Return the system of a wavelength and a lattice, solved for nothing."""
        return system_of(self._point(wavelength), level, self.watch)

    def fields(
        self,
        wavelength: float,
        level: Geometry,
        sets: Sequence[np.ndarray],
        magnetic: bool = False,
    ) -> tuple[list[list[NearField]], list[Settled], str]:
        """Fields for each set of points and each incident field, solutions, worst status."""
        solved = self.settled(wavelength, level)
        found: list[list[NearField]] = [[] for _ in sets]
        for settled in solved:
            sampler = SmearedField(settled.polarization)
            for into, points in zip(found, sets, strict=True):
                into.append(
                    fields_at(
                        settled.polarization,
                        points,
                        particle=self.particle,
                        magnetic=magnetic,
                        progress=self.tell(f"{wavelength:g} nm"),
                        sampler=sampler,
                    )
                )
        self.advance()
        return found, solved, worst(each.polarization.status for each in solved)

    def solve(self, system: System, light: object, tolerance: float | None = None) -> Polarization:
        """Solve for any light until what it loses to the particle has settled."""
        solver = self._point(self.point.wavelength).solver
        found = settle(
            system,
            light,
            tolerance=tolerance or solver.tolerance,
            method=solver.method,
            monitor=self._monitor,
        )
        return found.polarization

    def _monitor(self, step: int, _: np.ndarray, residual: float) -> bool:
        self.watch(f"{self.doing}: step {step}, residual {residual:.1e}", self.part)
        return False

    def tell(self, what: str) -> Callable[[int, int], None]:
        """Return what tells the watch how many points are done."""

        def progress(done: int, of: int) -> None:
            self.watch(f"{what}: field at {done} of {of} points", 0.5 + 0.5 * done / max(of, 1))

        return progress

    def _point(self, wavelength: float) -> Point:
        tolerance = min(self.point.solver.tolerance, TOLERANCE)
        solver = self.point.solver.model_copy(update={"tolerance": tolerance})
        return self.point.at(wavelength, solver=solver)


def coarser_across(geometry: Geometry) -> float:
    """Return the cells across of the lattice that tells the error of a near field."""
    across = geometry.size / geometry.spacing
    apart = [n for n in geometry.coarser() if across >= _APART * n]
    return max(apart, default=across / _APART)


def widening(levels: tuple[Geometry, Geometry]) -> float:
    """Factor that makes the difference of two spacings an error bar (error ~ spacing^2)."""
    ratio = levels[0].spacing / levels[1].spacing
    return 1.5 * max(1.0, 1 / (ratio**2 - 1))


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
