"""Spheroids of any size: T-matrix by the extended boundary condition (null-field) method.

Waterman (1971).  The waves of `validation.vector_waves` are written into the surface integrals that
express the field of a body by its own tangential fields (Stratton & Chu 1939): outside they give
the scattered wave, a = -T_reg c, and inside they must cancel the incident one, p = T_out c.  For a
body of revolution every degree m stands alone.  The order is raised until the orientation averages
stand still, and the change left is kept as `error`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from validation.mie import default_order, relative_index
from validation.riccati import Riccati, riccati, small_argument_ratio
from validation.vector_waves import angular_parts, plane_wave


def spheroid(
    equatorial: float,
    polar: float,
    wavelength: float,
    eps: complex,
    n_host: float = 1.0,
    order: int | None = None,
    points: int | None = None,
) -> Spheroid:
    """Solve a spheroid with its axis along z.

    Parameters
    ----------
    equatorial, polar : float
        Full lengths across and along the axis, nm.
    wavelength : float
        In vacuum, nm.
    eps : complex
        Absolute permittivity, Im eps >= 0.
    n_host : float
        Index of the nonabsorbing host.
    order : int, optional
        Number of multipoles; without it, raised until nothing changes.
    points : int, optional
        Points of the quadrature over the polar angle.

    Examples
    --------
    >>> s = spheroid(equatorial=40, polar=80, wavelength=600, eps=-9.4 + 1.4j, n_host=1.33)
    >>> s.error < 1e-7
    True
    """
    if order is not None:
        return _solve(equatorial, polar, wavelength, eps, n_host, order, points)
    x = np.pi * n_host * max(equatorial, polar) / wavelength
    best = None
    previous = None
    worse = 0
    for order in range(max(4, default_order(x) - 14), 61, 2):
        current = _solve(equatorial, polar, wavelength, eps, n_host, order, points)
        if previous is not None:
            error = _difference(previous, current)
            if best is None or error < best.error:
                best, worse = replace(current, error=error), 0
            else:
                worse += 1
            # Past its best the method is ruled by rounding, and more orders only do harm.
            if best.error < 1e-10 or worse == 2:
                break
        previous = current
    assert best is not None
    return best


@dataclass(frozen=True)
class Spheroid:
    """A solved body of revolution about z.

    Attributes
    ----------
    k : float
        Wavenumber in the host, 1/nm.
    order : int
    blocks : tuple of (2, N+1, 2, N+1) complex ndarrays
        T-matrix of the degrees m = 0..M: T[m][i, n, j, l] from the regular wave of kind j (0 for M,
        1 for N) and order l to the outgoing wave of kind i and order n.
    error : float
        Relative change of the orientation averages when the order was last raised; nan if the
        order was given.
    """

    k: float
    order: int
    blocks: tuple[np.ndarray, ...]
    error: float

    def block(self, degree: int) -> np.ndarray:
        """T-matrix of one degree of either sign: mixed terms change sign with it."""
        if abs(degree) >= len(self.blocks):
            return np.zeros_like(self.blocks[0])
        block = self.blocks[abs(degree)]
        if degree >= 0:
            return block
        sign = np.array([[1, -1], [-1, 1]])[:, None, :, None]
        return sign * block

    def scattered(self, direction: np.ndarray, polarization: np.ndarray) -> dict[int, np.ndarray]:
        """Outgoing amplitudes (2, N+1) by degree, for a plane wave in the body's frame."""
        return {
            m: np.einsum("injl,jl->in", self.block(m), self._incident(m, direction, polarization))
            for m in self._degrees()
        }

    def cross_sections(
        self, direction: Sequence[float], polarization: Sequence[complex]
    ) -> tuple[float, float, float]:
        """C_ext, C_abs, C_sca in nm^2 for a plane wave in the body's frame (axis z).

        Parameters
        ----------
        direction : (3,) array_like
            Need not be normalised.
        polarization : (3,) complex array_like
            Perpendicular to the direction; need not be normalised.
        """
        along = np.asarray(direction, dtype=float) / np.linalg.norm(direction)
        across = np.asarray(polarization, dtype=complex) / np.linalg.norm(polarization)
        if abs(along @ across) > 1e-10:
            raise ValueError("the polarization must be perpendicular to the direction")
        extinction = scattering = 0.0
        for m, f in self.scattered(along, across).items():
            incident = self._incident(m, along, across)
            extinction -= float(np.sum(f * incident.conj()).real)
            scattering += float(np.sum(np.abs(f) ** 2))
        extinction, scattering = extinction / self.k**2, scattering / self.k**2
        return extinction, extinction - scattering, scattering

    def orientation_average(self) -> tuple[float, float, float]:
        """C_ext, C_abs, C_sca in nm^2 over all orientations (Mishchenko 1991): trace and norm."""
        extinction = scattering = 0.0
        for m in self._degrees():
            block = self.block(m)
            extinction -= float(np.einsum("inin->", block).real)
            scattering += float(np.sum(np.abs(block) ** 2))
        factor = 2 * np.pi / self.k**2
        extinction, scattering = factor * extinction, factor * scattering
        return extinction, extinction - scattering, scattering

    def _degrees(self) -> range:
        return range(1 - len(self.blocks), len(self.blocks))

    def _incident(self, m: int, direction: np.ndarray, polarization: np.ndarray) -> np.ndarray:
        return plane_wave(self.order, m, direction, polarization)


