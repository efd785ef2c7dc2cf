"""The electromagnetic enhancement of surface-enhanced Raman scattering."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from shapes import Particle

from ..errors import InputError
from ..lattice.linear_system import System
from ..lattice.solution import Polarization, solve
from ..response.far_field import sphere_quadrature
from ..response.near_field import fields_at
from .light_modes import LightModes, light_modes

Solver = Callable[[System, object], Polarization]

# Part of the mean square of the incident fields that may be left out of an average.
_NEGLECT = 1e-5

# Angles of the polarization that average products of four field components exactly.
_TURNS = np.deg2rad([0.0, 60.0, 120.0])


def stokes_wavelength(laser: float, shift: float) -> float:
    """Vacuum wavelength in nm of the Raman line of `shift` cm^-1 for a `laser` at so many nm.

    Raises
    ------
    InputError
        If the shift is not below the laser's wave number.

    Examples
    --------
    >>> round(stokes_wavelength(633, 1600), 1)
    704.3
    """
    if not (np.isfinite(laser) and laser > 0):
        raise InputError(f"laser = {laser} must be a wavelength greater than 0 (nm)")
    wave_number = 1e7 / laser - shift
    if not (np.isfinite(wave_number) and wave_number > 0):
        raise InputError(
            f"a Raman shift of {shift} cm^-1 leaves no light of the {laser} nm laser; it must be "
            f"below {1e7 / laser:.0f} cm^-1"
        )
    return 1e7 / wave_number


def sers_factor(e2_laser: np.ndarray, e2_stokes: np.ndarray) -> np.ndarray:
    """``|E(w_laser)|^2 |E(w_Stokes)|^2`` at points, over the incident wave.

    The two fields are those of the same incident direction and polarization: by reciprocity the
    second is the enhancement of the Raman light sent back the way the laser came.

    References
    ----------
    Le Ru, E. C., Etchegoin, P. G. (2006), Chem. Phys. Lett. 423, 63.

    Examples
    --------
    >>> sers_factor(np.array([100.0]), np.array([80.0])).tolist()
    [8000.0]
    """
    return np.asarray(e2_laser) * np.asarray(e2_stokes)


@dataclass(frozen=True, eq=False)
class Sers:
    """SERS factors of a surface.

    Attributes
    ----------
    factor : ndarray, shape (n,)
        At every point (averaged over the light, if there was more than one).
    mean : float
        Over the surface.
    maximum : float
    place : ndarray, shape (3,)
        Of the maximum, nm.
    trusted : ndarray of bool, shape (n,)
        See `dda.response.near_field.NearField`.
    mean_error, maximum_error : float
        From the average over orientations, if there was one; the cells' error is not in them.
    """

    factor: np.ndarray
    mean: float
    maximum: float
    place: np.ndarray
    trusted: np.ndarray
    mean_error: float = 0.0
    maximum_error: float = 0.0


def sers_on_surface(
    laser: Polarization,
    stokes: Polarization,
    points: np.ndarray,
    areas: np.ndarray,
    *,
    particle: Particle | None = None,
) -> Sers:
    """SERS factors at points for one incident wave.

    Parameters
    ----------
    laser, stokes : Polarization
        Solved for the same light at the two wavelengths.
    points : ndarray, shape (n, 3)
        nm, e.g. of `dda.response.surface_points.cover_surface`.
    areas : ndarray, shape (n,)
        Area that each point stands for, nm^2.
    particle : shapes.Particle, optional
        As in `fields_at`.

    Returns
    -------
    Sers

    Examples
    --------
    >>> import dda, shapes
    >>> sphere = shapes.sphere(diameter=40, material="gold")
    >>> cells, shell = shapes.voxelize(sphere, cells=12), dda.cover_surface(sphere, 4, height=5)
    >>> solved = [
    ...     dda.solve(dda.system(cells, wavelength=w, host="water"), dda.plane_wave())
    ...     for w in (532, stokes_wavelength(532, 1000))
    ... ]
    >>> found = sers_on_surface(*solved, shell.points, shell.areas, particle=sphere)
    >>> found.maximum > found.mean > 10
    True
    """
    at_laser = fields_at(laser, points, particle=particle)
    at_stokes = fields_at(stokes, points, particle=particle)
    factor = sers_factor(at_laser.e2, at_stokes.e2)
    return summed_up(factor, points, areas, at_laser.trusted & at_stokes.trusted)


def sers_averaged(
    laser: System,
    stokes: System,
    points: np.ndarray,
    areas: np.ndarray,
    *,
    particle: Particle | None = None,
    tolerance: float = 1e-4,
    limit: int = 2000,
    solver: Solver | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> Sers:
    """SERS factors averaged over directions of incidence and all linear polarizations.

    That is the factor of a particle that takes every orientation, laser and detector fixed.

    Parameters
    ----------
    laser, stokes : System
        The same cells at the two wavelengths.
    points : ndarray, shape (n, 3)
        nm.
    areas : ndarray, shape (n,)
        nm^2.
    particle, tolerance, limit
        As in `fields_at` and `dda.solve`.
    solver : callable, optional
        Gives the `Polarization` for a system and a light, instead of `dda.solve`.
    progress : callable, optional
        Called with the number of solves done and of all.

    Returns
    -------
    Sers
        Its orientation errors come from fewer directions and fewer modes.

    Notes
    -----
    Plane waves from everywhere are made of few fields (`dda.design.light_modes`), some ten to
    thirty, which are solved for at both wavelengths; a quadrature over directions then costs
    nothing. Fields of other polarizations are sums of two, and the mean over three of them,
    60 degrees apart, is that over all.

    Examples
    --------
    >>> import dda, shapes
    >>> sphere = shapes.sphere(diameter=30, material="gold")
    >>> cells = shapes.voxelize(sphere, cells=8)
    >>> systems = [dda.system(cells, wavelength=w, host="water") for w in (540, 560)]
    >>> found = sers_averaged(*systems, np.array([[20.0, 0, 0]]), np.ones(1), particle=sphere)
    >>> found.mean > 10 * found.mean_error
    True
    """

    def solved_by_default(system: System, light: object) -> Polarization:
        return solve(system, light, tolerance=tolerance, limit=limit)

    kept = [modes_of(system) for system in (laser, stokes)]
    all_solves, done = sum(len(modes.lights) for modes in kept), 0
    trusted = np.ones(len(points), bool)
    fields = []
    for system, modes in zip((laser, stokes), kept, strict=True):
        found = np.empty((len(modes.lights), len(points), 3), complex)
        for row, light in enumerate(modes.lights):
            solved = (solver or solved_by_default)(system, light)
            near = fields_at(solved, points, particle=particle)
            found[row], trusted = near.e, trusted & near.trusted
            done += 1
            if progress is not None:
                progress(done, all_solves)
        fields.append(found)
    order = max(_order(system.k, np.ptp(system.positions, axis=0)) for system in (laser, stokes))
    fewer = [_stronger(modes) for modes in kept]
    counts = [len(modes.lights) for modes in kept]
    best = _mean_factor(kept, fields, counts, order)
    others = [
        _mean_factor(kept, fields, counts, order - 2),
        _mean_factor(kept, fields, fewer, order),
    ]
    top = int(np.argmax(best))
    mean = float(np.average(best, weights=areas))
    return replace(
        summed_up(best, points, areas, trusted),
        mean_error=sum(abs(float(np.average(o, weights=areas)) - mean) for o in others),
        maximum_error=sum(abs(float(o[top] - best[top])) for o in others),
    )


def modes_of(system: System) -> LightModes:
    """Fields whose sums are plane waves from everywhere, for the box of a system's cells."""
    d, positions = system.cells.spacing, system.positions
    low, high = positions.min(axis=0) - d / 2, positions.max(axis=0) + d / 2
    return modes_of_box(system.k, high - low, (low + high) / 2)


