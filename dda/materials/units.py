"""Photon energy, wavelength and frequency: the same quantity in the units that tables use."""

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import constants

EV_NM: float = constants.h * constants.c / constants.e * 1e9
"""Product of photon energy in eV and vacuum wavelength in nm."""

HBAR_EV_S: float = constants.hbar / constants.e
"""Reduced Planck constant in eV s."""

_RECIPROCAL = {
    "energy_eV": EV_NM,
    "frequency_THz": constants.c * 1e9 / 1e12,
    "wavenumber_cm": 1e7,
}
_DIRECT = {"wavelength_nm": 1.0, "wavelength_um": 1e3}
SPECTRAL_COLUMNS: tuple[str, ...] = (*_DIRECT, *_RECIPROCAL)
"""Column names that state a spectral quantity and its unit; ``wavenumber_cm`` is in 1/cm."""


def photon_energy(wavelength_nm: ArrayLike) -> NDArray[np.float64]:
    """Photon energy in eV of a vacuum wavelength in nm (same shape).

    >>> round(float(photon_energy(500.0)), 4)
    2.4797
    """
    return EV_NM / np.asarray(wavelength_nm, dtype=float)


def to_wavelength(values: ArrayLike, column: str) -> NDArray[np.float64]:
    """Vacuum wavelength in nm of `values` given in the quantity and unit that `column` names.

    >>> round(float(to_wavelength(2.0, "energy_eV")), 2)
    619.92
    """
    values = np.asarray(values, dtype=float)
    if column in _DIRECT:
        return values * _DIRECT[column]
    return _RECIPROCAL[column] / values
