"""Incident fields beyond the plane wave: a focused beam, a point dipole, sums of plane waves."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numba import njit

from .errors import InputError
from .lattice.workers import Workers
from .light import plane_wave, transverse

# The spectrum is cut where the amplitude has fallen to exp(-18) = 1.5e-8.
_CUT = 18.0


@dataclass(frozen=True)
class GaussianBeam:
    """A focused beam, of unit amplitude at its focus.

    A sum of plane waves that travel into one half space, so it obeys Maxwell's equations exactly,
    unlike the paraxial formula. Their amplitudes are ``exp(-(k w sin(theta)/2)^2)`` per transverse
    wave vector, and each carries the polarization turned along with its direction, as behind an
    aplanatic lens.

    Attributes
    ----------
    direction : ndarray, shape (3,)
        Unit vector along the axis.
    polarization : ndarray of complex, shape (3,)
        Unit vector at the focus.
    waist : float
        Radius at which the intensity in the focal plane has fallen to 1/e^2, nm, exact for waists
        well above a wavelength; tighter beams are somewhat wider than this.
    focus : ndarray, shape (3,)
        nm.

    References
    ----------
    Richards, B., Wolf, E. (1959), Proc. R. Soc. A 253, 358.
    Novotny, L., Hecht, B. (2012), Principles of Nano-Optics, chapter 3.
    """

    direction: np.ndarray
    polarization: np.ndarray
    waist: float
    focus: np.ndarray

    def field(self, positions: np.ndarray, k: float) -> np.ndarray:
        """Electric field at `positions` (n, 3) in nm for wave number `k` (1/nm), (n, 3)."""
        directions, amplitudes, _ = self.spectrum(k, self._reach(positions))
        return _sum_waves(positions - self.focus, k * directions, amplitudes)

    def magnetic(self, positions: np.ndarray, k: float) -> np.ndarray:
        """Magnetic field, in units of that of a plane wave of unit amplitude, (n, 3)."""
        directions, amplitudes, _ = self.spectrum(k, self._reach(positions))
        return _sum_waves(positions - self.focus, k * directions, np.cross(directions, amplitudes))

    def linear_parts(self) -> list[tuple[complex, GaussianBeam]]:
        """Linearly polarized beams that add up to this one, with their coefficients."""
        return [
            (factor, replace(self, polarization=part))
            for factor, part in _real_parts(self.polarization)
        ]

    def spectrum(self, k: float, reach: float) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """The plane waves that make up the beam within `reach` nm of the focus.

        Returns
        -------
        directions : ndarray, shape (q, 3)
        amplitudes : ndarray of complex, shape (q, 3)
            Quadrature weights included; their sum is the polarization.
        solid_angles : ndarray, shape (q,)
            That each stands for.
        """
        if k * self.waist < 2:
            raise InputError(
                f"a waist of {self.waist:g} nm is tighter than light of this wavelength can be "
                f"focused: it must be at least {2 / k:.3g} nm (a third of the wavelength in the "
                "host)"
            )
        widest = min(1.0, 2 * np.sqrt(_CUT) / (k * self.waist))
        theta_end = float(np.arcsin(widest))
        rings = 14 + int(np.ceil(0.6 * k * reach * theta_end))
        turn = k * reach * widest
        sides = 12 + int(np.ceil(turn + 6 * turn ** (1 / 3)))
        node, weight = np.polynomial.legendre.leggauss(rings)
        theta = theta_end * (node + 1) / 2
        phi = 2 * np.pi / sides * (np.arange(sides) + 0.5)
        sine, cosine = np.sin(theta), np.cos(theta)
        solid = weight * theta_end / 2 * sine * 2 * np.pi / sides
        weight = solid * np.exp(-((k * self.waist * sine / 2) ** 2)) * cosine
        e1, e2 = transverse(self.direction)
        radial = np.cos(phi)[:, None] * e1 + np.sin(phi)[:, None] * e2
        round_ = np.cross(self.direction, radial)
        directions = sine[:, None, None] * radial + cosine[:, None, None] * self.direction
        meridional = cosine[:, None, None] * radial - sine[:, None, None] * self.direction
        amplitudes = (radial @ self.polarization)[:, None] * meridional
        amplitudes = amplitudes + (round_ @ self.polarization)[:, None] * round_
        amplitudes = (weight[:, None, None] * amplitudes).reshape(-1, 3)
        unit = self.polarization.conj() @ amplitudes.sum(axis=0)
        return directions.reshape(-1, 3), amplitudes / unit, np.repeat(solid, sides)

    def effective_area(self, k: float) -> float:
        """Power of the beam over the intensity at its focus, nm^2; pi w^2/2 for wide beams.

        A particle in the focus takes the part (cross section)/(effective area) of the power.
        """
        _, amplitudes, solid = self.spectrum(k, 0.0)
        # On the sphere of directions the beam is a(s) = amplitude/solid angle, and the power is
        # (2 pi/k)^2 times the integral of |a|^2.
        square = (np.abs(amplitudes) ** 2).sum(axis=1)
        return float((2 * np.pi / k) ** 2 * (square / solid).sum())

    @property
    def s_factor(self) -> float:
        """``sum_j (a_j |e_j|)^2`` of the axis, for the lattice dispersion relation."""
        return float((self.direction**2 * np.abs(self.polarization) ** 2).sum())

    def _reach(self, positions: np.ndarray) -> float:
        if len(positions) == 0:
            return 0.0
        return float(np.linalg.norm(np.asarray(positions) - self.focus, axis=1).max())


def gaussian_beam(
    direction=(0, 0, 1), polarization=(1, 0, 0), *, waist: float, focus=(0, 0, 0)
) -> GaussianBeam:
    """A focused Gaussian beam.

    Parameters
    ----------
    direction, polarization
        As for `dda.plane_wave`, of the beam's axis and at its focus.
    waist : float
        1/e^2 radius of the intensity in the focal plane, nm.
    focus : array_like, shape (3,)
        nm, in the particle's coordinates.

    Raises
    ------
    InputError
        If a vector or the waist makes no sense.

    Examples
    --------
    >>> beam = gaussian_beam(waist=400, focus=(0, 0, 50))
    >>> import numpy as np
    >>> intensity = abs(beam.field(np.array([[0, 0, 50], [0, 400, 50]]), k=0.015)) ** 2
    >>> [round(float(v), 2) for v in intensity.sum(axis=1)]
    [1.0, 0.14]
    """
    wave = plane_wave(direction, polarization)
    if not (np.isfinite(waist) and waist > 0):
        raise InputError(f"waist = {waist} must be a length greater than 0 (nm)")
    return GaussianBeam(wave.direction, wave.polarization, float(waist), _place(focus, "focus"))


@dataclass(frozen=True)
class PointDipole:
    """An oscillating point dipole in the host.

    Attributes
    ----------
    position : ndarray, shape (3,)
        nm.
    moment : ndarray of complex, shape (3,)
        nm^3 in the units of the fields: a dipole p has the field G p.
    """

    position: np.ndarray
    moment: np.ndarray

    def field(self, positions: np.ndarray, k: float) -> np.ndarray:
        """Electric field at `positions` (n, 3) in nm for wave number `k` (1/nm), (n, 3).

        References
        ----------
        Jackson, J. D. (1999), Classical Electrodynamics, equation 9.18.
        """
        r, unit = self._away(positions)
        wave = np.exp(1j * k * r) / r
        near = (1 - 1j * k * r) / r**2
        along = (unit @ self.moment)[:, None] * unit
        return wave[:, None] * (
            k**2 * (self.moment - along) + near[:, None] * (3 * along - self.moment)
        )

    def magnetic(self, positions: np.ndarray, k: float) -> np.ndarray:
        """Magnetic field, in the units of `field`, (n, 3)."""
        r, unit = self._away(positions)
        wave = k**2 * np.exp(1j * k * r) / r * (1 + 1j / (k * r))
        return wave[:, None] * np.cross(unit, self.moment)

    def linear_parts(self) -> list[tuple[complex, PointDipole]]:
        """Dipoles with real moments that add up to this one, with their coefficients."""
        return [(factor, replace(self, moment=part)) for factor, part in _real_parts(self.moment)]

    def _away(self, positions: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        offset = np.asarray(positions, float) - self.position
        r = np.linalg.norm(offset, axis=1)
        if np.any(r < 1e-6):
            raise InputError(
                f"the field of a point dipole is infinite where it sits, at "
                f"{self.position.tolist()} nm; move the dipole or leave the point out"
            )
        return r, offset / r[:, None]


def point_dipole(position, moment=(0, 0, 1)) -> PointDipole:
    """A point dipole as the source of light.

    Parameters
    ----------
    position : array_like, shape (3,)
        nm, in the particle's coordinates, outside the particle.
    moment : array_like of complex, shape (3,)
        nm^3; its size sets that of all fields.

    Examples
    --------
    >>> import numpy as np
    >>> dipole = point_dipole((0, 0, 0), (0, 0, 1))
    >>> round(float(dipole.field(np.array([[0, 0, 2.0]]), k=1e-6)[0, 2].real), 6)
    0.25
    """
    p = np.asarray(moment, complex)
    if p.shape != (3,) or not np.isfinite(p).all() or not p.any():
        raise InputError(f"moment must be three finite numbers, not all zero; got {moment}")
    return PointDipole(_place(position, "position"), p)


@dataclass(frozen=True, eq=False)
class PlaneWaves:
    """A sum of plane waves, ``sum_q v_q exp(i k a_q.(r - c))``.

    Attributes
    ----------
    directions : ndarray, shape (q, 3)
        Unit vectors a.
    amplitudes : ndarray of complex, shape (q, 3)
        v, each perpendicular to its direction.
    centre : ndarray, shape (3,)
        c, nm.
    """

    directions: np.ndarray
    amplitudes: np.ndarray
    centre: np.ndarray

    def field(self, positions: np.ndarray, k: float) -> np.ndarray:
        """Electric field at `positions` (n, 3) in nm for wave number `k` (1/nm), (n, 3)."""
        return _sum_waves(positions - self.centre, k * self.directions, self.amplitudes)

    def magnetic(self, positions: np.ndarray, k: float) -> np.ndarray:
        """Magnetic field, in units of that of a plane wave of unit amplitude, (n, 3)."""
        turned = np.cross(self.directions, self.amplitudes)
        return _sum_waves(positions - self.centre, k * self.directions, turned)


def _real_parts(vector: np.ndarray) -> list[tuple[complex, np.ndarray]]:
    """Real unit vectors and the coefficients with which they add up to a complex vector.

    Solvers for complex symmetric systems may break down on light that turns.
    """
    parts = []
    for factor, part in ((1.0, vector.real), (1j, vector.imag)):
        length = float(np.linalg.norm(part))
        if length > 1e-12 * float(np.linalg.norm(vector)):
            parts.append((complex(factor * length), part.astype(complex) / length))
    return parts


def _place(value, what: str) -> np.ndarray:
    place = np.asarray(value, float)
    if place.shape != (3,) or not np.isfinite(place).all():
        raise InputError(f"{what} must be three finite lengths x, y, z in nm; got {value}")
    return place


def _sum_waves(positions: np.ndarray, vectors: np.ndarray, amplitudes: np.ndarray) -> np.ndarray:
    positions = np.ascontiguousarray(positions, float)
    out = np.empty((len(positions), 3), np.complex128)
    amplitudes = np.ascontiguousarray(amplitudes, np.complex128)
    workers = Workers()
    workers.run(
        lambda a, b: _add_waves(positions, vectors, amplitudes, out, a, b),
        workers.split(len(positions), grain=64),
    )
    return out


@njit(nogil=True, cache=True, fastmath=True)
def _add_waves(positions, vectors, amplitudes, out, start, stop):  # pragma: no cover - compiled
    for t in range(start, stop):
        ex = ey = ez = 0j
        for q in range(len(vectors)):
            phase = (
                positions[t, 0] * vectors[q, 0]
                + positions[t, 1] * vectors[q, 1]
                + positions[t, 2] * vectors[q, 2]
            )
            wave = complex(np.cos(phase), np.sin(phase))
            ex += wave * amplitudes[q, 0]
            ey += wave * amplitudes[q, 1]
            ez += wave * amplitudes[q, 2]
        out[t, 0] = ex
        out[t, 1] = ey
        out[t, 2] = ez
