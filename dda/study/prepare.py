"""Everything about a study that can be checked without solving."""

from __future__ import annotations

import time
from collections.abc import Iterator
from dataclasses import dataclass
from itertools import groupby

import shapes
from dda.study.estimate import expected_steps
from dda.study.geometry import Geometries, Geometry, check_cells, geometry_of, kept_memory
from dda.study.identity import fingerprints
from dda.study.levels import tolerance_of
from dda.study.lights import check_beam, light_count
from dda.study.media import Media, check_media, media_of
from dda.study.mistakes import Mistake
from dda.study.near_region import check_near
from dda.study.order import chains, coarse_first
from dda.study.points import Point, points_of
from dda.study.reader import Study
from dda.study.scattering import check_scattering, partner_count

#: Combinations of varied keys are checked for this long before a run begins, seconds; those left
#: are checked when their turn comes.
PATIENCE = 10.0
# Products that a wavelength between or beyond solved ones still takes, and setting up a lattice in
# steps of the solver.
_BETWEEN, _BEYOND, _SETUP = 0.55, 0.6, 20.0
# Bytes of a solution: three complex numbers a cell.
_SOLUTION = 48


@dataclass(frozen=True)
class Prepared:
    """A study that can be run: every input has been checked, nothing has been computed.

    Attributes
    ----------
    study : Study
    points : tuple of Point
    geometries : Geometries
    media : Media
        Of the first point.
    identities : tuple of str
        Fingerprint of each point.
    weights : tuple of float
        Expected cost of each point: steps of the solver times cells, all spacings together and
        what neighbouring wavelengths save taken off.
    chains : tuple of tuple of int
        The numbers of the points in the order in which they are computed.
    memory : int
        Bytes at the peak of the largest solve that is sure to be done.
    checked : int
        Combinations of varied keys whose particle was made and checked.
    """

    study: Study
    points: tuple[Point, ...]
    geometries: Geometries
    media: Media
    identities: tuple[str, ...] = ()
    weights: tuple[float, ...] = ()
    chains: tuple[tuple[int, ...], ...] = ()
    memory: int = 0
    checked: int = 1

    @property
    def geometry(self) -> Geometry:
        """The first point's particle and its lattice."""
        return self.geometries.of(self.points[0])

    @property
    def cells(self) -> shapes.Cells:
        """The cells of the particle; the coarsest ones where a target is asked for."""
        return self.geometry.cells

    @property
    def levels(self) -> tuple[float, ...]:
        """Cells across of the spacings that are sure to be solved, coarse to fine."""
        return levels_of(self.points[0], self.geometry)

    @property
    def spacing(self) -> float:
        """The finest spacing that is sure to be solved, nm."""
        return self.geometry.size / self.levels[-1]


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
        check_near(points[0], media, geometry)
        check_beam(points[0], media, geometry, [point.wavelength for point in points])
    except Mistake as mistake:
        raise study.located(mistake) from None
    survey = _Survey(study)
    for same in _by_tables(points):
        survey.add(same)
    return Prepared(
        study,
        points,
        geometries,
        media,
        tuple(fingerprints(points)),
        tuple(survey.weights),
        tuple(tuple(chain) for chain in chains(points, survey.many)),
        survey.memory,
        survey.checked,
    )


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


def levels_of(point: Point, geometry: Geometry) -> tuple[float, ...]:
    """Return cells across of the spacings that are sure to be solved, coarse to fine."""
    if point.accuracy.target is not None:
        return tuple(float(across) for across in geometry.ladder()[:3])
    return (*geometry.coarser(), geometry.size / geometry.spacing)


class _Survey:
    """Goes through the combinations of varied keys: checks each, and guesses what it costs."""

    def __init__(self, study: Study) -> None:
        self._study = study
        self._end = time.monotonic() + PATIENCE
        self._geometry: Geometry | None = None
        self._geometries: dict[str, Geometry] = {}
        self._media: dict[str, Media] = {}
        self._steps: dict[tuple, float] = {}
        self.weights: list[float] = []
        self.many: list[bool] = []
        self.memory = 0
        self.checked = 0

    def add(self, points: list[Point]) -> None:
        """Take up the points of one combination."""
        point = points[0]
        try:
            check_scattering(point.tables)
            fresh = self._geometry is None or time.monotonic() < self._end
            if self._geometry is None or fresh:
                self._geometry = self._geometry_of(point)
                self.checked += 1
            media = self._media_of(points)
            if fresh and point.varied:
                check_near(point, media, self._geometry)
                check_beam(point, media, self._geometry, [one.wavelength for one in points])
        except Mistake as mistake:
            raise self._study.located(mistake, point.varied) from None
        levels = levels_of(point, self._geometry)
        finest = levels[-1]
        spacing = self._geometry.size / levels[-1]
        self.memory = max(self.memory, self._geometry.memory(spacing))
        cells = self._geometry.count(spacing)
        solutions = light_count(point) * len(points) * _SOLUTION * 1.5 * cells
        many = solutions < kept_memory(point)
        self.many += [many] * len(points)
        setup = _SETUP * sum((across / finest) ** 3 for across in levels)
        shares = recycled_shares(len(points), many and not point.averaged)
        for one, share in zip(points, shares, strict=True):
            self.weights.append(cells * (setup + share * self._steps_of(one, media, levels)))

    def _geometry_of(self, point: Point) -> Geometry:
        key = point.geometry_key
        if key not in self._geometries:
            self._geometries[key] = geometry_of(point)
        return self._geometries[key]

    def _media_of(self, points: list[Point]) -> Media:
        assert self._geometry is not None
        point, names = points[0], self._geometry.particle.materials
        wavelengths = [one.wavelength for one in points]
        key = str((point.host, point.materials, names, wavelengths))
        if key not in self._media:
            media = media_of(point, names)
            check_media(media, wavelengths)
            self._media[key] = media
        return self._media[key]

    def _steps_of(self, point: Point, media: Media, levels: tuple[float, ...]) -> float:
        tolerance = tolerance_of(point)
        key = id(media), point.wavelength, levels, tolerance
        if key not in self._steps:
            indices = media.relative_index(point.wavelength).values()
            self._steps[key] = steps_at(indices, levels, tolerance)
        return (light_count(point) + partner_count(point)) * self._steps[key]


def recycled_shares(count: int, many: bool) -> list[float]:
    """Return which share of its products each wavelength of a chain takes, in their order.

    Measured on a spectrum of 60 wavelengths of a gold cube: those between known solutions take
    0.55 of the products, those beyond one 0.6.
    """
    if not many:
        return [1.0 if number == 0 else _BEYOND for number in range(count)]
    first = set(coarse_first(count)[: -(-count // 4)])
    return [1.0 if number in first else _BETWEEN for number in range(count)]


def steps_at(indices, levels: tuple[float, ...], tolerance: float) -> float:
    """Return the expected steps at all spacings, in units of steps at the finest one."""
    return sum(
        max(expected_steps(m, across, tolerance) for m in indices) * (across / levels[-1]) ** 3
        for across in levels
    )


def _by_tables(points: tuple[Point, ...]) -> Iterator[list[Point]]:
    for _, same in groupby(points, key=lambda point: id(point.tables)):
        yield list(same)
