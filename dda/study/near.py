"""Near fields of a study: solved at two spacings, after its spectrum."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from dda.response.near_error import RefinedField, refined_field
from dda.response.near_field import NearField
from dda.response.near_points import Region
from dda.response.surface_points import SurfacePoints
from dda.study.geometry import Geometries
from dda.study.levels import Watch, worst
from dda.study.lights import by_source
from dda.study.near_emitters import EmitterAnswer, emitter_answers
from dda.study.near_heat import HeatAnswer, heat_answer
from dda.study.near_levels import NearLevels
from dda.study.near_region import cover, region_of, surface_region
from dda.study.near_sers import SersAnswer, sers_answer
from dda.study.points import Point
from dda.study.rows import Row


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
    by_source : ndarray of bool, shape (n,)
        Points so near a dipole that lights the particle that its own field is most of theirs.
    """

    region: Region
    fields: tuple[NearField, ...]
    best: RefinedField
    by_source: np.ndarray

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
    body : Sampled or None
        The middles of the finer lattice's cells, where heat is asked for.
    heat : HeatAnswer or None
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
    body: Sampled | None = None
    heat: HeatAnswer | None = None


class NearRun:
    """Near fields of a point whose spectrum is known.

    Parameters
    ----------
    point : Point
        A checked one, see ``dda.study.plan.prepare``; its wavelength does not matter.
    rows : sequence of Row
        The spectrum of the same values of the varied keys.
    geometries : Geometries
        Where cells that are already made may be found.
    watch : callable
        As for `dda.study.runner.compute`.
    advance : callable
        Called after each step that `dda.study.near_plan.near_steps` counts.
    """

    def __init__(
        self,
        point: Point,
        rows: Sequence[Row],
        geometries: Geometries,
        watch: Watch,
        advance: Callable[[], None] = lambda: None,
    ) -> None:
        table = point.tables.near_field
        assert table is not None
        self.table = table
        self.levels = NearLevels(point, rows, geometries, watch, advance)

    def answers(self) -> Iterator[NearAnswer]:
        """Yield the near field at each wavelength, in the study's order, none twice."""
        done = set()
        for wanted in self.table.wavelengths:
            wavelength = self.levels.wavelength(wanted)
            if wavelength not in done:
                yield self._answer(wavelength, wanted == "peak")
            done.add(wavelength)

    def sers(self) -> SersAnswer | None:
        """Return the SERS factors, None where they are not asked for."""
        return None if self.table.sers is None else sers_answer(self.table, self.levels)

    def emitters(self) -> Iterator[EmitterAnswer]:
        """Yield the decay rates of each emitter at each of its wavelengths."""
        yield from emitter_answers(self.table, self.levels)

    def _answer(self, wavelength: float, peak: bool) -> NearAnswer:
        levels = self.levels
        pair = levels.at(wavelength)
        surface = cover(self.table, levels.particle, pair[1].spacing)
        regions = [surface_region(surface, levels.centre)]
        if self.table.kind != "surface":
            regions.append(region_of(self.table, levels.point.folder))
        asked = len(regions)
        if self.table.heat is not None:
            middles = pair[1].cells.positions - levels.centre
            count = (len(middles),)
            regions.append(Region("particle", middles, count, (), (), pair[1].spacing))
        sets = tuple(region.points + levels.centre for region in regions)
        coarse, first, worst_first = levels.fields(wavelength, pair[0], sets)
        fine, second, worst_second = levels.fields(wavelength, pair[1], sets, self.table.magnetic)
        sampled = [
            Sampled(
                region,
                tuple(b),
                refined_field([_together(a), _together(b)]),
                by_source(levels.point, region.points, pair[1]),
            )
            for region, a, b in zip(regions, coarse, fine, strict=True)
        ]
        heat = None
        if self.table.heat is not None:
            heat = heat_answer(self.table.heat, pair, (first, second))
        return NearAnswer(
            wavelength,
            peak,
            pair[1].spacing,
            pair[0].spacing,
            pair[1].cells.materials,
            worst((worst_first, worst_second)),
            sampled[asked - 1],
            sampled[0],
            surface,
            sampled[asked] if heat is not None else None,
            heat,
        )


def _together(fields: Sequence[NearField]) -> NearField:
    """One field whose |E|^2 is the mean over the waves: their components side by side."""
    if len(fields) == 1:
        return fields[0]
    share = 1 / np.sqrt(len(fields))
    return replace(fields[0], e=share * np.hstack([field.e for field in fields]))
