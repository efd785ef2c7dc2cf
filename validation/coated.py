"""Sphere with any number of concentric coats: cross sections, amplitudes, fields.

The coated sphere is due to Aden & Kerker (1951; Bohren & Huffman 1983, chapter 8); for many layers
the recursion from the core outward in logarithmic derivatives (Wu & Wang 1991; Yang 2003) is used,
in which no pair of growing and shrinking functions is ever subtracted.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from validation.mie import Modes, default_order, reduced_coefficients, reduction, relative_index
from validation.mode_fields import mode_fields, plane_wave_fields
from validation.riccati import Riccati, riccati


def coated_sphere(
    diameters: Sequence[float],
    wavelength: float,
    eps: Sequence[complex],
    n_host: float = 1.0,
    order: int | None = None,
) -> CoatedSphere:
    """Solve a layered sphere exactly.

    Parameters
    ----------
    diameters : sequence of float
        Outer diameters of the layers, nm, from the core outward, growing.
    wavelength : float
        In vacuum, nm.
    eps : sequence of complex
        Absolute permittivities of the layers, Im eps >= 0.
    n_host : float
        Index of the nonabsorbing host.
    order : int, optional
        Number of multipoles.

    Examples
    --------
    >>> shell = coated_sphere(diameters=[60, 80], wavelength=600, eps=[2.1, -9 + 1.2j], n_host=1.33)
    >>> shell.c_abs > 0
    True
    """
    if len(diameters) != len(eps) or len(eps) == 0:
        raise ValueError("give as many diameters as permittivities, at least one")
    if np.any(np.diff(np.concatenate([[0.0], np.asarray(diameters, dtype=float)])) <= 0):
        raise ValueError("the diameters must grow from the core outward")
    k = 2 * np.pi * n_host / wavelength
    x = k * diameters[-1] / 2
    order = default_order(x) if order is None else order
    index = [relative_index(e, n_host) for e in eps]
    radii = [d / 2 for d in diameters]

    core = riccati(order, index[0] * k * radii[0])
    # Logarithmic derivative U'/U of the radial function at the outside of each layer, and in each
    # layer the share w of the outgoing function, w = C psi(z1)/xi(z1), z1 at its inner boundary.
    slope = {"a": core.d_psi, "b": core.d_psi}
    shares: list[dict[str, np.ndarray]] = [{kind: np.zeros(order + 1) for kind in "ab"}]
    for layer in range(1, len(eps)):
        inner = riccati(order, index[layer] * k * radii[layer - 1])
        outer = riccati(order, index[layer] * k * radii[layer])
        step = index[layer] / index[layer - 1]
        shift = _ratio_of_ratios(inner, outer)
        here = {}
        for kind, factor in (("a", step), ("b", 1 / step)):
            wanted = factor * slope[kind]
            share = (inner.d_psi - wanted) / (inner.d_xi - wanted)
            here[kind] = share
            slope[kind] = (outer.d_psi - share * shift * outer.d_xi) / (1 - share * shift)
        shares.append(here)

    outside = riccati(order, x)
    a = reduced_coefficients(outside, slope["a"] / index[-1]) * reduction(order, x)
    b = reduced_coefficients(outside, slope["b"] * index[-1]) * reduction(order, x)
    return CoatedSphere(
        diameters[-1],
        wavelength,
        complex(eps[-1]),
        n_host,
        a,
        b,
        tuple(float(d) for d in diameters),
        tuple(complex(e) for e in eps),
        tuple((s["a"], s["b"]) for s in shares),
    )


def _ratio_of_ratios(inner: Riccati, outer: Riccati) -> np.ndarray:
    """[psi(z1)/xi(z1)] / [psi(z2)/xi(z2)] for every order, (N+1,), by recurrence (Yang 2003)."""
    z1, z2 = inner.z, outer.z
    ratio = np.empty(len(inner.d_psi), dtype=complex)
    ratio[0] = np.exp(2j * (z2 - z1)) * np.expm1(2j * z1) / np.expm1(2j * z2)
    for n in range(1, len(ratio)):
        top = (inner.d_xi[n] + n / z1) * (outer.d_psi[n] + n / z2)
        bottom = (inner.d_psi[n] + n / z1) * (outer.d_xi[n] + n / z2)
        ratio[n] = ratio[n - 1] * top / bottom
    return ratio


@dataclass(frozen=True)
class CoatedSphere(Modes):
    """A solved layered sphere: as `Modes`, with fields everywhere.

    Attributes
    ----------
    diameters : tuple of float
        Outer diameters, nm, core first.
    layer_eps : tuple of complex
    shares : tuple of (a, b)
        In each layer the radial function is psi_n(z) - C_n [psi_n(z1)/xi_n(z1)] xi_n(z), z1 at the
        layer's inner boundary; C_n (N+1,) for the electric and the magnetic modes.
    """

    diameters: tuple[float, ...]
    layer_eps: tuple[complex, ...]
    shares: tuple[tuple[np.ndarray, np.ndarray], ...]

    def fields(self, points: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Total E and H for the incident wave E = x exp(ikz), everywhere.

        Parameters
        ----------
        points : (P, 3) ndarray
            nm, the centre at the origin; points on a boundary count as outside of it.

        Returns
        -------
        e, h : (P, 3) complex ndarrays
            In units of the incident amplitudes.
        """
        points = np.atleast_2d(np.asarray(points, dtype=float))
        radius = np.linalg.norm(points, axis=1)
        layer = np.searchsorted(np.array(self.diameters) / 2, radius, side="right")
        e = np.empty(points.shape, dtype=complex)
        h = np.empty(points.shape, dtype=complex)
        for which in np.unique(layer):
            here = layer == which
            e[here], h[here] = self.layer_fields(points[here], int(which))
        return e, h

    def layer_fields(self, points: np.ndarray, layer: int) -> tuple[np.ndarray, np.ndarray]:
        """E and H from the series of one layer (0 the core, len(diameters) the host)."""
        if layer == len(self.diameters):
            incident, scattered = plane_wave_fields(points, self.k), self.scattered_fields(points)
            return incident[0] + scattered[0], incident[1] + scattered[1]
        regular, outgoing = self._amplitudes(layer)
        wavenumber = self.k * relative_index(self.layer_eps[layer], self.n_host)
        return mode_fields(points, wavenumber, self.k, regular, outgoing if layer else None)

    def _amplitudes(
        self, layer: int
    ) -> tuple[tuple[np.ndarray, np.ndarray], tuple[np.ndarray, np.ndarray]]:
        """Amplitudes (u, v) of the regular and the outgoing modes of a layer.

        From the host inward, tangential E is continuous: U/m for the magnetic modes and U'/m for
        the electric ones, U the radial function.
        """
        order = len(self.a) - 1
        host = riccati(order, self.x)
        a_value = (host.psi_prime - self.a * host.xi_prime)[1:]  # m = 1 in the host
        b_value = (host.psi - self.b * host.xi)[1:]
        for at in range(len(self.diameters) - 1, layer - 1, -1):
            index = relative_index(self.layer_eps[at], self.n_host)
            outer = riccati(order, index * self.k * self.diameters[at] / 2)
            weight_a, weight_b = self._outgoing_weights(at, order, index)
            a_here = outer.psi_prime[1:] - weight_a * outer.xi_prime[1:]
            b_here = outer.psi[1:] - weight_b * outer.xi[1:]
            a_scale, b_scale = index * a_value / a_here, index * b_value / b_here
            if at == layer:
                break
            inner = riccati(order, index * self.k * self.diameters[at - 1] / 2)
            a_value = a_scale * (inner.psi_prime[1:] - weight_a * inner.xi_prime[1:]) / index
            b_value = b_scale * (inner.psi[1:] - weight_b * inner.xi[1:]) / index
        pad = np.concatenate
        regular = (pad([[0], b_scale]), pad([[0], -1j * a_scale]))
        outgoing = (pad([[0], -weight_b * b_scale]), pad([[0], 1j * weight_a * a_scale]))
        return regular, outgoing

    def _outgoing_weights(self, layer: int, order: int, index: complex) -> tuple:
        if layer == 0:
            return np.zeros(order), np.zeros(order)
        inner = riccati(order, index * self.k * self.diameters[layer - 1] / 2)
        form = (inner.psi / inner.xi)[1:]
        share_a, share_b = self.shares[layer]
        return share_a[1:] * form, share_b[1:] * form
