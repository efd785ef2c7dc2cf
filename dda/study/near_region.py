"""The region of ``[near_field]`` as points, and its mistakes, before anything is solved."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

import numpy as np

from dda.design.sers import stokes_wavelength
from dda.errors import InputError
from dda.materials.anisotropic import AnisotropicMaterial
from dda.response.near_points import Region, box, line, plane, read_points
from dda.response.surface_points import SurfacePoints, cover_surface
from dda.study.geometry import Geometry
from dda.study.lights import check_beam, check_clear
from dda.study.media import Media, check_media
from dda.study.mistakes import Mistake
from dda.study.near_levels import coarser_across
from dda.study.near_table import NearFieldTable
from dda.study.points import Point
from shapes import Particle

#: Height in spacings at which the error is known on smooth bodies, whatever way they face.
CLEAR = 1.5
# Pieces across the particle into which its surface is cut by default at most, and ever.
_MOST_PIECES, _EVER = 120, 400


def check_near(point: Point, media: Media, geometry: Geometry) -> None:
    """Find the mistakes of ``[near_field]`` before anything is solved.

    Parameters
    ----------
    point : Point
        Any of its combination of varied keys.
    media : Media
    geometry : Geometry

    Raises
    ------
    Mistake
    """
    table = point.tables.near_field
    if table is None:
        return
    if point.averaged:
        raise Mistake(
            ("near_field",),
            'near fields are those of one direction of light; leave out orientation = "average"',
        )
    for name, material in media.particle.items():
        if isinstance(material, AnisotropicMaterial):
            raise Mistake(
                ("near_field",),
                f'near fields of anisotropic materials such as "{name}" are not known to this '
                "program yet; leave out the table, or use an isotropic material",
            )
    if table.kind == "surface":
        if table.step is not None and not geometry.size / _EVER <= table.step <= geometry.size / 4:
            raise Mistake(
                ("near_field", "step"),
                f"pieces of {table.step:g} nm do not suit a surface {geometry.size:.3g} nm across; "
                f"use {geometry.size / _EVER:.2g} to {geometry.size / 4:.2g} nm",
            )
    else:
        _check_source(point, region_of(table, point.folder))
    numbers = [float(w) for w in table.wavelengths if w != "peak"]
    _check_media(media, numbers, ("near_field", "wavelengths"))
    check_beam(point, media, geometry, numbers)
    beam = point.tables.light.beam
    if table.sers is not None:
        two = sers_wavelengths(table)
        _check_media(media, two, ("near_field", "sers"))
        check_beam(point, media, geometry, two)
        if table.sers.orientation == "average" and beam is not None:
            raise Mistake(
                ("near_field", "sers", "orientation"),
                "the average over orientations is that of plane waves; leave out light.beam",
            )
    focused = beam is not None and beam.gaussian
    if table.heat is not None and table.heat.power_mw is not None and not focused:
        raise Mistake(
            ("near_field", "heat", "power_mw"),
            "only a focused beam has a power: give light.beam = {waist_nm = 400}, or "
            "intensity_w_per_cm2 instead of power_mw",
        )
    _check_emitters(point, table, media, geometry)


def _check_source(point: Point, region: Region) -> None:
    beam = point.tables.light.beam
    if beam is None or beam.gaussian:
        return
    away = np.linalg.norm(region.points - np.asarray(beam.position), axis=1)
    if float(away.min()) < 1e-6:
        raise Mistake(
            ("near_field", "points" if region.kind == "points" else "region"),
            f"one of the points is at light.beam.position {list(beam.position or ())}, where the "
            "field is infinite; move the region by a part of its step, or leave the point out",
        )


def _check_emitters(point: Point, table: NearFieldTable, media: Media, geometry: Geometry) -> None:
    for number, emitter in enumerate(table.emitters):
        key = ("near_field", "emitters", number)
        if emitter.wavelength_nm is not None:
            _check_media(media, [emitter.wavelength_nm], (*key, "wavelength_nm"))
        place = np.asarray(emitter.position, float)
        if point.accuracy.target is not None:
            # How fine the cells will be is not known yet: only the particle's inside is refused.
            check_clear(place, geometry, (*key, "position"), "emitter", 0.9)
            continue
        coarser = replace(geometry, spacing=geometry.size / coarser_across(geometry))
        for level in (coarser, geometry):
            check_clear(place, level, (*key, "position"), "emitter")


def region_of(table: NearFieldTable, folder: Path) -> Region:
    """Return the points of a region other than the surface, from the particle's centre, nm.

    Raises
    ------
    Mistake
    """
    centre = table.centre or (0.0, 0.0, 0.0)
    size, step = table.size or (), table.step or 0.0
    try:
        if table.points is not None:
            return read_points(folder / table.points)
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


def surface_pieces(table: NearFieldTable, geometry: Geometry) -> int:
    """Return about how many pieces `cover` will make."""
    own = table.step if table.kind == "surface" else None
    step = own or max(geometry.spacing, geometry.size / _MOST_PIECES)
    # a surface cuts about 1.5 squares of a lattice for each of its own size
    return math.ceil(1.5 * geometry.particle.area() / step**2)


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


def _check_media(media: Media, wavelengths: Sequence, key: tuple[str | int, ...]) -> None:
    if not wavelengths:
        return
    try:
        check_media(media, wavelengths)
    except Mistake as mistake:
        raise Mistake(key, mistake.message) from None
