"""All that one direction of light shows: dichroism, Mueller matrices, radiation pressure."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from ..lattice.linear_system import System
from ..lattice.solution import Polarization
from ..light import PlaneWave, plane_wave, transverse
from .far_field import quadrature_order, scattering_amplitude, sphere_quadrature
from .mueller import amplitude_matrix, mueller_matrix, scattering_plane
from .sections import CrossSections, cross_sections
from .settled import settle


@dataclass(frozen=True, eq=False)
class OneDirection:
    """The response to light from one direction and of any polarization.

    Attributes
    ----------
    first, second : Polarization
        For light polarized along e1 and e2 = direction x e1.
    error : ndarray, shape (3,)
        Mean of the solver's errors of C_ext, C_abs and C_sca, nm^2.
    """

    first: Polarization
    second: Polarization
    error: np.ndarray

    @property
    def direction(self) -> np.ndarray:
        """Unit vector of the incident light, shape (3,)."""
        return self.first.light.direction  # type: ignore[attr-defined]

    @property
    def k(self) -> float:
        """Wave number in the host, 1/nm."""
        return self.first.system.k

    @property
    def axes(self) -> tuple[np.ndarray, np.ndarray]:
        """e1 and e2, which with the direction form a right-handed triad."""
        return transverse(self.direction)

    @property
    def products(self) -> int:
        """Products with the interaction matrix."""
        return self.first.products + self.second.products

    def polarized(self, polarization) -> Polarization:
        """The dipoles for a polarization, a sum of the two solutions.

        Parameters
        ----------
        polarization : array_like of complex, shape (3,), or {"left", "right"}
            As of `dda.plane_wave`.
        """
        light = plane_wave(self.direction, polarization)
        a, b = (light.polarization @ e for e in self.axes)
        return replace(
            self.first,
            light=light,
            p=a * self.first.p + b * self.second.p,
            incident=a * self.first.incident + b * self.second.incident,
        )

    def cross_sections(self, polarization) -> CrossSections:
        """Cross sections for a polarization."""
        return cross_sections(self.polarized(polarization))

    def dichroism(self, kind: str = "circular", angle: float = 0.0) -> tuple[float, float]:
        """Difference of C_ext and of C_abs between two polarizations, nm^2.

        Parameters
        ----------
        kind : {"circular", "linear"}
            Left less right, or linear along an axis less across it.
        angle : float
            Of that axis from e1 towards e2, degrees.
        """
        e1, e2 = self.axes
        c, s = np.cos(np.deg2rad(angle)), np.sin(np.deg2rad(angle))
        pair = ("left", "right") if kind == "circular" else (c * e1 + s * e2, c * e2 - s * e1)
        one, two = (self.cross_sections(p) for p in pair)
        return one.c_ext - two.c_ext, one.c_abs - two.c_abs

    def outgoing(self, angles, azimuth: float = 0.0) -> np.ndarray:
        """Unit vectors of light scattered by angles in degrees, shape (a, 3)."""
        return scattering_plane(self.direction, *self.axes, np.atleast_1d(angles), azimuth)[0]

    def amplitude_matrices(self, angles, azimuth: float = 0.0) -> np.ndarray:
        """Amplitude matrices [[S2, S3], [S4, S1]] (Bohren & Huffman 1983), shape (a, 2, 2).

        Parameters
        ----------
        angles : array_like, shape (a,)
            Scattering angles, degrees.
        azimuth : float
            Of the scattering plane from e1 towards e2, degrees.
        """
        outgoing, parallel, perpendicular = scattering_plane(
            self.direction, *self.axes, np.atleast_1d(angles), azimuth
        )
        first = scattering_amplitude(self.first, outgoing)
        second = scattering_amplitude(self.second, outgoing)
        return amplitude_matrix(first, second, self.k, parallel, perpendicular, azimuth)

    def mueller_matrices(self, angles, azimuth: float = 0.0) -> np.ndarray:
        """Mueller matrices at scattering angles, shape (a, 4, 4).

        S11 = k^2 dC_sca/dOmega for unpolarized light.
        """
        return mueller_matrix(self.amplitude_matrices(angles, azimuth))

    def forward(self) -> np.ndarray:
        """Amplitude matrix in the forward direction, scattering plane through e1, (2, 2)."""
        return self.amplitude_matrices([0.0])[0]

    def backward(self) -> np.ndarray:
        """Amplitude matrix in the backward direction, scattering plane through e1, (2, 2)."""
        return self.amplitude_matrices([180.0])[0]


def one_direction(
    system: System, direction=(0, 0, 1), *, tolerance: float = 1e-3, limit: int = 3000
) -> OneDirection:
    """Solve for the two polarizations of one direction.

    Parameters
    ----------
    system : System
    direction : array_like, shape (3,)
    tolerance : float
        Largest solver error allowed, relative, on C_ext and on C_abs.
    limit : int
        Most iterations.

    Examples
    --------
    >>> import dda, shapes
    >>> cells = shapes.voxelize(shapes.sphere(diameter=30, material="gold"), cells=8)
    >>> both = one_direction(dda.system(cells, wavelength=530))
    >>> mueller = both.mueller_matrices([0, 90])
    >>> bool(mueller[1, 0, 0] < 0.51 * mueller[0, 0, 0])  # a small sphere
    True
    """
    e1, e2 = transverse(plane_wave(direction, _any_transverse(direction)).direction)
    first, second = (
        settle(system, plane_wave(direction, e), tolerance=tolerance, limit=limit) for e in (e1, e2)
    )
    return OneDirection(first.polarization, second.polarization, (first.error + second.error) / 2)


def from_two(one: Polarization, two: Polarization, error) -> OneDirection:
    """The response to one direction from solutions for two polarizations.

    Parameters
    ----------
    one, two : Polarization
        For plane waves of one direction, their polarizations orthogonal (``conj(e).f = 0``).
    error : ndarray, shape (3,)
        Mean of the solver's errors of C_ext, C_abs and C_sca, nm^2.

    Examples
    --------
    >>> import dda, shapes
    >>> cells = shapes.voxelize(shapes.sphere(diameter=30, material="gold"), cells=8)
    >>> system = dda.system(cells, wavelength=530)
    >>> left = dda.settle(system, dda.plane_wave(polarization="left"))
    >>> right = dda.settle(system, dda.plane_wave(polarization="right"))
    >>> both = from_two(left.polarization, right.polarization, left.error)
    >>> bool(abs(both.dichroism()[0]) < 1e-6 * left.sections.c_ext)
    True
    """
    lights: list[PlaneWave] = [one.light, two.light]  # type: ignore[list-item]
    direction = lights[0].direction

    def linear(e: np.ndarray) -> Polarization:
        a, b = (np.vdot(light.polarization, e) for light in lights)
        return replace(
            one,
            light=PlaneWave(direction, e.astype(complex)),
            p=a * one.p + b * two.p,
            incident=a * one.incident + b * two.incident,
        )

    e1, e2 = transverse(direction)
    return OneDirection(linear(e1), linear(e2), np.asarray(error))


def _any_transverse(direction) -> np.ndarray:
    a = np.asarray(direction, float)
    return np.cross(a, np.eye(3)[np.argmin(abs(a))])


def differential_scattering(polarization: Polarization, directions: np.ndarray) -> np.ndarray:
    """dC_sca/dOmega towards unit vectors (d, 3), nm^2 per steradian, shape (d,)."""
    return np.sum(abs(scattering_amplitude(polarization, directions)) ** 2, axis=1)


@dataclass(frozen=True)
class RadiationPressure:
    """Momentum that a plane wave leaves on the particle.

    Attributes
    ----------
    c_pr : ndarray, shape (3,)
        Force over intensity times the speed of light in the host, nm^2; its part along the light
        is the usual cross section of radiation pressure.
    asymmetry : ndarray, shape (3,)
        Mean unit vector of the scattered light; its part along the light is the mean cosine.
    c_sca : float
        nm^2.
    """

    c_pr: np.ndarray
    asymmetry: np.ndarray
    c_sca: float


def radiation_pressure(polarization: Polarization) -> RadiationPressure:
    """Radiation pressure and asymmetry from extinction and the far field.

    Notes
    -----
    ``C_pr = C_ext a - int n dC_sca`` (Bohren & Huffman 1983, section 4.5, as a vector).

    Examples
    --------
    >>> import dda, shapes
    >>> cells = shapes.voxelize(shapes.sphere(diameter=30, material="gold"), cells=8)
    >>> solved = dda.solve(dda.system(cells, wavelength=530), dda.plane_wave((0, 0, 1)))
    >>> pressure = radiation_pressure(solved)
    >>> bool(pressure.c_pr[2] > 1000 * abs(pressure.c_pr[0]))  # along the light
    True
    """
    system = polarization.system
    light: PlaneWave = polarization.light  # type: ignore[assignment]
    reach = np.linalg.norm(system.positions - system.positions.mean(axis=0), axis=1).max()
    directions, weights = sphere_quadrature(quadrature_order(system.k * float(reach)) + 1)
    shares = weights * differential_scattering(polarization, directions)
    total = float(shares.sum())
    c_ext = 4 * np.pi * system.k * np.vdot(polarization.incident, polarization.p).imag
    return RadiationPressure(
        c_pr=c_ext * light.direction - shares @ directions,
        asymmetry=shares @ directions / total,
        c_sca=total,
    )
