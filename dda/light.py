"""Incident fields."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .errors import InputError


@dataclass(frozen=True)
class PlaneWave:
    """A plane wave of unit amplitude, ``e exp(i k a.r)``.

    Attributes
    ----------
    direction : ndarray, shape (3,)
        Unit vector a.
    polarization : ndarray of complex, shape (3,)
        Unit vector e, perpendicular to a.
    """

    direction: np.ndarray
    polarization: np.ndarray

    def field(self, positions: np.ndarray, k: float) -> np.ndarray:
        """Electric field at `positions` (n, 3) in nm, in units of the amplitude, shape (n, 3)."""
        return np.exp(1j * k * (positions @ self.direction))[:, None] * self.polarization

    def magnetic(self, positions: np.ndarray, k: float) -> np.ndarray:
        """Magnetic field at `positions` in units of its own amplitude, shape (n, 3)."""
        turned = np.cross(self.direction, self.polarization)
        return np.exp(1j * k * (positions @ self.direction))[:, None] * turned

    def linear_parts(self) -> list[tuple[complex, PlaneWave]]:
        """Linearly polarized waves that add up to this one, with their coefficients.

        Methods for complex symmetric systems break down on right-hand sides with ``b.b = 0``,
        which circular light has exactly.
        """
        turn = complex(np.exp(1j * np.angle(_largest(self.polarization))))
        turned = self.polarization / turn
        real, imaginary = turned.real, turned.imag
        if np.linalg.norm(imaginary) < 1e-12:
            return [(turn, PlaneWave(self.direction, real.astype(complex)))]
        return [
            (
                complex(turn * factor * np.linalg.norm(part)),
                PlaneWave(self.direction, _unit(part + 0j, "polarization")),
            )
            for factor, part in ((1, real), (1j, imaginary))
        ]

    @property
    def s_factor(self) -> float:
        """``sum_j (a_j |e_j|)^2``, needed by the lattice dispersion relation."""
        return float((self.direction**2 * np.abs(self.polarization) ** 2).sum())


def plane_wave(direction=(0, 0, 1), polarization=(1, 0, 0)) -> PlaneWave:
    """A plane wave from a direction and a polarization.

    Parameters
    ----------
    direction : array_like, shape (3,)
        Direction of travel; need not be normalized.
    polarization : array_like of complex, shape (3,), or {"left", "right"}
        Need not be normalized; must be perpendicular to the direction. "left" and "right" are
        circular as seen by an observer looking towards the source (the optics convention): at a
        fixed place the field of "left" turns counter-clockwise.

    Returns
    -------
    PlaneWave

    Raises
    ------
    InputError
        If a vector is zero or not finite, or the polarization has a part along the direction.

    Examples
    --------
    >>> plane_wave((0, 0, 2), (1, 0, 0)).direction
    array([0., 0., 1.])
    """
    a = _unit(np.asarray(direction, float), "direction")
    if isinstance(polarization, str):
        if polarization not in ("left", "right"):
            raise InputError(
                f'polarization "{polarization}" is not known; use a vector, "left" or "right"'
            )
        e1, e2 = transverse(a)
        sign = 1 if polarization == "left" else -1
        return PlaneWave(a, (e1 + sign * 1j * e2) / np.sqrt(2))
    e = _unit(np.asarray(polarization, complex), "polarization")
    along = abs(e @ a)
    if along > 1e-6:
        raise InputError(
            f"polarization {_show(polarization)} is not perpendicular to the direction "
            f"{_show(direction)} (its part along it is {along:.3g} of its length)"
        )
    return PlaneWave(a, e)


def transverse(direction: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Two unit vectors that form a right-handed triad (e1, e2, direction).

    For light along z they are x and y.
    """
    a = np.asarray(direction, float) / np.linalg.norm(direction)
    helper = np.array([0.0, 1.0, 0.0]) if abs(a[1]) < 0.9 else np.array([1.0, 0.0, 0.0])
    e1 = np.cross(helper, a)
    e1 /= np.linalg.norm(e1)
    return e1, np.cross(a, e1)


def _largest(v: np.ndarray) -> complex:
    return v[np.argmax(np.abs(v))]


def _unit(v: np.ndarray, what: str) -> np.ndarray:
    length = np.linalg.norm(v)
    if v.shape != (3,) or not np.isfinite(length) or length == 0:
        raise InputError(f"{what} must be three finite numbers, not all zero; got {_show(v)}")
    return v / length


def _show(v) -> str:
    return str(v.tolist()) if isinstance(v, np.ndarray) else str(list(v))
