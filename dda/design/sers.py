"""The electromagnetic enhancement of surface-enhanced Raman scattering."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from shapes import Particle

from ..errors import InputError
from ..lattice.linear_system import System
from ..lattice.solution import Polarization, solve
from ..light import plane_wave, transverse
from ..response.far_field import sphere_quadrature
from ..response.near_field import fields_at

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
    """

    factor: np.ndarray
    mean: float
    maximum: float
    place: np.ndarray
    trusted: np.ndarray


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
    directions: np.ndarray | None = None,
    weights: np.ndarray | None = None,
    particle: Particle | None = None,
    tolerance: float = 1e-4,
    limit: int = 2000,
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
    directions : ndarray, shape (m, 3), optional
        Unit vectors of incidence; by default the 18 of a quadrature that is exact for
        spherical harmonics up to degree 5, enough for particles below half a wavelength.
    weights : ndarray, shape (m,), optional
        Of the directions; equal by default if directions are given.
    particle, tolerance, limit
        As in `fields_at` and `dda.solve`.
    progress : callable, optional
        Called with the number of solves done and of all.

    Returns
    -------
    Sers

    Notes
    -----
    Each direction takes two solves a wavelength; fields of other polarizations are sums of the
    two, and the mean over three of them, 60 degrees apart, is that over all.
    """
    if directions is None:
        directions, weights = sphere_quadrature(3)
    directions = np.asarray(directions, float).reshape(-1, 3)
    weights = np.ones(len(directions)) if weights is None else np.asarray(weights, float)
    if len(weights) != len(directions) or not weights.sum() > 0:
        raise InputError("give one weight for each direction, with a sum above 0")
    total = np.zeros(len(points))
    trusted = np.ones(len(points), bool)
    done, solves = 0, 4 * len(directions)
    for direction, weight in zip(directions, weights / weights.sum(), strict=True):
        pairs = []
        for system in (laser, stokes):
            pair = []
            for polarization in transverse(direction):
                light = plane_wave(direction, polarization)
                solved = solve(system, light, tolerance=tolerance, limit=limit)
                found = fields_at(solved, points, particle=particle)
                trusted &= found.trusted
                pair.append(found.e)
                done += 1
                if progress is not None:
                    progress(done, solves)
            pairs.append(pair)
        total += weight * turned_mean(pairs[0], pairs[1])
    return summed_up(total, points, areas, trusted)


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
