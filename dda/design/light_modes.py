"""Few incident fields that stand for plane waves from everywhere.

Seen by a particle smaller than the wavelength, plane waves of all directions are combinations of a
few fields: a uniform one along each axis, its first gradients, and so on. Solving for these and
adding up gives the answer to every direction and polarization.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from ..beams import PlaneWaves
from ..light import transverse

# Splits modes of one strength into those that are even or odd under mirrors, which are solved on
# a part of a symmetric particle.
_SPLIT = 1e-9


@dataclass(frozen=True, eq=False)
class LightModes:
    """Fields that plane waves are made of within a box.

    Attributes
    ----------
    lights : tuple of PlaneWaves
        The modes, strongest first; of unit mean square over the box.
    neglected : float
        Part of the mean square of a plane wave, on the average over directions, that the modes
        leave out.
    strength : tuple of float
        Part of that mean square that each mode holds.
    """

    lights: tuple[PlaneWaves, ...]
    neglected: float
    strength: tuple[float, ...]
    _k: float = field(repr=False)
    _extent: np.ndarray = field(repr=False)

    def coefficients(self, directions: np.ndarray) -> np.ndarray:
        """What plane waves are made of.

        Parameters
        ----------
        directions : ndarray, shape (q, 3)
            Unit vectors.

        Returns
        -------
        ndarray of complex, shape (m, q, 2)
            Coefficients of the modes in the waves of unit amplitude and of the two polarizations
            of `dda.light.transverse`, their phase zero in the middle of the box.
        """
        vectors = polarizations(directions)
        overlap = _overlap(self.lights[0].directions, directions, self._k, self._extent)
        return np.stack(
            [
                np.einsum("wc,wq,qjc->qj", light.amplitudes.conj(), overlap, vectors)
                for light in self.lights
            ]
        )


def light_modes(
    directions: np.ndarray,
    weights: np.ndarray,
    *,
    k: float,
    extent: np.ndarray,
    centre: np.ndarray,
    neglect: float = 1e-6,
) -> LightModes:
    """Find the strongest fields among plane waves.

    Parameters
    ----------
    directions : ndarray, shape (q, 3)
        Unit vectors of a quadrature over the sphere.
    weights : ndarray, shape (q,)
        Of the directions.
    k : float
        Wave number, 1/nm.
    extent, centre : ndarray, shape (3,)
        Edges and middle of the box that holds the particle, nm.
    neglect : float
        Part of the waves' mean square over the box that may be left out.

    Returns
    -------
    LightModes

    Notes
    -----
    Eigenvectors of the waves' scalar products over the box (Karhunen-Loeve), which are products
    of sin(x)/x: the fewest fields for a mean square.

    Examples
    --------
    >>> from dda.response.far_field import sphere_quadrature
    >>> directions, weights = sphere_quadrature(5)
    >>> box = np.array([20.0, 20.0, 60.0])
    >>> modes = light_modes(directions, weights, k=0.0106, extent=box, centre=np.zeros(3))
    >>> len(modes.lights), modes.neglected < 1e-6
    (19, True)
    """
    directions = np.asarray(directions, float)
    share = np.sqrt(np.asarray(weights, float) / np.sum(weights))
    vectors = polarizations(directions)
    overlap = _overlap(directions, directions, k, np.asarray(extent, float))
    scaled = share[:, None, None] * vectors
    size = 2 * len(directions)
    gram = np.einsum("qjc,qr,ric->qjri", scaled, overlap, scaled).reshape(size, size)
    for axis in range(3):
        gram = gram + _SPLIT * 2**axis * _mirror(directions, vectors, axis)
    strength, found = np.linalg.eigh(gram)
    strength, found = strength[::-1], found[:, ::-1]
    left = np.maximum(1 - np.cumsum(strength) / strength.sum(), 0)
    count = min(int(np.argmax(left <= neglect)) + 1, size)
    lights = []
    for value, vector in zip(strength[:count], found.T[:count], strict=True):
        amplitudes = np.einsum("qj,qjc->qc", vector.reshape(-1, 2), scaled) / np.sqrt(value)
        lights.append(PlaneWaves(directions, amplitudes.astype(complex), np.asarray(centre, float)))
    held = tuple(map(float, strength[:count] / strength.sum()))
    return LightModes(tuple(lights), float(left[count - 1]), held, k, np.asarray(extent, float))


def polarizations(directions: np.ndarray) -> np.ndarray:
    """The two polarizations of `dda.light.transverse` for each direction, (q, 2, 3)."""
    return np.array([transverse(direction) for direction in directions])


def _overlap(first: np.ndarray, second: np.ndarray, k: float, extent: np.ndarray) -> np.ndarray:
    """Mean of ``exp(i k (b - a).r)`` over the box around its middle, real, (a, b)."""
    turn = k * (first[:, None] - second[None]) * extent / 2
    return np.sinc(turn / np.pi).prod(axis=2)


def _mirror(directions: np.ndarray, vectors: np.ndarray, axis: int) -> np.ndarray:
    """The mirror across an axis among the waves; zero where it leads to other directions."""
    flip = np.ones(3)
    flip[axis] = -1
    away = np.linalg.norm((directions * flip)[:, None] - directions[None], axis=2)
    to = away.argmin(axis=1)
    size = 2 * len(directions)
    if away.min(axis=1).max() > 1e-9:
        return np.zeros((size, size))
    out = np.zeros((len(directions), 2, len(directions), 2))
    for q, mirrored in enumerate(to):
        out[mirrored, :, q, :] = vectors[mirrored] @ (vectors[q] * flip).T
    return out.reshape(size, size)
