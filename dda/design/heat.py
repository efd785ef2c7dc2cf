"""Where the light's power is turned into heat inside a particle."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..lattice.linear_system import System
from ..lattice.solution import Polarization
from ..response.near_field import NearField

#: For every text about irradiating samples or people.
CAUTION = (
    "Lasers can blind and burn, and heated particles can ignite or boil their surroundings. "
    "These numbers are estimates for planning, no safety assessment: follow your laboratory's "
    "laser-safety rules and ask the person responsible for them."
)

# W/m^2 times nm^-1 in W/m^3.
_PER_NM = 1e9


@dataclass(frozen=True, eq=False)
class Heat:
    """Absorbed power cell by cell.

    Attributes
    ----------
    positions : ndarray, shape (n, 3)
        Centres of the cells, nm.
    cross_section : ndarray, shape (n,)
        Part of C_abs that each cell takes, nm^2; they add up to it exactly.
    volume : ndarray, shape (n,)
        Material in each cell, nm^3.
    density : ndarray, shape (n,)
        Absorbed power density in the material, W/m^3. In surface cells it is the mean over what
        the window holds there.
    total : float
        Absorbed power, W.
    """

    positions: np.ndarray
    cross_section: np.ndarray
    volume: np.ndarray
    density: np.ndarray
    total: float


def absorbed_power(polarization: Polarization, intensity: float) -> Heat:
    """Absorbed power of every cell.

    Parameters
    ----------
    polarization : Polarization
    intensity : float
        Of the incident light (at the focus of a beam), W/m^2; 1 mW/um^2 is 1e9 W/m^2.

    Returns
    -------
    Heat

    Notes
    -----
    ``C_j = 4 pi k {Im[p.conj(alpha^-1 p)] - (2/3) k^3 |p|^2}``, whose sum is C_abs (Draine 1988,
    Astrophys. J. 333, 848). With slowly converging metals single surface cells may scatter about
    their mean (some may even be negative) long after the sum has settled.

    Lasers can blind and burn: the numbers are for planning, local safety rules decide.

    Examples
    --------
    >>> import dda, shapes
    >>> cells = shapes.voxelize(shapes.sphere(diameter=40, material="gold"), cells=12)
    >>> solved = dda.solve(dda.system(cells, wavelength=530), dda.plane_wave())
    >>> heat = absorbed_power(solved, intensity=1e9)
    >>> c_abs = dda.cross_sections(solved).c_abs_cells
    >>> bool(abs(heat.cross_section.sum() / c_abs - 1) < 1e-9)
    True
    """
    system = polarization.system
    k, cells = system.k, system.cells
    p = np.ascontiguousarray(polarization.p, np.complex128)
    own = system.alpha_inverse.astype(np.complex128).apply(p, np.empty_like(p))
    part = np.einsum("nc,nc->n", p, own.conj()).imag - 2 / 3 * k**3 * (np.abs(p) ** 2).sum(axis=1)
    section = 4 * np.pi * k * part
    chosen = cells.rows()[tuple(system.index.T)]
    filled = np.clip(cells.window[chosen].sum(axis=1), 0.02, 1)
    volume = filled * cells.spacing**3
    density = intensity * section / volume * _PER_NM
    return Heat(
        system.positions, section, volume, density, float(intensity * section.sum() * 1e-18)
    )


def power_density(field: NearField, polarization: Polarization, intensity: float) -> np.ndarray:
    """Absorbed power density at points, W/m^3; zero in the host.

    Parameters
    ----------
    field : NearField
        At the points, from `polarization`.
    polarization : Polarization
    intensity : float
        Of the incident light, W/m^2.

    Returns
    -------
    ndarray, shape (n,)

    Notes
    -----
    ``intensity k Im(eps) |E|^2``, eps relative to the host and E over the incident amplitude.
    Lasers can blind and burn: the numbers are for planning, local safety rules decide.

    Examples
    --------
    >>> import dda, shapes
    >>> cells = shapes.voxelize(shapes.sphere(diameter=40, material="gold"), cells=12)
    >>> solved = dda.solve(dda.system(cells, wavelength=530), dda.plane_wave())
    >>> found = dda.fields_at(solved, np.array([[0.0, 0, 0], [0, 0, 40]]))
    >>> inside, outside = power_density(found, solved, intensity=1e9)
    >>> bool(inside > 1e16 > outside)
    True
    """
    return density_per_e2(polarization.system, intensity)[field.material] * field.e2


def density_per_e2(system: System, intensity: float) -> np.ndarray:
    """Absorbed power density for ``|E|^2 = 1`` in every material, W/m^3; last that of the host, 0.

    Parameters
    ----------
    system : System
    intensity : float
        Of the incident light, W/m^2.

    Returns
    -------
    ndarray, shape (m + 1,)
        Taken with -1, the host's index in `NearField.material`, it is zero.
    """
    return intensity * system.k * np.append(system.permittivity.imag, 0.0) * _PER_NM
