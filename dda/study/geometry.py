"""The cells of a point: built once for neighbouring points that share them, checked first."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np

import shapes
from dda.lattice import memory_estimate
from dda.study.memory import USABLE_SHARE, available_memory, bytes_text, finest_spacing
from dda.study.mistakes import Mistake
from dda.study.particle import build_particle
from dda.study.points import Point

#: Width in cells of the window that shares out surface cells; thinner features are smeared.
WINDOW = 2.2


@dataclass(frozen=True)
class Geometry:
    """A particle and its lattice, before and after the cells are made.

    Attributes
    ----------
    particle : shapes.Particle
    spacing : float
        Edge of a cell, nm.
    precision : str
        "double" or "single", which decides on the memory.
    """

    particle: shapes.Particle
    spacing: float
    precision: str

    @property
    def extent(self) -> np.ndarray:
        """Edges of the particle's bounding box, (3,) nm."""
        low, high = self.particle.bounds
        return np.asarray(high, float) - np.asarray(low, float)

    def memory(self, spacing: float | None = None) -> int:
        """Return the bytes that a solve is expected to take, without making the cells."""
        d = self.spacing if spacing is None else spacing
        box = tuple(math.ceil(length / d) + 2 for length in self.extent)
        occupied = self.particle.volume() / d**3 + WINDOW / 2 * self.particle.area() / d**2
        count = min(math.prod(box), math.ceil(occupied))
        return memory_estimate((box[0], box[1], box[2]), count, self.precision)

    @cached_property
    def cells(self) -> shapes.Cells:
        """The cells; making them may take seconds."""
        return shapes.voxelize(self.particle, spacing=self.spacing, window=WINDOW)


class Geometries:
    """Geometries of points; the last one is kept, because neighbouring points share it."""

    def __init__(self) -> None:
        self._key: str | None = None
        self._geometry: Geometry | None = None

    def of(self, point: Point) -> Geometry:
        """Return the geometry of a point, made and checked if it is not the last one again."""
        if self._geometry is None or self._key != point.geometry_key:
            self._geometry = geometry_of(point)
            self._key = point.geometry_key
        return self._geometry


def geometry_of(point: Point) -> Geometry:
    """Return the particle of a point on its lattice, checked but without cells.

    Raises
    ------
    Mistake
        The particle cannot be built, does not fit in memory, or has a gap below one cell.
    """
    particle = build_particle(point.particle, point.folder)
    low, high = particle.bounds
    largest = float((np.asarray(high) - np.asarray(low)).max())
    if point.accuracy.spacing is not None:
        spacing, key = point.accuracy.spacing, "spacing"
    else:
        assert point.accuracy.cells is not None
        spacing, key = largest / point.accuracy.cells, "cells"
    geometry = Geometry(particle, spacing, point.solver.precision)
    _check_size(geometry, key, largest)
    _check_gap(geometry, largest)
    _check_memory(geometry, key, largest)
    return geometry


def check_cells(geometry: Geometry, point: Point) -> shapes.Cells:
    """Make the cells, and refuse a particle that has none.

    Raises
    ------
    Mistake
    """
    key = "spacing" if point.accuracy.spacing is not None else "cells"
    try:
        cells = geometry.cells
    except shapes.ShapeError as error:
        raise Mistake(("particle",), str(error)) from None
    if cells.n == 0:
        raise Mistake(
            ("accuracy", key),
            f"no cell of {geometry.spacing:.3g} nm holds any of the particle; "
            "it needs smaller cells",
        )
    return cells


def _check_size(geometry: Geometry, key: str, largest: float) -> None:
    if geometry.spacing > largest:
        raise Mistake(
            ("accuracy", key),
            f"a cell of {geometry.spacing:.3g} nm is larger than the whole particle "
            f"({largest:.3g} nm); 16 cells across would be a spacing of {largest / 16:.3g} nm",
        )


def _check_gap(geometry: Geometry, largest: float) -> None:
    gap = geometry.particle.gap
    if gap is not None and gap < geometry.spacing:
        needed = math.ceil(largest / gap)
        raise Mistake(
            ("particle", "gap"),
            f"the gap of {gap:.3g} nm is below one cell ({geometry.spacing:.3g} nm) and would be "
            f"closed; use a spacing of at most {gap:.3g} nm (at least {needed} cells across), "
            f"and {gap / 3:.3g} nm to resolve the field in it",
        )


def _check_memory(geometry: Geometry, key: str, largest: float) -> None:
    need, there = geometry.memory(), available_memory()
    usable = int(USABLE_SHARE * there)
    if need > usable:
        fits = finest_spacing(geometry.memory, usable, geometry.spacing)
        raise Mistake(
            ("accuracy", key),
            f"cells of {geometry.spacing:.3g} nm would need {bytes_text(need)} of memory, "
            f"{bytes_text(there)} are available; a spacing of {fits:.3g} nm "
            f"({math.floor(largest / fits)} cells across) would fit",
        )
