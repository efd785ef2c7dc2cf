"""Extinction, absorption and scattering of a plane wave."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..lattice.solution import Polarization
from .efficiencies import Efficiencies
from .far_field import quadrature_order, scattering_amplitude, sphere_quadrature


@dataclass(frozen=True)
class CrossSections(Efficiencies):
    """Cross sections in nm^2.

    Attributes
    ----------
    c_ext, c_abs, c_sca : float
        Extinction from the forward amplitude, absorption, scattering.
    c_abs_cells, c_sca_far : float
        Absorption summed over the cells and scattering integrated over the far field, each
        computed on its own.
    area : float
        Cross section pi r_eff^2 of the sphere of equal volume, by which efficiencies are
        normalized.
    """

    c_ext: float
    c_abs: float
    c_sca: float
    c_abs_cells: float
    c_sca_far: float
    area: float

    @property
    def balance(self) -> float:
        """``(C_abs + C_sca - C_ext) / C_ext`` from the independent sums: zero if all is well."""
        return (self.c_abs_cells + self.c_sca_far - self.c_ext) / self.c_ext


def cross_sections(polarization: Polarization) -> CrossSections:
    """Cross sections of a solved system.

    Parameters
    ----------
    polarization : Polarization

    Returns
    -------
    CrossSections

    Notes
    -----
    ``C_ext = 4 pi k sum Im(conj(E).p)``,
    ``C_abs = 4 pi k sum {Im[p.conj(alpha^-1 p)] - (2/3) k^3 |p|^2}`` and C_sca from the integral
    of ``|F|^2``. Of the two absorptions, the one between extinction and far field settles long
    before the sum over cells when the solver is slow, but it is a difference: it is the one
    stated unless absorption is a small part of extinction.

    References
    ----------
    Draine, B. T. (1988), Astrophys. J. 333, 848.
    """
    system = polarization.system
    k = system.k
    p = np.ascontiguousarray(polarization.p, np.complex128)
    c_ext = extinction(polarization)
    own = system.alpha_inverse.astype(np.complex128).apply(p, np.empty_like(p))
    c_cells = (
        4 * np.pi * k * float(np.sum((p * own.conj()).imag) - 2 / 3 * k**3 * np.sum(abs(p) ** 2))
    )
    c_far = scattering(polarization)
    c_abs = c_ext - c_far if c_far < 0.9 * c_ext else c_cells
    return CrossSections(
        c_ext, c_abs, c_ext - c_abs, c_cells, c_far, float(np.pi * system.r_eff**2)
    )


def extinction(polarization: Polarization) -> float:
    """C_ext in nm^2, by the optical theorem."""
    total = np.vdot(polarization.incident, polarization.p)
    return float(4 * np.pi * polarization.system.k * total.imag)


def scattering(polarization: Polarization) -> float:
    """C_sca in nm^2, from the far field in all directions."""
    system = polarization.system
    centred = system.positions - system.positions.mean(axis=0)
    order = quadrature_order(system.k * float(np.sqrt((centred**2).sum(axis=1).max())))
    directions, weights = sphere_quadrature(order)
    amplitude = scattering_amplitude(polarization, directions)
    return float(weights @ (abs(amplitude) ** 2).sum(axis=1))
