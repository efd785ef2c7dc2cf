"""Mie series of a homogeneous sphere: cross sections, amplitudes and fields inside and outside.

Written from Bohren & Huffman, "Absorption and Scattering of Light by Small Particles" (1983),
chapter 4, with the time dependence exp(-i w t), so that absorbing media have Im eps > 0.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from validation.mode_fields import angular, mode_fields, plane_wave_fields
from validation.riccati import Riccati, riccati, small_argument_ratio


def sphere(
    diameter: float,
    wavelength: float,
    eps: complex,
    n_host: float = 1.0,
    order: int | None = None,
) -> Sphere:
    """Solve the sphere exactly.

    Parameters
    ----------
    diameter : float
        nm.
    wavelength : float
        In vacuum, nm.
    eps : complex
        Absolute permittivity of the sphere, Im eps >= 0.
    n_host : float
        Index of the nonabsorbing host.
    order : int, optional
        Number of multipoles; by default enough for fields on the surface in double precision.

    Examples
    --------
    >>> s = sphere(diameter=3 / 3.141592653589793, wavelength=1.0, eps=(1.33 + 1e-8j) ** 2)
    >>> round(s.q_ext, 4)
    1.7534
    """
    index = relative_index(eps, n_host)
    k = 2 * np.pi * n_host / wavelength
    x = k * diameter / 2
    order = default_order(x) if order is None else order
    outer, inner = riccati(order, x), riccati(order, index * x)
    a = reduced_coefficients(outer, inner.d_psi / index) * reduction(order, x)
    b = reduced_coefficients(outer, inner.d_psi * index) * reduction(order, x)
    with np.errstate(all="raise"):
        top, bottom = inner.psi, outer.xi
        slope, rise = inner.psi_prime, outer.xi_prime
        c = 1j * index / (top * rise - index * bottom * slope)
        d = 1j * index / (index * top * rise - bottom * slope)
    a[0] = b[0] = c[0] = d[0] = 0
    return Sphere(diameter, wavelength, complex(eps), n_host, a, b, c, d)


def relative_index(eps: complex, n_host: float) -> complex:
    """Index relative to the host, with Im >= 0."""
    if np.imag(eps) < 0:
        raise ValueError("the permittivity must have Im eps >= 0 (convention exp(-i w t))")
    return complex(np.sqrt(complex(eps))) / n_host


def default_order(x: float) -> int:
    """Multipoles after which the series, on the surface too, is below double rounding.

    The criterion of Wiscombe (1980), x + 4 x^(1/3) + 2, and a margin for near fields.
    """
    return int(x + 4.05 * x ** (1 / 3) + 2) + 14


def reduced_coefficients(outer: Riccati, log_derivative: np.ndarray) -> np.ndarray:
    """Mie coefficients of a body whose inside enters through a logarithmic derivative alone.

    a_n = (L psi_n - psi_n') / (L xi_n - xi_n') at the surface, with L = D_n(mx)/m for the electric
    modes and m D_n(mx) for the magnetic ones (Bohren & Huffman 1983, equations 4.56, 4.57, 4.88),
    divided by its small-argument form x**(2n+1)/((2n+1)!!(2n-1)!!), see `reduction`.

    Parameters
    ----------
    outer : Riccati
        At the real size parameter x, orders 0..N.
    log_derivative : (N+1,) complex ndarray
        L; entry 0 is not used.

    Returns
    -------
    (N+1,) complex ndarray, entry 0 zero.
    """
    x = outer.z
    n = np.arange(1, len(log_derivative))
    pull = log_derivative[1:] + n / x
    psi, xi = outer.small_psi, outer.small_xi
    top = pull * psi[1:] - (2 * n + 1) / x * psi[:-1]
    bottom = pull * xi[1:] - x / (2 * n - 1) * xi[:-1]
    return np.concatenate([[0], top / bottom])


def reduction(order: int, x: float) -> np.ndarray:
    """The form taken out by `reduced_coefficients`, (order+1,); underflows to zero."""
    n = np.arange(order + 1)
    return np.exp(2 * small_argument_ratio(order, x) - np.log(x) + np.log(2.0 * n + 1))


@dataclass(frozen=True)
class Modes:
    """Scattering coefficients of a spherically symmetric body and what follows from them alone.

    Attributes
    ----------
    diameter, wavelength : float
        nm; the wavelength is in vacuum.
    eps : complex
        Permittivity of the sphere (outermost layer).
    n_host : float
    a, b : (N+1,) complex ndarrays
        Electric and magnetic coefficients; entry n is order n, entry 0 is zero.
    """

    diameter: float
    wavelength: float
    eps: complex
    n_host: float
    a: np.ndarray
    b: np.ndarray

    @property
    def k(self) -> float:
        """Wavenumber in the host, 1/nm."""
        return 2 * np.pi * self.n_host / self.wavelength

    @property
    def x(self) -> float:
        """Size parameter k * radius."""
        return self.k * self.diameter / 2

    @property
    def c_ext(self) -> float:
        """Extinction cross section, nm^2 (equation 4.62)."""
        return self._sum(self.a.real + self.b.real)

    @property
    def c_sca(self) -> float:
        """Scattering cross section, nm^2 (equation 4.61)."""
        return self._sum(np.abs(self.a) ** 2 + np.abs(self.b) ** 2)

    @property
    def c_abs(self) -> float:
        """Absorption cross section, nm^2."""
        return self.c_ext - self.c_sca

    @property
    def q_ext(self) -> float:
        """Extinction efficiency."""
        return self.c_ext / self._section

    @property
    def q_sca(self) -> float:
        """Scattering efficiency."""
        return self.c_sca / self._section

    @property
    def q_abs(self) -> float:
        """Absorption efficiency."""
        return self.c_abs / self._section

    @property
    def asymmetry(self) -> float:
        """Mean cosine of the scattering angle (Bohren & Huffman 1983, section 4.5)."""
        a, b = self.a, self.b
        n = np.arange(1, len(a) - 1)
        chain = n * (n + 2) / (n + 1) * (a[1:-1] * a[2:].conj() + b[1:-1] * b[2:].conj()).real
        n = np.arange(1, len(a))
        cross = (2 * n + 1) / (n * (n + 1)) * (a[1:] * b[1:].conj()).real
        return float(4 * np.pi / self.k**2 * (chain.sum() + cross.sum()) / self.c_sca)

    def amplitudes(self, theta: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """S1 and S2 at scattering angles theta (radians), (P,) complex each (equation 4.74)."""
        order = len(self.a) - 1
        pi, tau = angular(order, np.cos(np.atleast_1d(np.asarray(theta, dtype=float))))
        n = np.arange(1, order + 1)
        weight = (2 * n + 1) / (n * (n + 1))
        a, b = weight * self.a[1:], weight * self.b[1:]
        return a @ pi[1:] + b @ tau[1:], a @ tau[1:] + b @ pi[1:]

    def scattered_fields(self, points: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Scattered E and H outside, (P, 3) complex each (equation 4.45)."""
        nothing = np.zeros_like(self.a)
        return mode_fields(
            points, self.k, self.k, (nothing, nothing), outgoing=(-self.b, 1j * self.a)
        )

    @property
    def _section(self) -> float:
        return np.pi * self.diameter**2 / 4

    def _sum(self, values: np.ndarray) -> float:
        n = np.arange(len(values))
        return float(2 * np.pi / self.k**2 * np.sum((2 * n + 1) * values))


