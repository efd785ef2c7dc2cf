"""The cells of a point: built once for neighbouring points that share them, checked first."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

import shapes
from dda.accuracy import LADDER
from dda.lattice import memory_estimate
from dda.study.memory import USABLE_SHARE, available_memory, bytes_text, finest_spacing
from dda.study.mistakes import Mistake
from dda.study.particle import build_particle
from dda.study.points import Point
from dda.study.recycling import MOST_BYTES

#: Bytes that a process takes before it solves anything (measured: 230 to 270 MiB).
PROCESS_BYTES = 300 * 2**20
# Share of the memory for kept solutions.
_KEPT_SHARE = 0.05
# Bytes a cell of the vectors by which kept solutions help a solve.
_RECYCLED = 480
# Lattices of one particle whose cells are kept for the next wavelength.
_LEVELS_KEPT = 8
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
    def size(self) -> float:
        """Largest extent of the particle, nm."""
        return float(self.extent.max())

    def ladder(self) -> tuple[int, ...]:
        """Cells across from which refinement may choose: none that closes a gap or a thin part."""
        finest_needed = [self.size / d for d in self._details()]
        rungs = tuple(n for n in LADDER if all(n >= needed for needed in finest_needed))
        # A particle finer than all rungs: three of its own.
        least = max(finest_needed, default=0)
        return rungs if len(rungs) >= 3 else tuple(math.ceil(least * f) for f in (1, 1.25, 1.6, 2))

    def coarser(self) -> tuple[float, ...]:
        """Cells across of two coarser lattices that tell the error of this one."""
        across = self.size / self.spacing
        least = max((self.size / d for d in self._details()), default=0)
        usual = [math.floor(across * f) for f in (0.5, 0.71)]
        kept = [n for n in usual if n >= max(4, least)]
        if len(kept) < 2:
            low = min(max(4.0, least), 0.8 * across)
            kept = [math.ceil(low), math.ceil((low + across) / 2)]
        return tuple(float(n) for n in sorted(set(kept)) if n < 0.95 * across)

    def _details(self) -> list[float]:
        """Spacings that the gap and the thinnest part ask for at least, nm."""
        thin, gap = self.particle.thinnest, self.particle.gap
        return [v / n for v, n in ((thin, 3.0), (gap, 1.5)) if v]

    @property
    def extent(self) -> np.ndarray:
        """Edges of the particle's bounding box, (3,) nm."""
        low, high = self.particle.bounds
        return np.asarray(high, float) - np.asarray(low, float)

    def memory(self, spacing: float | None = None) -> int:
        """Return the bytes that a solve is expected to take, without making the cells."""
        d = self.spacing if spacing is None else spacing
        count = self.count(d)
        return memory_estimate(self._box(d), count, self.precision) + _RECYCLED * count

    def count(self, spacing: float) -> int:
        """Return about how many cells there are, without making them."""
        body, surface = self._body
        occupied = body / spacing**3 + WINDOW / 2 * surface / spacing**2
        return min(math.prod(self._box(spacing)), math.ceil(occupied))

    def _box(self, spacing: float) -> tuple[int, int, int]:
        x, y, z = (math.ceil(length / spacing) + 2 for length in self.extent)
        return x, y, z

    @cached_property
    def _body(self) -> tuple[float, float]:
        """Volume and area, which may be sampled: nm^3, nm^2."""
        return self.particle.volume(), self.particle.area()

    @cached_property
    def cells(self) -> shapes.Cells:
        """The cells; making them may take seconds."""
        return shapes.voxelize(self.particle, spacing=self.spacing, window=WINDOW)


class Geometries:
    """Geometries of points; the last one is kept, because neighbouring points share it."""

    def __init__(self) -> None:
        self._key: str | None = None
        self._geometry: Geometry | None = None
        self._levels: dict[tuple[int, float], Geometry] = {}

    def level(self, geometry: Geometry, across: float) -> Geometry:
        """Return the same particle on another lattice; those of the last ones are kept."""
        key = (id(geometry.particle), round(across, 6))
        if abs(across - geometry.size / geometry.spacing) < 1e-9 * across:
            return geometry
        if key not in self._levels:
            while len(self._levels) >= _LEVELS_KEPT:
                self._levels.pop(next(iter(self._levels)))
            self._levels[key] = replace(geometry, spacing=geometry.size / across)
        return self._levels[key]

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
    key = accuracy_key(point)
    if key == "target":
        whole = Geometry(particle, largest, point.solver.precision)
        spacing = largest / whole.ladder()[0]
    else:
        value = getattr(point.accuracy, key)
        spacing = value if key == "spacing" else largest / value
    geometry = Geometry(particle, spacing, point.solver.precision)
    _check_size(geometry, key, largest)
    _check_gap(geometry, largest)
    _check_memory(geometry, key, largest, usable_memory(point))
    return geometry


def accuracy_key(point: Point) -> str:
    """Return which of target, cells and spacing the study gives."""
    table = point.accuracy
    return next(k for k in ("target", "cells", "spacing") if getattr(table, k) is not None)


def usable_memory(point: Point) -> int:
    """Return the bytes that a solve of this point may take.

    ``[limits] memory_gib`` is for everything: the program itself and the solutions that are kept
    are taken off.
    """
    usable = int(USABLE_SHARE * available_memory())
    gib = point.limits.memory_gib
    if gib is not None:
        usable = min(usable, int(gib * 2**30) - PROCESS_BYTES)
    return max(0, usable - kept_memory(point))


def kept_memory(point: Point) -> int:
    """Return the bytes that solutions of neighbouring wavelengths may take."""
    gib = point.limits.memory_gib
    whole = available_memory() if gib is None else gib * 2**30
    return min(MOST_BYTES, int(_KEPT_SHARE * whole))


def check_cells(geometry: Geometry, point: Point) -> shapes.Cells:
    """Make the cells, and refuse a particle that has none.

    Raises
    ------
    Mistake
    """
    key = accuracy_key(point)
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


def _check_memory(geometry: Geometry, key: str, largest: float, usable: int) -> None:
    need = geometry.memory()
    if usable <= 0:
        raise Mistake(
            ("limits", "memory_gib"),
            f"the program itself takes {bytes_text(PROCESS_BYTES)}; nothing is left to solve with",
        )
    if need > usable:
        fits = finest_spacing(geometry.memory, usable, geometry.spacing)
        raise Mistake(
            ("accuracy", key),
            f"cells of {geometry.spacing:.3g} nm would need {bytes_text(need)} of memory, "
            f"{bytes_text(usable)} may be used; a spacing of {fits:.3g} nm "
            f"({math.floor(largest / fits)} cells across) would fit",
        )
