"""The incident fields of a point: plane waves, a focused beam, a dipole's light."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace

import numpy as np

from dda.beams import GaussianBeam, PointDipole, gaussian_beam, point_dipole
from dda.errors import InputError
from dda.light import PlaneWave, plane_wave, transverse
from dda.study.beam_table import BeamTable
from dda.study.geometry import Geometry
from dda.study.media import Media
from dda.study.mistakes import Mistake
from dda.study.points import Point

Light = PlaneWave | GaussianBeam | PointDipole

#: Spacings between a dipole and the centres of the particle's cells, at least.
CLOSEST = 2.0


def lights_of(point: Point, geometry: Geometry, k: float) -> tuple[Light, ...]:
    """Return the incident fields to solve for; their cross sections are averaged.

    Parameters
    ----------
    point : Point
    geometry : Geometry
        Whose centre is where beams have their origin.
    k : float
        Wave number in the host, 1/nm.

    Notes
    -----
    Every field is in units of its own amplitude at the focus of a Gaussian beam and at the
    reference of a dipole. So the cross sections of a beam are powers over the incident intensity
    there.
    """
    beam = point.tables.light.beam
    centre = centre_of(geometry)
    if beam is not None and not beam.gaussian:
        return (_dipole(beam, centre, k),)
    polarizations: tuple = (point.polarization,)
    if point.polarization == "unpolarized":
        polarizations = transverse(np.asarray(point.direction, float))
    if beam is None:
        return tuple(plane_wave(point.direction, e) for e in polarizations)
    focus = centre + np.asarray(beam.focus or (0, 0, 0), float)
    waist = float(beam.waist_nm or 0)
    return tuple(gaussian_beam(point.direction, e, waist=waist, focus=focus) for e in polarizations)


def light_count(point: Point) -> int:
    """Return the number of incident fields that are solved for."""
    dipole = point.tables.light.beam is not None and not point.tables.light.beam.gaussian
    return 2 if point.polarization == "unpolarized" and not dipole else 1


def beam_text(point: Point) -> str:
    """Return the light in words where it is no plane wave, else an empty text."""
    beam = point.tables.light.beam
    if beam is None:
        return ""
    if beam.gaussian:
        return (
            f"Gaussian beam, waist {beam.waist_nm:g} nm, focus at {_at(beam.focus)}; cross "
            "sections are powers over the intensity at the focus"
        )
    return (
        f"dipole at {_at(beam.position)}; cross sections are powers over its intensity at "
        f"{_at(beam.reference)}"
    )


def check_beam(
    point: Point, media: Media, geometry: Geometry, wavelengths: Iterable[float]
) -> None:
    """Find the mistakes of a beam that the particle or the wavelength shows.

    Raises
    ------
    Mistake
    """
    beam = point.tables.light.beam
    if beam is None:
        return
    key = ("light", "beam", "waist_nm" if beam.gaussian else "position")
    if not beam.gaussian:
        # The coarsest lattice that tells the error must know the light as well.
        across = min(geometry.coarser(), default=geometry.size / geometry.spacing)
        coarsest = replace(geometry, spacing=geometry.size / across)
        check_clear(np.asarray(beam.position), coarsest, key, "dipole")
        return
    for wavelength in wavelengths:
        k = 2 * np.pi * float(np.real(media.host.index(np.array([wavelength]))[0])) / wavelength
        light = lights_of(point, geometry, k)[0]
        assert isinstance(light, GaussianBeam)
        try:
            light.spectrum(k, 0.0)
        except InputError as error:
            raise Mistake(key, f"at {wavelength:g} nm: {error}") from None


def check_clear(
    place: np.ndarray,
    geometry: Geometry,
    key: tuple[str | int, ...],
    what: str,
    spacings: float = CLOSEST,
) -> None:
    """Refuse a source of light closer than so many spacings to the particle.

    Raises
    ------
    Mistake
    """
    cells = geometry.cells
    full = cells.positions[cells.window.sum(axis=1) >= 0.5]
    away = float(np.linalg.norm(full - centre_of(geometry) - place, axis=1).min())
    least = spacings * cells.spacing
    if away < least:
        raise Mistake(
            key,
            f"the {what} at {_at(place)} is {away:.3g} nm from the centre of a cell of the "
            f"particle; with cells of {cells.spacing:.3g} nm its light can be told from "
            f"{least:.3g} nm on: move it away or take smaller cells",
        )


def by_source(point: Point, places: np.ndarray, geometry: Geometry) -> np.ndarray:
    """Which places (n, 3), from the particle's centre in nm, are beside a dipole that lights it.

    Those closer to it than half its distance from the particle: there its field is stronger than
    all that the particle makes of it.
    """
    beam = point.tables.light.beam
    if beam is None or beam.gaussian:
        return np.zeros(len(places), bool)
    cells = geometry.cells.positions - centre_of(geometry)
    away = np.linalg.norm(cells - beam.position, axis=1).min()
    return np.linalg.norm(places - np.asarray(beam.position), axis=1) < away / 2


def centre_of(geometry: Geometry) -> np.ndarray:
    """Return the centre of the particle's bounds, where places of a study start, (3,) nm."""
    return np.add(*geometry.particle.bounds) / 2


def _dipole(beam: BeamTable, centre: np.ndarray, k: float) -> PointDipole:
    assert beam.position is not None
    assert beam.moment is not None
    light = point_dipole(centre + beam.position, beam.moment)
    reference = centre + np.asarray(beam.reference or (0, 0, 0), float)
    unit = float(np.linalg.norm(light.field(reference[None], k)))
    if not unit > 1e-12 * float(np.linalg.norm(beam.moment)) * k**3:
        raise InputError(f"the dipole has no field at its reference {reference.tolist()} nm")
    return point_dipole(light.position, light.moment / unit)


def _at(place) -> str:
    x, y, z = (0.0, 0.0, 0.0) if place is None else place
    return f"({x:g}, {y:g}, {z:g}) nm"
