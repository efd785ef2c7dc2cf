"""The region of ``[near_field]`` as points, and its mistakes, before anything is solved."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from dda.design.sers import stokes_wavelength
from dda.errors import InputError
from dda.response.near_points import Region, box, line, plane, read_points
from dda.response.surface_points import SurfacePoints, cover_surface
from dda.study.geometry import Geometry
from dda.study.media import Media, check_media
from dda.study.mistakes import Mistake
from dda.study.near_table import NearFieldTable
from dda.study.reader import Study
from shapes import Particle

#: Height in spacings at which the error is known on smooth bodies, whatever way they face.
CLEAR = 1.5
# Pieces across the particle into which its surface is cut by default at most, and ever.
_MOST_PIECES, _EVER = 120, 400


def check_near(study: Study, media: Media, geometry: Geometry) -> None:
    """Find the mistakes of ``[near_field]`` before anything is solved.

    Raises
    ------
    Mistake
    """
    table = study.tables.near_field
    if table is None:
        return
    if study.tables.light.orientation == "average":
        raise Mistake(
            ("near_field",),
            'near fields are those of one direction of light; leave out orientation = "average"',
        )
    if table.kind == "surface":
        if table.step is not None and not geometry.size / _EVER <= table.step <= geometry.size / 4:
            raise Mistake(
                ("near_field", "step"),
                f"pieces of {table.step:g} nm do not suit a surface {geometry.size:.3g} nm across; "
                f"use {geometry.size / _EVER:.2g} to {geometry.size / 4:.2g} nm",
            )
    else:
        region_of(table, study)
    numbers = [w for w in table.wavelengths if w != "peak"]
    _check_media(media, numbers, ("near_field", "wavelengths"))
    if table.sers is not None:
        _check_media(media, sers_wavelengths(table), ("near_field", "sers"))


def region_of(table: NearFieldTable, study: Study) -> Region:
    """Return the points of a region other than the surface, from the particle's centre, nm.

    Raises
    ------
    Mistake
    """
    centre = table.centre or (0.0, 0.0, 0.0)
    size, step = table.size or (), table.step or 0.0
    try:
        if table.points is not None:
            return read_points(study.folder / table.points)
        if table.kind == "line":
            return line(table.start, table.end, step)
        if table.kind == "box":
            a, b, c = size if len(size) == 3 else size * 3
            return box((a, b, c), step, centre)
        a, b = size if len(size) == 2 else size * 2
        return plane(table.normal or "z", (a, b), step, centre)
    except InputError as error:
        key = "points" if table.points is not None else "step"
        raise Mistake(("near_field", key), str(error)) from None


def cover(table: NearFieldTable, particle: Particle, spacing: float) -> SurfacePoints:
    """Cover the surface at the height of the statistics, `CLEAR` spacings by default."""
    low, high = particle.bounds
    least = float(np.max(np.subtract(high, low))) / _MOST_PIECES
    own = table.step if table.kind == "surface" else None
    height = CLEAR * spacing if table.height is None else table.height
    return cover_surface(particle, own or max(spacing, least), height)


def surface_region(surface: SurfacePoints, centre: np.ndarray) -> Region:
    """Return the surface's points as a region, from the particle's centre."""
    points = surface.points - centre
    return Region("surface", points, (len(points),), (), (), surface.step)


def sers_wavelengths(table: NearFieldTable) -> tuple[float, float]:
    """Return the wavelengths of the laser and of the Raman line, nm.

    Raises
    ------
    Mistake
    """
    assert table.sers is not None
    try:
        stokes = stokes_wavelength(table.sers.laser_nm, table.sers.shift_per_cm)
    except InputError as error:
        raise Mistake(("near_field", "sers", "shift_per_cm"), str(error)) from None
    return table.sers.laser_nm, stokes


def _check_media(media: Media, wavelengths: Sequence, key: tuple[str, ...]) -> None:
    if not wavelengths:
        return
    try:
        check_media(media, wavelengths)
    except Mistake as mistake:
        raise Mistake(key, mistake.message) from None
