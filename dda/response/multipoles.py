"""Multipoles of the induced dipoles: what radiates, and what it takes from the light."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..errors import InputError
from ..lattice.solution import Polarization
from ..light import PlaneWave
from .far_field import quadrature_order
from .tmatrix import TMatrix
from .vector_waves import moments_of, plane_wave_coefficients, real_to_complex, wave_labels


@dataclass(frozen=True)
class Multipoles:
    """Parts of C_ext and C_sca by kind and order of multipole.

    Attributes
    ----------
    c_ext, c_sca : ndarray, shape (2, N)
        nm^2; row 0 electric, row 1 magnetic; columns dipole, quadrupole, octupole, ... The sums
        are C_ext and C_sca. Of C_ext single parts may be negative: multipoles of a particle
        without spherical symmetry exchange energy through the light.
    amplitudes : ndarray of complex, shape (2 N (N+2),)
        Outgoing amplitudes of the vector spherical waves about `centre`, as rows of a T-matrix.
    centre : ndarray, shape (3,)
        nm.
    """

    c_ext: np.ndarray
    c_sca: np.ndarray
    amplitudes: np.ndarray
    centre: np.ndarray

    @property
    def order(self) -> int:
        """Highest order N."""
        return self.c_ext.shape[1]


def multipoles(polarization: Polarization, order: int | None = None, centre=None) -> Multipoles:
    """Multipole decomposition of extinction and scattering.

    Parameters
    ----------
    polarization : Polarization
        For a plane wave.
    order : int, optional
        Highest order; by default enough for the sums to be complete.
    centre : array_like, shape (3,), optional
        Of the multipoles, nm; the centre of the box of cells by default. All but the first
        multipole that does not vanish depend on it.

    Returns
    -------
    Multipoles

    Raises
    ------
    InputError
        If the light is not a plane wave.

    Notes
    -----
    ``f = 4 pi i k^3 sum conj(W(r_j)).p_j`` with the regular waves W; then
    ``C_sca = sum |f|^2/k^2`` and ``C_ext = -Re sum f conj(q)/k^2``, q the amplitudes of the
    plane wave (Muhlig et al. 2011, Metamaterials 5, 64; prefactors checked against Mie).

    Examples
    --------
    >>> import dda, shapes
    >>> cells = shapes.voxelize(shapes.sphere(diameter=30, material="gold"), cells=8)
    >>> solved = dda.solve(dda.system(cells, wavelength=530), dda.plane_wave())
    >>> parts = multipoles(solved)
    >>> bool(parts.c_ext[0, 0] > 0.98 * parts.c_ext.sum())  # an electric dipole
    True
    """
    system, light = polarization.system, polarization.light
    if not isinstance(light, PlaneWave):
        raise InputError("multipoles of extinction need a plane wave as the light")
    positions = system.positions
    box = (positions.min(axis=0) + positions.max(axis=0)) / 2
    middle = box if centre is None else np.asarray(centre, float)
    if order is None:
        reach = float(np.linalg.norm(positions - middle, axis=1).max())
        order = quadrature_order(system.k * reach)
    moments = moments_of(polarization.p[None], positions - middle, system.k, order)[0]
    outgoing = 4j * np.pi * system.k**3 * (real_to_complex(order).conj() @ moments)
    phase = np.exp(1j * system.k * (middle @ light.direction))
    incident = phase * plane_wave_coefficients(order, light.direction, light.polarization)
    kind, n, _ = wave_labels(order).T
    place = (1 - kind) * order + n - 1
    taken = -(outgoing * incident.conj()).real / system.k**2
    radiated = abs(outgoing) ** 2 / system.k**2
    return Multipoles(
        c_ext=np.bincount(place, taken, 2 * order).reshape(2, order),
        c_sca=np.bincount(place, radiated, 2 * order).reshape(2, order),
        amplitudes=outgoing,
        centre=middle,
    )


def averaged_multipoles(t: TMatrix) -> tuple[np.ndarray, np.ndarray]:
    """Parts of the orientation averages of C_ext and C_sca by kind and order of multipole.

    Parameters
    ----------
    t : TMatrix

    Returns
    -------
    c_ext, c_sca : ndarray, shape (2, N)
        nm^2; rows and columns as in `Multipoles`. Of C_sca the parts are those of the radiating
        multipole, whatever the light excited.

    Examples
    --------
    >>> import dda, shapes
    >>> from dda.response.tmatrix_solve import t_matrix
    >>> cells = shapes.voxelize(shapes.sphere(diameter=30, material="gold"), cells=8)
    >>> c_ext, c_sca = averaged_multipoles(t_matrix(dda.system(cells, wavelength=530)))
    >>> bool(c_sca[0, 0] > 0.99 * c_sca.sum())  # an electric dipole
    True
    """
    kind, n, _ = t.labels.T
    place = (1 - kind) * t.order + n - 1
    factor = 2 * np.pi / t.k**2
    taken = -factor * np.diag(t.matrix).real
    radiated = factor * np.sum(abs(t.matrix) ** 2, axis=1)
    c_ext, c_sca = (
        np.bincount(place, part, 2 * t.order).reshape(2, t.order) for part in (taken, radiated)
    )
    return c_ext, c_sca
