"""Broadening of a resonance by the surface: electrons of a small metal particle scatter at it.

The free-electron damping grows by hbar A v_F / L_eff with L_eff = 4 V / S (Coronado & Schatz 2003,
J. Chem. Phys. 119, 3926). It matters below about 20 nm. A is of order 1 and is usually fitted.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy import constants

from dda.errors import InputError
from dda.materials.material import Dispersion, Material
from dda.materials.models import Drude
from dda.materials.units import HBAR_EV_S


@dataclass(frozen=True)
class FreeElectrons:
    """What the surface correction needs to know of a metal.

    Attributes
    ----------
    fermi_energy_eV : Fermi energy.
    plasma_eV : hbar times the plasma frequency, with the optical mass.
    damping_eV : hbar over the bulk relaxation time.
    """

    fermi_energy_eV: float
    plasma_eV: float
    damping_eV: float


def fermi_speed(fermi_energy_eV: float) -> float:
    """Fermi speed in m/s, v_F = sqrt(2 E_F / m_e).

    >>> f"{fermi_speed(7.0):.3g}"  # copper
    '1.57e+06'
    """
    return float(np.sqrt(2 * fermi_energy_eV * constants.e / constants.m_e))


def plasma_energy(density: float, optical_mass: float = 1.0) -> float:
    """Plasma energy in eV of `density` free electrons per m^3; `optical_mass` in electron masses.

    w_p^2 = n e^2 / (eps0 m).

    >>> round(plasma_energy(5.90e28), 1)  # gold
    9.0
    """
    frequency = np.sqrt(
        density * constants.e**2 / (constants.epsilon_0 * optical_mass * constants.m_e)
    )
    return float(frequency * HBAR_EV_S)


def effective_length(volume: float, area: float) -> float:
    """Mean chord 4 V / S (nm) of a convex body of `volume` (nm^3) and surface `area` (nm^2).

    >>> round(effective_length(4 / 3 * np.pi * 10.0**3, 4 * np.pi * 10.0**2), 3)  # 4 R / 3
    13.333
    """
    return 4 * volume / area


# Fermi energies and densities: Ashcroft & Mermin 1976 (from memory). Optical masses 0.99, 0.96 and
# 1.49, relaxation times 9.3, 31 and 6.9 fs: Johnson & Christy 1972 (from memory), consistent with
# the tables behind the short names.
FREE_ELECTRONS = {
    "gold": FreeElectrons(5.53, plasma_energy(5.90e28, 0.99), HBAR_EV_S / 9.3e-15),
    "silver": FreeElectrons(5.49, plasma_energy(5.86e28, 0.96), HBAR_EV_S / 31e-15),
    "copper": FreeElectrons(7.00, plasma_energy(8.47e28, 1.49), HBAR_EV_S / 6.9e-15),
}


@dataclass(frozen=True)
class SizeCorrected:
    """`bulk` with its Drude term exchanged for one of damping `damping_eV + added_eV`."""

    bulk: Dispersion
    plasma_eV: float
    damping_eV: float
    added_eV: float

    def __call__(self, wavelength_nm: NDArray[np.float64], /) -> NDArray[np.complex128]:
        small = Drude(0.0, self.plasma_eV, self.damping_eV + self.added_eV)
        large = Drude(0.0, self.plasma_eV, self.damping_eV)
        return self.bulk(wavelength_nm) + small(wavelength_nm) - large(wavelength_nm)


def size_corrected(
    material: Material,
    length_nm: float,
    *,
    A: float = 1.0,
    fermi_energy_eV: float | None = None,
    v_F: float | None = None,
    plasma_eV: float | None = None,
    damping_eV: float | None = None,
) -> Material:
    """A metal as it is in a small particle: free-electron damping larger by hbar A v_F / L.

    Parameters
    ----------
    material : the bulk metal. For "gold", "silver" and "copper" the free-electron data are known
        (`FREE_ELECTRONS`); for others give them.
    length_nm : L_eff = 4 V / S of the particle in nm, see `effective_length`.
    A : strength of the surface scattering, of order 1.
    fermi_energy_eV, v_F : Fermi energy in eV or Fermi speed in m/s, not both.
    plasma_eV, damping_eV : the bulk Drude term, in eV.

    Returns
    -------
    Material
        The bulk permittivity plus the difference of two Drude terms.

    Raises
    ------
    InputError
        A number is missing or out of bounds.

    Examples
    --------
    >>> from dda.materials import find
    >>> small = size_corrected(find("gold"), length_nm=5.0)
    >>> bool(small.permittivity(700.0).imag > find("gold").permittivity(700.0).imag)
    True
    """
    if v_F is not None and fermi_energy_eV is not None:
        raise InputError("size correction: give fermi_energy_eV or v_F, not both")
    known = FREE_ELECTRONS.get(material.name)
    given = {
        "fermi_energy_eV": fermi_energy_eV,
        "plasma_eV": plasma_eV,
        "damping_eV": damping_eV,
    }
    values = {
        key: getattr(known, key) if value is None and known is not None else value
        for key, value in given.items()
    }
    if v_F is not None:
        values.pop("fermi_energy_eV")
    missing = [key for key, value in values.items() if value is None]
    if missing:
        raise InputError(
            f"size correction of '{material.name}': give {', '.join(missing)}; they are known only "
            f"for {', '.join(FREE_ELECTRONS)}"
        )
    bounded = {"length_nm": length_nm, "A": A, "v_F": v_F, **values}
    for key, value in bounded.items():
        if value is not None and not (np.isfinite(value) and value >= 0):
            raise InputError(f"size correction: {key} = {value:g} must be a number of 0 or more")
    if length_nm == 0:
        raise InputError("size correction: length_nm must be positive (4 V / S of the particle)")
    speed = v_F if v_F is not None else fermi_speed(float(values["fermi_energy_eV"] or 0.0))
    added = HBAR_EV_S * A * speed / (length_nm * 1e-9)
    drude = float(values["plasma_eV"] or 0.0), float(values["damping_eV"] or 0.0)
    note = (
        f"surface scattering adds {added * 1e3:.3g} meV to the free-electron damping "
        f"(A = {A:g}, v_F = {speed:.3g} m/s, L = {length_nm:g} nm; Coronado & Schatz 2003)"
    )
    return replace(
        material,
        name=f"{material.name} ({length_nm:g} nm)",
        model=SizeCorrected(material.model, *drude, added),
        notes=(*material.notes, note),
    )
