"""Two or more spheres on a line: multiple scattering by vector translation, exact to any order.

The field that excites each sphere is the incident wave plus the waves of all the others, translated
to its centre (Bruning & Lo 1971; Mackowski 1991; Xu 1995).  Spheres on one axis keep every degree m
apart, so that hundreds of multipoles cost little and gaps far below the radius can be solved.  All
amplitudes are scaled by the size of the waves on the spheres: no overflow, no ill-conditioning.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from validation.mie import default_order, reduced_coefficients, relative_index
from validation.riccati import riccati, small_argument_ratio
from validation.translation import axial_translations
from validation.vector_waves import far_field, plane_wave, wave_fields

# The line lies along x, as the gap of a dimer does in the program; inside it is the z axis.
_TO_AXIS = np.array([[0.0, 1, 0], [0, 0, 1], [1, 0, 0]])


def two_spheres(
    diameter: float | tuple[float, float],
    gap: float,
    wavelength: float,
    eps: complex | tuple[complex, complex],
    n_host: float = 1.0,
    direction: Sequence[float] = (0, 0, 1),
    polarization: Sequence[complex] = (1, 0, 0),
    order: int | None = None,
) -> SpheresOnLine:
    """Solve two spheres with a gap along x, the middle of the gap at the origin.

    Parameters
    ----------
    diameter : float or two floats
        nm; the first sphere is at negative x.
    gap : float
        Between the surfaces, nm, positive.
    wavelength, eps, n_host, direction, polarization, order
        As for `spheres_on_line`; eps may be two numbers.

    Examples
    --------
    >>> pair = two_spheres(diameter=40, gap=4, wavelength=600, eps=-9.4 + 1.4j, n_host=1.33)
    >>> pair.balance < 1e-9
    True
    """
    first, second = np.broadcast_to(np.asarray(diameter, dtype=float), 2)
    places = [-(gap + first) / 2, (gap + second) / 2]
    media = [complex(e) for e in np.broadcast_to(np.asarray(eps, dtype=complex), 2)]
    return spheres_on_line(
        places, [first, second], wavelength, media, n_host, direction, polarization, order
    )


def spheres_on_line(
    places: Sequence[float],
    diameters: Sequence[float],
    wavelength: float,
    eps: Sequence[complex],
    n_host: float = 1.0,
    direction: Sequence[float] = (0, 0, 1),
    polarization: Sequence[complex] = (1, 0, 0),
    order: int | None = None,
) -> SpheresOnLine:
    """Solve any number of spheres whose centres lie on the x axis, for one plane wave.

    Parameters
    ----------
    places, diameters : sequences of float
        Centres along x and diameters, nm; the spheres may not touch.
    wavelength : float
        In vacuum, nm.
    eps : sequence of complex
        Absolute permittivities, Im eps >= 0.
    n_host : float
        Index of the nonabsorbing host.
    direction, polarization : (3,) array_like
        Of the plane wave, perpendicular to each other; normalised here.  Its phase is zero at the
        origin.
    order : int, optional
        Number of multipoles of each sphere; without it, raised until nothing changes.
    """
    along = np.asarray(direction, dtype=float) / np.linalg.norm(direction)
    across = np.asarray(polarization, dtype=complex) / np.linalg.norm(polarization)
    if abs(along @ across) > 1e-10:
        raise ValueError("the polarization must be perpendicular to the direction")
    reach = np.abs(np.subtract.outer(places, places))
    touch = np.add.outer(diameters, diameters) / 2
    if np.any((reach <= touch) & ~np.eye(len(places), dtype=bool)):
        raise ValueError("the spheres must not touch or overlap")
    k = 2 * np.pi * n_host / wavelength
    problem = SpheresOnLine(
        k=k,
        order=order or _first_order(k, places, diameters),
        places=np.asarray(places, dtype=float),
        radii=np.asarray(diameters, dtype=float) / 2,
        indices=np.array([relative_index(e, n_host) for e in eps]),
        direction=_TO_AXIS @ along,
        polarization=_TO_AXIS @ across,
        exciting={},
        error=float("nan"),
    )
    solved = _solve(problem)
    while order is None and not solved.error < 1e-10 and solved.order < 120:
        finer = _solve(replace(problem, order=solved.order + max(4, solved.order // 5)))
        change = max(abs(finer.c_ext - solved.c_ext), abs(finer.c_abs - solved.c_abs))
        solved = replace(finer, error=change / finer.c_ext)
    return solved


@dataclass(frozen=True)
class SpheresOnLine:
    """Solved spheres on the x axis.  Inside this class vectors are (y, z, x): the line is "z".

    Attributes
    ----------
    k : float
        Wavenumber in the host, 1/nm.
    order : int
    places, radii : (S,) ndarrays
        nm.
    indices : (S,) complex ndarray
        Indices relative to the host.
    direction, polarization : (3,) ndarrays
    exciting : dict of (S, 2, N+1) complex ndarrays
        By degree m about the line: amplitudes of the regular waves that excite each sphere, about
        its own centre, times x**(n+1)/(2n+1)!!, the size of the wave on the sphere.
    error : float
        Change of the cross sections over C_ext when the order was last raised; nan if it was given.
    """

    k: float
    order: int
    places: np.ndarray
    radii: np.ndarray
    indices: np.ndarray
    direction: np.ndarray
    polarization: np.ndarray
    exciting: dict[int, np.ndarray]
    error: float

    @property
    def c_ext(self) -> float:
        """Extinction cross section by the optical theorem, nm^2."""
        total = 0.0
        for m in self.exciting:
            total -= float(np.sum(self.outgoing(m) * self.incident(m).conj()).real)
        return total / self.k**2

    @property
    def c_abs(self) -> float:
        """Absorption cross section from what flows into each sphere, nm^2."""
        return float(self.absorption().sum())

    @property
    def c_sca(self) -> float:
        """Scattering cross section from the far field, nm^2: independent of the two others."""
        extent = self.k * (np.ptp(self.places) + self.radii.max())
        cosine, weight = np.polynomial.legendre.leggauss(int(2 * default_order(extent) + 40))
        total = sum(
            float(np.sum(weight * np.sum(np.abs(self._far(m, cosine)) ** 2, axis=1)))
            for m in self.exciting
        )
        return 2 * np.pi * total / self.k**2

    @property
    def balance(self) -> float:
        """|C_ext - C_abs - C_sca| / C_ext."""
        return abs(self.c_ext - self.c_abs - self.c_sca) / self.c_ext

    def cross_sections(self) -> tuple[float, float, float]:
        """C_ext, C_abs, C_sca in nm^2."""
        return self.c_ext, self.c_abs, self.c_sca

    def absorption(self) -> np.ndarray:
        """Absorption cross section of each sphere, nm^2, (S,)."""
        result = np.zeros(len(self.radii))
        for s, x in enumerate(self.k * self.radii):
            response = _responses(self.order, x, self.indices[s])[:, 1:]
            n = np.arange(1, self.order + 1)
            # |e|^2 (Re a - |a|^2), with a and e in their scales.
            share = response.real * (2 * n + 1) / x
            share = share - np.abs(response * np.exp(-_log_outgoing(self.order, x))[1:]) ** 2
            for scaled in self.exciting.values():
                result[s] += float(np.sum(np.abs(scaled[s][:, 1:]) ** 2 * share))
        return result / self.k**2

    def incident(self, m: int) -> np.ndarray:
        """Amplitudes of the plane wave about each centre, (S, 2, N+1), not scaled."""
        phase = np.exp(1j * self.k * self.places * self.direction[2])
        return phase[:, None, None] * plane_wave(self.order, m, self.direction, self.polarization)

    def outgoing(self, m: int) -> np.ndarray:
        """Amplitudes of the waves that leave each sphere, about its centre, (S, 2, N+1)."""
        sizes = self.k * self.radii
        scale = np.exp(np.stack([-_log_outgoing(self.order, x) for x in sizes]))
        return self._scaled_outgoing(m) * scale[:, None, :]

    def _scaled_outgoing(self, m: int) -> np.ndarray:
        spheres = zip(self.k * self.radii, self.indices, strict=True)
        return -np.stack([_responses(self.order, x, i) for x, i in spheres]) * self.exciting[m]

    def fields(self, points: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Total E and H, (P, 3) complex each, in units of the incident amplitudes.

        Parameters
        ----------
        points : (P, 3) ndarray
            nm; points on a surface count as outside.
        """
        points = np.atleast_2d(np.asarray(points, dtype=float))
        inside = [
            np.linalg.norm(points - [place, 0, 0], axis=1) < radius
            for place, radius in zip(self.places, self.radii, strict=True)
        ]
        e = np.empty(points.shape, dtype=complex)
        h = np.empty(points.shape, dtype=complex)
        outside = ~np.any(inside, axis=0)
        if np.any(outside):
            e[outside], h[outside] = self.outer_fields(points[outside])
        for s, here in enumerate(inside):
            if np.any(here):
                e[here], h[here] = self.inner_fields(points[here], s)
        return e, h

    def outer_fields(self, points: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Total E and H from the series of the host, (P, 3) complex each."""
        turned = np.asarray(points, dtype=float) @ _TO_AXIS.T
        phase = np.exp(1j * self.k * turned @ self.direction)[:, None]
        e = phase * self.polarization
        h = phase * np.cross(self.direction, self.polarization)
        n = np.arange(self.order + 1)[:, None]
        for s, radius in enumerate(self.radii):
            local = turned - [0, 0, self.places[s]]
            distance = np.linalg.norm(local, axis=1)
            rho = self.k * distance
            functions = riccati(self.order, rho)
            scale = (radius / distance) ** n / rho
            radial, slope = scale * functions.small_xi, scale * functions.small_xi_prime
            for m in self.exciting:
                leaving = self._scaled_outgoing(m)[s]
                field, curl = wave_fields(m, local, radial, slope, rho, leaving)
                e, h = e + field, h + curl / 1j
        return e @ _TO_AXIS, h @ _TO_AXIS

    def inner_fields(self, points: np.ndarray, s: int) -> tuple[np.ndarray, np.ndarray]:
        """E and H from the series inside sphere s, (P, 3) complex each."""
        local = np.asarray(points, dtype=float) @ _TO_AXIS.T - [0, 0, self.places[s]]
        distance = np.linalg.norm(local, axis=1)
        # At the centre the angles mean nothing but the field has a limit: step off by a hair.
        local = np.where((distance < 1e-7 * self.radii[s])[:, None], 1e-7 * self.radii[s], local)
        distance = np.linalg.norm(local, axis=1)
        rho = self.indices[s] * self.k * distance
        functions = riccati(self.order, rho)
        n = np.arange(self.order + 1)[:, None]
        scale = (distance / self.radii[s]) ** (n + 1) / rho
        radial, slope = scale * functions.small_psi, scale * functions.small_psi_prime
        entering = _entering(self.order, self.k * self.radii[s], self.indices[s])
        e = np.zeros(local.shape, dtype=complex)
        h = np.zeros(local.shape, dtype=complex)
        for m, scaled in self.exciting.items():
            field, curl = wave_fields(m, local, radial, slope, rho, entering * scaled[s])
            e, h = e + field, h + self.indices[s] * curl / 1j
        return e @ _TO_AXIS, h @ _TO_AXIS

    def _far(self, m: int, cosine: np.ndarray) -> np.ndarray:
        """Far field of one degree at phi = 0 in the axis' frame, (P, 3)."""
        directions = np.stack([np.sqrt(1 - cosine**2), 0 * cosine, cosine], axis=1)
        total = np.zeros((len(cosine), 3), dtype=complex)
        for place, leaving in zip(self.places, self.outgoing(m), strict=True):
            phase = np.exp(-1j * self.k * place * cosine)
            total += phase[:, None] * far_field(self.order, m, directions, leaving)
        return total


def _first_order(k: float, places: Sequence[float], diameters: Sequence[float]) -> int:
    """Order to begin with: that of the single spheres, or what the narrowest gap asks for.

    In electrostatics the interaction of multipoles falls as exp(-2 eta n), eta the bispherical
    coordinate of the surfaces (Morse & Feshbach 1953); 1e-10 needs n = 11.5/eta.
    """
    single = default_order(k * max(diameters) / 2) - 10
    line = np.argsort(places)
    place, size = np.asarray(places)[line], np.asarray(diameters)[line]
    gap = np.diff(place) - (size[1:] + size[:-1]) / 2
    mean = 2 * size[1:] * size[:-1] / (size[1:] + size[:-1])
    return max(single, min(100, int(11.5 / np.arccosh(1 + gap / mean).min())))


def _solve(problem: SpheresOnLine) -> SpheresOnLine:
    order, k = problem.order, problem.k
    sizes = k * problem.radii
    count = len(sizes)
    response = np.stack(
        [_responses(order, x, i) for x, i in zip(sizes, problem.indices, strict=True)]
    )
    pairs = [(i, j) for i in range(count) for j in range(count) if i != j]
    distances = [
        (k * (problem.places[i] - problem.places[j]), sizes[i], sizes[j]) for i, j in pairs
    ]
    scale = np.exp(np.stack([small_argument_ratio(order, x) for x in sizes]))[:, None, :]
    exciting = {}
    highest = min(order, default_order(max(sizes)) - 8)
    for m, translations in axial_translations(order, highest, distances):
        first = max(1, abs(m))
        size = 2 * (order + 1 - first)
        right = scale * problem.incident(m)
        matrix = np.eye(count * size, dtype=complex)
        for (i, j), shift in zip(pairs, translations, strict=True):
            coupling = shift * response[j]
            coupling = coupling[:, first:, :, first:].reshape(size, size)
            matrix[i * size : (i + 1) * size, j * size : (j + 1) * size] = coupling
        solved = np.linalg.solve(matrix, right[:, :, first:].reshape(-1))
        full = np.zeros((count, 2, order + 1), dtype=complex)
        full[:, :, first:] = solved.reshape(count, 2, -1)
        exciting[m] = full
    return replace(problem, exciting=exciting)


def _responses(order: int, x: float, index: complex) -> np.ndarray:
    """Mie coefficients b_n (row 0, for M) and a_n (row 1, for N) in their scale, (2, N+1)."""
    outer, inner = riccati(order, x), riccati(order, index * x)
    return np.stack(
        [
            reduced_coefficients(outer, index * inner.d_psi),
            reduced_coefficients(outer, inner.d_psi / index),
        ]
    )


def _entering(order: int, x: float, index: complex) -> np.ndarray:
    """From a sphere's scaled exciting amplitudes to those of psi_n(mkr)/form(mx), (2, N+1).

    These are c_n (row 0, for M) and d_n (row 1, for N) in their scales (Bohren & Huffman 1983,
    equations 4.52 and 4.53).
    """
    outer, inner = riccati(order, x), riccati(order, index * x)
    n = np.arange(order + 1)
    value, slope = inner.small_psi, inner.small_psi_prime
    magnetic = value * outer.small_xi_prime - index * outer.small_xi * slope
    electric = index * value * outer.small_xi_prime - outer.small_xi * slope
    return 1j * index * (2 * n + 1) / x / np.stack([magnetic, electric])


def _log_outgoing(order: int, x: float) -> np.ndarray:
    """log of (2n-1)!!/x**n, (N+1,)."""
    n = np.arange(order + 1)
    return np.log(x) - small_argument_ratio(order, x) - np.log(2.0 * n + 1)