def modes_of_box(k: float, extent: np.ndarray, centre: np.ndarray) -> LightModes:
    """The same for any box; lengths in nm."""
    directions, weights = sphere_quadrature(_order(k, extent))
    return light_modes(directions, weights, k=k, extent=extent, centre=centre, neglect=_NEGLECT)


def _order(k: float, extent: np.ndarray) -> int:
    """Order of the quadrature over directions: products of four waves across the particle."""
    return 6 + math.ceil(k * float(np.linalg.norm(extent)))


def _stronger(modes: LightModes) -> int:
    """How many modes would be kept if ten times as much were neglected."""
    left = 1 - np.cumsum(modes.strength)
    return int(np.count_nonzero(left > 10 * _NEGLECT)) + 1


def _mean_factor(
    modes: Sequence[LightModes], fields: Sequence[np.ndarray], counts: Sequence[int], order: int
) -> np.ndarray:
    """Mean factor at points from the fields (m, n, 3) of the first so many modes, (n,)."""
    directions, weights = sphere_quadrature(order)
    found = [m.coefficients(directions)[:c] for m, c in zip(modes, counts, strict=True)]
    total = np.zeros(fields[0].shape[1])
    for number, weight in enumerate(weights / weights.sum()):
        pairs = [
            np.einsum("mj,mnc->jnc", coefficients[:, number], field[:count])
            for coefficients, field, count in zip(found, fields, counts, strict=True)
        ]
        total += weight * turned_mean(*pairs)
    return total


def turned_mean(laser, stokes) -> np.ndarray:
    """Mean of ``|E_laser|^2 |E_stokes|^2`` over the angle of the incident polarization, (n,).

    Parameters
    ----------
    laser, stokes : pair of ndarray of complex, shape (n, 3)
        Fields for two polarizations at right angles.
    """
    total = np.zeros(len(laser[0]))
    for angle in _TURNS:
        both = []
        for first, second in (laser, stokes):
            turned = np.cos(angle) * first + np.sin(angle) * second
            both.append((np.abs(turned) ** 2).sum(axis=1))
        total += both[0] * both[1]
    return total / len(_TURNS)


def summed_up(
    factor: np.ndarray, points: np.ndarray, areas: np.ndarray, trusted: np.ndarray
) -> Sers:
    """Mean, maximum and its place of factors on a surface."""
    top = int(np.argmax(factor))
    return Sers(
        factor,
        float(np.average(factor, weights=areas)),
        float(factor[top]),
        np.array(points[top]),
        trusted,
    )
