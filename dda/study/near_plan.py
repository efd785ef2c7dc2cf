"""What the near field of a point will take: solves, points, memory, disk."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from dda.design.sers import modes_of_box
from dda.study.estimate import expected_steps
from dda.study.geometry import WINDOW, Geometry
from dda.study.lights import light_count
from dda.study.media import Media
from dda.study.near_levels import TOLERANCE, coarser_across
from dda.study.near_region import region_of, sers_wavelengths, surface_pieces
from dda.study.near_table import NearFieldTable
from dda.study.points import Point

# Measured on one core: points read from a mesh and points summed up directly, a second each.
_READ, _PAIRS = 1e5, 1e8
# Text of a number in the table, and bytes of working memory for a point.
_TEXT, _WORKING = 14, 600


@dataclass(frozen=True)
class NearPlan:
    """The cost of a near field.

    Attributes
    ----------
    solves : int
        Incident fields solved for, on both lattices.
    points : int
        At which fields are evaluated, at each wavelength and on each lattice.
    steps : float
        Expected steps of the solver, in units of steps at the finer lattice.
    evaluation : float
        Seconds that the points take, roughly.
    memory, disk : int
        Bytes beside those of the solver, and of the files.
    """

    solves: int
    points: int
    steps: float
    evaluation: float
    memory: int
    disk: int


def near_steps(table: NearFieldTable) -> int:
    """Return the steps of the progress bar."""
    emitted = sum(
        len(table.wavelengths) if emitter.wavelength_nm is None else 1 for emitter in table.emitters
    )
    return 2 * (len(table.wavelengths) + (2 if table.sers is not None else 0) + emitted)


def near_plan(point: Point, geometry: Geometry, media: Media) -> NearPlan | None:
    """Estimate the near field of a point, None where none is asked for.

    Parameters
    ----------
    point : Point
    geometry : Geometry
        The finest lattice that is sure to be solved.
    media : Media
    """
    table = point.tables.near_field
    if table is None:
        return None
    numbers = [w for w in table.wavelengths if w != "peak"]
    middle = point.wavelength
    # Wavelength, incident fields, and the part of a whole solve that each takes.
    wanted = [(w, light_count(point), 1.0) for w in numbers]
    wanted += [(middle, light_count(point), 1.0)] * (len(table.wavelengths) - len(numbers))
    if table.sers is not None:
        for wavelength in sers_wavelengths(table):
            count, part = light_count(point), 1.0
            if table.sers.orientation == "average":
                count, part = _modes(wavelength, geometry, media), _part(geometry)
            wanted.append((wavelength, count, part))
    for emitter in table.emitters:
        count = 3 if emitter.orientation == "average" else 1
        if emitter.wavelength_nm is not None:
            wanted.append((emitter.wavelength_nm, count, 1.0))
        else:
            wanted += [(w if w != "peak" else middle, count, 1.0) for w in table.wavelengths]
    across = (coarser_across(geometry), geometry.size / geometry.spacing)
    relative = sum((n / across[1]) ** 3 for n in across)
    tolerance = min(point.solver.tolerance, TOLERANCE)
    steps = 0.0
    for wavelength, count, part in wanted:
        indices = media.relative_index(float(wavelength)).values()
        needed = max(expected_steps(m, across[1], tolerance) for m in indices)
        steps += relative * count * part * needed
    return _with_points(point, geometry, sum(count for _, count, _ in wanted), steps)


def _with_points(point: Point, geometry: Geometry, solves: int, steps: float) -> NearPlan:
    table = point.tables.near_field
    assert table is not None
    surface = surface_pieces(table, geometry)
    region = 0 if table.kind == "surface" else len(region_of(table, point.folder).points)
    cells = math.ceil(geometry.particle.volume() / geometry.spacing**3)
    inside = cells if table.heat is not None else 0
    points = surface + region + inside
    waves = light_count(point)
    vectors = waves * (4 if table.magnetic else 2)
    asked = region or surface
    if table.kind == "box":
        written = asked * (48 * vectors + 20)
    else:
        written = asked * _TEXT * (8 + 6 * vectors)
    disk = len(table.wavelengths) * (written + surface * 160 + inside * 60)
    occupied = cells + WINDOW / 2 * geometry.particle.area() / geometry.spacing**2
    each = min(points * occupied / _PAIRS, points / _READ)
    evaluations = 2 * waves * len(table.wavelengths)
    if table.sers is not None and table.sers.orientation == "average":
        evaluations += 40
    return NearPlan(
        2 * solves,
        points,
        steps,
        each * evaluations,
        points * (_WORKING + 96 * vectors),
        int(disk),
    )


def _modes(wavelength: float, geometry: Geometry, media: Media) -> int:
    index = float(np.real(media.host.index(np.array([wavelength]))[0]))
    k = 2 * np.pi * index / wavelength
    return len(modes_of_box(k, geometry.extent, np.zeros(3)).lights)


def _part(geometry: Geometry) -> float:
    """Part of a solve that a field of one parity takes on a particle with mirror planes.

    A plane wave along an axis is the sum of two of them, and that is what is measured.
    """
    return 0.5 if any(geometry.particle.mirrors()) else 1.0
