"""A point dipole outside a sphere: how much faster it decays, exactly.

The dipole's field is expanded in spherical waves about the sphere's centre, each of which the
sphere answers with its Mie coefficient (Ruppin 1982, J. Chem. Phys. 76, 1681; Kim, Leung & George
1988, Surf. Sci. 195, 1). The formulas here are from memory; the tests hold them to energy
conservation, to the image dipole of a small sphere and to the free dipole.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from validation.mie import default_order, reduced_coefficients, relative_index
from validation.riccati import riccati, small_argument_ratio


@dataclass(frozen=True)
class Rates:
    """Decay rates over that of the same dipole in the host alone.

    Attributes
    ----------
    total, radiative : float
    """

    total: float
    radiative: float

    @property
    def quantum_yield(self) -> float:
        """Radiated part, of an emitter that loses nothing by itself."""
        return self.radiative / self.total


def dipole_near_sphere(
    diameter: float, height: float, wavelength: float, eps: complex, n_host: float = 1.0
) -> tuple[Rates, Rates]:
    """Rates of a dipole that points at the sphere, and of one across.

    Parameters
    ----------
    diameter : float
        nm.
    height : float
        Of the dipole over the surface, nm.
    wavelength : float
        In vacuum, nm.
    eps : complex
        Absolute permittivity of the sphere.
    n_host : float

    Returns
    -------
    radial, tangential : Rates

    Examples
    --------
    >>> radial, tangential = dipole_near_sphere(40, 1e4, 600, -9.4 + 1.4j, 1.33)
    >>> round(radial.total, 6), round(tangential.radiative, 4)
    (1.0, 1.0)
    """
    index = relative_index(eps, n_host)
    k = 2 * np.pi * n_host / wavelength
    x, y = k * diameter / 2, k * (diameter / 2 + height)
    order = min(600, max(default_order(y), int(20 / np.log(y / x)) + 2))
    outer, inner, there = riccati(order, x), riccati(order, index * x), riccati(order, y)
    a = reduced_coefficients(outer, inner.d_psi / index)[1:]
    b = reduced_coefficients(outer, inner.d_psi * index)[1:]
    n = np.arange(1, order + 1)
    xi, slope = there.small_xi[1:], there.small_xi_prime[1:]
    # a_n xi_n(y)^2 with all the large and small factors taken together
    back = x * (x / y) ** (2 * n) / (2 * n + 1)
    ladder = n * (n + 1) * (2 * n + 1)
    total_radial = 1 - 1.5 * np.sum(ladder * (back * a * xi**2).real) / y**4
    both = back * (a * slope**2 + b * xi**2)
    total_across = 1 - 0.75 * np.sum((2 * n + 1) * both.real) / y**2
    # psi_n(y) - a_n xi_n(y), over the small-argument form of psi_n(y)
    ratio = (x / y) ** (2 * n + 1)
    electric = there.small_psi[1:] - ratio * a * xi
    electric_slope = there.small_psi_prime[1:] - ratio * a * slope
    magnetic = there.small_psi[1:] - ratio * b * xi
    form = np.exp(small_argument_ratio(order, y))[1:]
    out_radial = 1.5 * np.sum(ladder * np.abs(form * electric) ** 2) / y**4
    out_across = np.sum(
        (2 * n + 1) * (np.abs(form * magnetic) ** 2 + np.abs(form * electric_slope) ** 2)
    )
    return (
        Rates(float(total_radial), float(out_radial)),
        Rates(float(total_across), float(0.75 * out_across / y**2)),
    )
