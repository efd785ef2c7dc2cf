"""Small ellipsoids: the electrostatic solution (Gans 1912), with or without radiation damping.

Bohren & Huffman (1983), section 5.3.  What is exact: the polarizability is that of electrostatics,
so cross sections are right to relative order (k a)^2 times the sharpness of the resonance.  With
`damping` the polarizability also radiates, which makes extinction equal to absorption plus
scattering exactly, but retardation of order (k a)^2 stays out; use `validation.ebcm` for spheroids
of any size.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.special import elliprd


def ellipsoid(
    axes: Sequence[float],
    wavelength: float,
    eps: complex,
    n_host: float = 1.0,
    damping: bool = False,
) -> Ellipsoid:
    """Solve an ellipsoid much smaller than the wavelength.

    Parameters
    ----------
    axes : three floats
        Full lengths along x, y, z, nm.
    wavelength : float
        In vacuum, nm.
    eps : complex
        Absolute permittivity, Im eps >= 0.
    n_host : float
        Index of the nonabsorbing host.
    damping : bool
        Whether the dipole feels the field it radiates, alpha / (1 - (2/3) i k^3 alpha).

    Examples
    --------
    >>> ball = ellipsoid([4, 4, 4], wavelength=500, eps=-5 + 2j)
    >>> bool(abs(ball.alpha[0] / (8 * (-6 + 2j) / (-3 + 2j)) - 1) < 1e-12)
    True
    """
    relative = complex(eps) / n_host**2
    k = 2 * np.pi * n_host / wavelength
    volume = np.pi / 6 * float(np.prod(axes))
    factors = depolarization(axes)
    alpha = volume / (4 * np.pi) * (relative - 1) / (1 + factors * (relative - 1))
    if damping:
        alpha = alpha / (1 - 2j / 3 * k**3 * alpha)
    return Ellipsoid(tuple(float(a) for a in axes), k, factors, alpha, damping)


def depolarization(axes: Sequence[float]) -> np.ndarray:
    """Depolarization factors of an ellipsoid along x, y, z; (3,), their sum is one.

    L_z = (abc/3) R_D(a^2, b^2, c^2) with Carlson's (1979) symmetric elliptic integral, the same
    integral as Bohren & Huffman (1983), equation 5.31.
    """
    a, b, c = np.asarray(axes, dtype=float) / np.max(axes)
    if min(a, b, c) <= 0:
        raise ValueError("the axes of an ellipsoid must be positive")
    s = [a * a, b * b, c * c]
    third = a * b * c / 3
    return third * np.array(
        [elliprd(s[1], s[2], s[0]), elliprd(s[0], s[2], s[1]), elliprd(s[0], s[1], s[2])]
    )


@dataclass(frozen=True)
class Ellipsoid:
    """A solved small ellipsoid.

    Attributes
    ----------
    axes : tuple of float
        Full lengths along x, y, z, nm.
    k : float
        Wavenumber in the host, 1/nm.
    factors : (3,) ndarray
        Depolarization factors.
    alpha : (3,) complex ndarray
        Polarizability along the axes, nm^3 (p = alpha E).
    damping : bool
        Whether radiation damping is in alpha.
    """

    axes: tuple[float, ...]
    k: float
    factors: np.ndarray
    alpha: np.ndarray
    damping: bool

    def cross_sections(self, polarization: Sequence[complex]) -> tuple[float, float, float]:
        """C_ext, C_abs, C_sca in nm^2 for a plane wave of this polarization (normalised here)."""
        weight = np.abs(np.asarray(polarization, dtype=complex)) ** 2
        return self._cross_sections(weight / weight.sum())

    def orientation_average(self) -> tuple[float, float, float]:
        """C_ext, C_abs, C_sca in nm^2 averaged over all orientations: the mean over the axes."""
        return self._cross_sections(np.full(3, 1 / 3))

    def _cross_sections(self, weight: np.ndarray) -> tuple[float, float, float]:
        scattering = float(8 * np.pi / 3 * self.k**4 * (weight @ np.abs(self.alpha) ** 2))
        loss = float(4 * np.pi * self.k * (weight @ self.alpha.imag))
        # A dipole that feels its own radiation loses by it: then Im alpha is the extinction.
        extinction = loss if self.damping else loss + scattering
        return extinction, extinction - scattering, scattering
