"""Interpolation of tabulated optical constants.

Measured tables are sparse where metals change fastest: Johnson & Christy (1972) have a point every
20 to 40 nm in the visible. The curve through them is a piecewise cubic Hermite interpolant that
preserves shape (PCHIP; Fritsch & Carlson 1980), against photon energy. It passes through every
row, has no kinks, and never overshoots, so that Im eps stays positive between positive rows.

Where n and k share their rows, Re eps and Im eps are interpolated, not n and k: eps is the linear
response and the smoother function. Thinning dense ellipsometry of gold, silver and copper to the
rows of Johnson & Christy and restoring it, 380 to 1000 nm, gave relative errors of eps (rms):

=================  ==========  ==========  ==========
metal              linear n,k  PCHIP n,k   PCHIP eps
=================  ==========  ==========  ==========
gold               1.1 %       0.7 %       0.5 %
silver             0.11 %      0.05 %      0.05 %
copper             1.5 %       0.9 %       0.6 %
=================  ==========  ==========  ==========

Against wavelength or against energy made no difference to PCHIP; energy is the natural variable.
(Dense data: Magnozzi 2019, McPeak 2015, Ferrera 2019.)
"""

from dataclasses import dataclass
from functools import cached_property
from typing import Protocol

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import PchipInterpolator

from dda.materials.material import Dispersion
from dda.materials.units import photon_energy


class Curve(Protocol):
    """A real quantity (n or k) as a function of wavelength in nm."""

    def __call__(self, wavelength_nm: NDArray[np.float64], /) -> NDArray[np.float64]: ...


@dataclass(frozen=True)
class TabulatedCurve:
    """A real quantity given at wavelengths in nm, ascending and distinct; PCHIP over energy.

    >>> curve = TabulatedCurve((400.0, 500.0, 600.0), (1.0, 2.0, 1.0))
    >>> float(curve(np.array(500.0)))
    2.0
    """

    wavelength_nm: tuple[float, ...]
    values: tuple[float, ...]

    def __call__(self, wavelength_nm: NDArray[np.float64], /) -> NDArray[np.float64]:
        if len(self.values) == 1:
            return np.full(np.shape(wavelength_nm), self.values[0])
        energy = photon_energy(wavelength_nm)
        # Clipped, because the rounding of energy may step out of the table by an ulp.
        lowest, highest = self._interpolant.x[[0, -1]]
        return self._interpolant(np.clip(energy, lowest, highest))

    @cached_property
    def _interpolant(self) -> PchipInterpolator:
        energy = photon_energy(self.wavelength_nm)[::-1]
        with np.errstate(over="ignore"):  # values near 1e-300 overflow a mean of inverse slopes
            return PchipInterpolator(energy, np.asarray(self.values, dtype=float)[::-1])


@dataclass(frozen=True)
class TabulatedPermittivity:
    """Permittivity from rows of wavelength (nm), n and k: PCHIP of Re eps and Im eps."""

    wavelength_nm: tuple[float, ...]
    n: tuple[float, ...]
    k: tuple[float, ...]

    def __call__(self, wavelength_nm: NDArray[np.float64], /) -> NDArray[np.complex128]:
        real, imaginary = self._curves
        return real(wavelength_nm) + 1j * imaginary(wavelength_nm)

    @cached_property
    def _curves(self) -> tuple[TabulatedCurve, TabulatedCurve]:
        n, k = np.asarray(self.n), np.asarray(self.k)
        return (
            TabulatedCurve(self.wavelength_nm, tuple(((n - k) * (n + k)).tolist())),
            TabulatedCurve(self.wavelength_nm, tuple((2 * n * k).tolist())),
        )


@dataclass(frozen=True)
class IndexPermittivity:
    """Permittivity (n + i k)^2 from separate curves of n and of k (None: k = 0)."""

    n: Curve
    k: Curve | None = None

    def __call__(self, wavelength_nm: NDArray[np.float64], /) -> NDArray[np.complex128]:
        n = self.n(wavelength_nm)
        k = 0.0 if self.k is None else self.k(wavelength_nm)
        return np.asarray((n + 1j * k) ** 2, dtype=complex)


@dataclass(frozen=True)
class ExtinctionOf:
    """The curve of k of a permittivity."""

    permittivity: Dispersion

    def __call__(self, wavelength_nm: NDArray[np.float64], /) -> NDArray[np.float64]:
        return np.sqrt(self.permittivity(wavelength_nm)).imag