@dataclass(frozen=True)
class Sphere(Modes):
    """A solved sphere: as `Modes`, and the coefficients c, d (N+1,) of the field inside."""

    c: np.ndarray
    d: np.ndarray

    def fields(self, points: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Total E and H for the incident wave E = x exp(ikz), inside and outside.

        Parameters
        ----------
        points : (P, 3) ndarray
            nm, the centre at the origin; points on the surface count as outside.

        Returns
        -------
        e, h : (P, 3) complex ndarrays
            In units of the incident amplitudes.
        """
        points = np.atleast_2d(np.asarray(points, dtype=float))
        inside = np.linalg.norm(points, axis=1) < self.diameter / 2
        e = np.empty(points.shape, dtype=complex)
        h = np.empty(points.shape, dtype=complex)
        if np.any(inside):
            e[inside], h[inside] = self.inner_fields(points[inside])
        if not np.all(inside):
            outside = points[~inside]
            incident, scattered = plane_wave_fields(outside, self.k), self.scattered_fields(outside)
            e[~inside] = incident[0] + scattered[0]
            h[~inside] = incident[1] + scattered[1]
        return e, h

    def inner_fields(self, points: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """E and H from the series of the inside (equations 4.40, 4.50), (P, 3) complex each."""
        k1 = self.k * relative_index(self.eps, self.n_host)
        return mode_fields(points, k1, self.k, regular=(self.c, -1j * self.d))
