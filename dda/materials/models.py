"""Analytic permittivities: constant, Drude and its extensions, Sellmeier, Cauchy.

Energies are photon energies in eV, E = hbar w; the time dependence is exp(-i w t). A model is a
frozen dataclass that maps wavelength in nm to permittivity; `dda.materials.Material` gives it a
name and a range.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from dda.materials.units import photon_energy

_Array = NDArray[np.float64]
_Complex = NDArray[np.complex128]


@dataclass(frozen=True)
class Constant:
    """The same permittivity at every wavelength.

    >>> Constant(2.25 + 0j)(np.array([500.0]))
    array([2.25+0.j])
    """

    eps: complex

    def __call__(self, wavelength_nm: _Array, /) -> _Complex:
        return np.full(np.shape(wavelength_nm), self.eps, dtype=complex)


@dataclass(frozen=True)
class Drude:
    """Free electrons: eps = eps_inf - Ep^2 / (E^2 + i g E).

    Attributes
    ----------
    eps_inf : permittivity far above the plasma energy, from everything but the free electrons.
    plasma_eV : Ep, hbar times the plasma frequency of the free electrons (not screened).
    damping_eV : g, hbar over their relaxation time.

    Examples
    --------
    >>> round(float(Drude(1.0, 9.0, 0.0)(np.array(200.0)).real), 3)
    -1.108
    """

    eps_inf: float
    plasma_eV: float
    damping_eV: float

    def __call__(self, wavelength_nm: _Array, /) -> _Complex:
        return self.eps_inf + _free_electrons(wavelength_nm, self.plasma_eV, self.damping_eV)


@dataclass(frozen=True)
class Oscillator:
    """A Lorentz oscillator: strength E0^2 / (E0^2 - E^2 - i g E).

    `strength` is its share of the static permittivity, `resonance_eV` is E0, `damping_eV` is g.
    """

    strength: float
    resonance_eV: float
    damping_eV: float


@dataclass(frozen=True)
class DrudeLorentz:
    """Drude term plus Lorentz oscillators for the bound electrons; `plasma_eV` may be 0."""

    eps_inf: float
    plasma_eV: float
    damping_eV: float
    oscillators: tuple[Oscillator, ...]

    def __call__(self, wavelength_nm: _Array, /) -> _Complex:
        energy = photon_energy(wavelength_nm)
        eps = self.eps_inf + _free_electrons(wavelength_nm, self.plasma_eV, self.damping_eV)
        for one in self.oscillators:
            square = one.resonance_eV**2
            eps = eps + one.strength * square / (square - energy**2 - 1j * one.damping_eV * energy)
        return eps


@dataclass(frozen=True)
class CriticalPoint:
    """An interband transition with an asymmetric line (Etchegoin, Le Ru & Meyer 2006).

    amplitude E0 { exp(i phi) / (E0 - E - i g) + exp(-i phi) / (E0 + E + i g) }, with `energy_eV`
    E0, `damping_eV` g and `phase_deg` phi in degrees.
    """

    amplitude: float
    energy_eV: float
    damping_eV: float
    phase_deg: float


@dataclass(frozen=True)
class DrudeCriticalPoints:
    """Drude term plus critical points (Etchegoin, Le Ru & Meyer 2006, J. Chem. Phys. 125, 164705).

    The lines are not passive by themselves: outside the range of a fit Im eps may fall below 0,
    which `Material.permittivity` refuses.
    """

    eps_inf: float
    plasma_eV: float
    damping_eV: float
    critical_points: tuple[CriticalPoint, ...]

    def __call__(self, wavelength_nm: _Array, /) -> _Complex:
        energy = photon_energy(wavelength_nm)
        eps = self.eps_inf + _free_electrons(wavelength_nm, self.plasma_eV, self.damping_eV)
        for one in self.critical_points:
            phase = np.exp(1j * np.radians(one.phase_deg))
            complex_energy = energy + 1j * one.damping_eV
            eps = eps + one.amplitude * one.energy_eV * (
                phase / (one.energy_eV - complex_energy)
                + phase.conj() / (one.energy_eV + complex_energy)
            )
        return eps


@dataclass(frozen=True)
class Sellmeier:
    """n^2 = constant + sum_j B_j x^2 / (x^2 - C_j), x the wavelength in micrometres, C_j in um^2.

    >>> silica = Sellmeier((0.6961663, 0.4079426, 0.8974794), (0.00467915, 0.0135121, 97.934))
    >>> float(np.sqrt(silica(np.array(589.3)).real).round(4))
    1.4584
    """

    strengths: tuple[float, ...]
    poles_um2: tuple[float, ...]
    constant: float = 1.0

    def __call__(self, wavelength_nm: _Array, /) -> _Complex:
        square = (np.asarray(wavelength_nm, dtype=float) * 1e-3) ** 2
        n2 = np.full(np.shape(square), self.constant)
        with np.errstate(divide="ignore", invalid="ignore"):  # at a pole; Material refuses it
            for strength, pole in zip(self.strengths, self.poles_um2, strict=True):
                n2 = n2 + strength * square / (square - pole)
        return np.asarray(n2, dtype=complex)


@dataclass(frozen=True)
class Cauchy:
    """n = c_0 + c_1 / x^2 + c_2 / x^4 + ..., x the wavelength in micrometres, c_j in um^(2j).

    >>> float(np.sqrt(Cauchy((1.5, 0.004))(np.array(500.0)).real).round(3))
    1.516
    """

    coefficients: tuple[float, ...]

    def __call__(self, wavelength_nm: _Array, /) -> _Complex:
        inverse_square = (np.asarray(wavelength_nm, dtype=float) * 1e-3) ** -2.0
        n = np.polynomial.polynomial.polyval(inverse_square, self.coefficients)
        return np.asarray(n**2, dtype=complex)


def _free_electrons(wavelength_nm: _Array, plasma_eV: float, damping_eV: float) -> _Complex:
    """The Drude term -Ep^2 / (E^2 + i g E), without eps_inf."""
    energy = photon_energy(wavelength_nm)
    return np.asarray(-(plasma_eV**2) / (energy * (energy + 1j * damping_eV)), dtype=complex)