def _difference(first: Spheroid, second: Spheroid) -> float:
    """Largest relative difference of the orientation averages; lossless bodies have no C_abs."""
    one, two = np.array(first.orientation_average()), np.array(second.orientation_average())
    floor = 1e-5 * two[0]
    return float(np.max(np.abs(one - two) / np.maximum(np.abs(two), floor)))


def _solve(
    equatorial: float,
    polar: float,
    wavelength: float,
    eps: complex,
    n_host: float,
    order: int,
    points: int | None,
) -> Spheroid:
    index = relative_index(eps, n_host)
    k = 2 * np.pi * n_host / wavelength
    count = points or 4 * order + 40
    cosine, weight = np.polynomial.legendre.leggauss(count)
    cosine, weight = (cosine - cosine[::-1]) / 2, (weight + weight[::-1]) / 2
    sine = np.sqrt((1 - cosine) * (1 + cosine))
    inverse_a, inverse_c = (2 / equatorial) ** 2, (2 / polar) ** 2
    radius = 1 / np.sqrt(sine**2 * inverse_a + cosine**2 * inverse_c)
    lean = radius**2 * sine * cosine * (inverse_a - inverse_c)  # -(dr/dtheta)/r
    area = 2 * np.pi * weight * radius**2

    outer, inner = riccati(order, k * radius), riccati(order, index * k * radius)
    middle = np.sqrt(radius.min() * radius.max())
    shape = _radial(outer, k * middle, True), _radial(outer, k * middle, False)
    inside = _radial(inner, abs(index) * k * middle, True)
    surface = (cosine, area, lean, index)

    blocks: list[np.ndarray] = []
    for m in range(order + 1):
        block = _degree(m, order, surface, shape, inside)
        block *= _descaling(order, k * middle)
        blocks.append(block)
        strength = [np.abs(b).max() for b in blocks]
        if m > 1 and strength[-1] < 1e-17 * max(strength):
            break
    return Spheroid(k, order, tuple(blocks), float("nan"))


def _radial(functions: Riccati, middle: float, regular: bool) -> tuple[np.ndarray, ...]:
    """z_n, (rho z_n)'/rho, z_n/rho over the surface, scaled to order one at the middle radius."""
    order = len(functions.d_psi) - 1
    n = np.arange(order + 1)[:, None]
    rho = functions.z
    size = np.log(rho / middle)
    if regular:
        scale = np.exp((n + 1) * size) / rho
        value, slope = scale * functions.small_psi, scale * functions.small_psi_prime
    else:
        scale = np.exp(-n * size) / rho
        value, slope = scale * functions.small_xi, scale * functions.small_xi_prime
    return value, slope, value / rho


def _descaling(order: int, x: float) -> np.ndarray:
    """Undo the scales of `_radial`: s_n for the row, divided by t_l for the column."""
    n = np.arange(order + 1)
    regular = small_argument_ratio(order, x)  # log of x^(n+1)/(2n+1)!!
    outgoing = np.log(x) - regular - np.log(2.0 * n + 1)  # log of (2n-1)!!/x^n
    return np.exp(regular[:, None] - outgoing[None, :])[None, :, None, :]


def _degree(
    m: int,
    order: int,
    surface: tuple[np.ndarray, np.ndarray, np.ndarray, complex],
    shape: tuple[tuple[np.ndarray, ...], tuple[np.ndarray, ...]],
    inside: tuple[np.ndarray, ...],
) -> np.ndarray:
    """Scaled T-matrix of one degree, (2, N+1, 2, N+1)."""
    cosine, area, lean, index = surface
    x, z, y = angular_parts(order, m, cosine)
    first = max(1, m)
    size = order + 1 - first
    n = np.arange(first, order + 1)
    even = (n[:, None] + n[None, :]) % 2 == 0  # mirror symmetry: M-M, N-N even, M-N odd

    def waves(radial: tuple[np.ndarray, ...], conjugate: bool) -> list[np.ndarray]:
        value, slope, rim = radial
        angular = (x.conj(), z.conj()) if conjugate else (x, z)
        magnetic = np.concatenate([0 * value[..., None], value[..., None] * angular[0]], axis=-1)
        electric = np.concatenate([(rim * y)[..., None], slope[..., None] * angular[1]], axis=-1)
        return [magnetic[first:], electric[first:]]

    fields = waves(inside, conjugate=False)
    # normal x field times the surface element, normal = (1, lean, 0) in (r, theta, phi)
    crossed = [
        np.stack([lean * f[..., 2], -f[..., 2], f[..., 1] - lean * f[..., 0]], axis=-1)
        * area[:, None]
        for f in fields
    ]

    def matrix(radial: tuple[np.ndarray, ...]) -> np.ndarray:
        tests = waves(radial, conjugate=True)
        result = np.zeros((2, size, 2, size), dtype=complex)
        for i in range(2):
            for j in range(2):
                # n x curl E is index k n x (M and N exchanged); Green's curl exchanges the test.
                near = np.tensordot(tests[i], crossed[1 - j], axes=([1, 2], [1, 2]))
                far = np.tensordot(tests[1 - i], crossed[j], axes=([1, 2], [1, 2]))
                result[i, :, j] = (index * near + far) * (even if i == j else ~even)
        return result.reshape(2 * size, 2 * size)

    regular, outgoing = matrix(shape[0]), matrix(shape[1])
    solved = -np.linalg.solve(outgoing.T, regular.T).T
    block = np.zeros((2, order + 1, 2, order + 1), dtype=complex)
    block[:, first:, :, first:] = solved.reshape(2, size, 2, size)
    return block
