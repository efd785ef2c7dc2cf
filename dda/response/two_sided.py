"""Fields on either side of a surface from fields smeared over it.

Two averages blur what the lattice knows of the field at a surface: the window that mixed the
permittivities and the ball that the dipoles are smeared over. Across a flat piece of surface the
tangential E and the normal D of the blurred field are those of the true one, blurred, because
both are continuous; only their slopes jump. Along a normal the true field is modelled by solutions
of Laplace's equation (a constant, s, s^2 - rho^2/2) on each side, whose blurred values are known,
and their coefficients are fitted to the blurred field at points of the normal. That undoes the
blur. Where the surface is not flat along the normal (edges, corners, a second surface within
reach) the continuity alone is used, and the point is marked.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from .smeared import SMEAR, SmearedField, Surroundings

#: Heights in spacings, outwards, at which the blurred field is read for points outside and inside.
#: A metal's inner field is better known from its dipoles, a cell or more below the surface.
OUTER_LINE = tuple(np.arange(-1, 3.01, 0.5))
SHORT_LINE = tuple(np.arange(-1, 2.01, 0.5))
INNER_LINE = tuple(np.arange(-4, -0.99, 0.5))

#: Farther out than this (spacings) the blur does nothing.
REACH = 2.0
#: Deeper than this the dipole density itself gives the field.
DEEP = 2.0

# Largest deviation of the filled fraction along a normal from that of a plane: spheres of four
# spacings' radius pass, edges and narrow gaps do not.
_FLAT = 0.08


@dataclass(frozen=True)
class Blur:
    """The blur across a plane: its kernel and its mean square sideways, over distance.

    Attributes
    ----------
    x : ndarray, shape (q,)
        Distances in spacings.
    kernel, sideways : ndarray, shape (q,)
        Weight at a distance (sum 1), and weight times mean rho^2 there.
    """

    x: np.ndarray
    kernel: np.ndarray
    sideways: np.ndarray

    def filled(self, height: np.ndarray) -> np.ndarray:
        """Blurred fraction of a half space below zero, at `height` in spacings."""
        return np.interp(height, self.x, 1 - np.cumsum(self.kernel) + self.kernel / 2)

    def height(self, filled: np.ndarray) -> np.ndarray:
        """Height in spacings at which a half space has the blurred fraction `filled`."""
        heights = np.linspace(-3, 3, 1201)
        return np.interp(-np.asarray(filled), -self.filled(heights), heights)


@lru_cache(maxsize=8)
def blur(window: float, smear: float = SMEAR) -> Blur:
    """Blur by a ball window of diameter `window` and the smearing ball of radius `smear`.

    Both in spacings. With ``window = 0`` the smearing alone.
    """
    x = np.linspace(-5, 5, 2001)
    u = np.clip(1 - (x / smear) ** 2, 0, None)
    ball, ball_sideways = u**4 / 4, smear**2 * u**5 / 20
    total = ball.sum()
    ball, ball_sideways = ball / total, ball_sideways / total
    if window <= 0:
        return Blur(x, ball, ball_sideways)
    v = np.clip((window / 2) ** 2 - x**2, 0, None)
    pane, pane_sideways = v / v.sum(), v**2 / 2 / v.sum()
    kernel = np.convolve(pane, ball, "same")
    sideways = np.convolve(pane, ball_sideways, "same") + np.convolve(pane_sideways, ball, "same")
    return Blur(x, kernel, sideways)


# Solutions of Laplace's equation that are even around the normal: value at height s, factor of
# rho^2, on the side(s) where they live.
_SIDES = {"both": lambda s: np.ones_like(s), "out": lambda s: s > 0, "in": lambda s: s < 0}
_MODELS = {
    "outer": (("both", 0), ("out", 1), ("out", 2), ("in", 1)),
    "inner": (("in", 0), ("in", 1)),
}


@lru_cache(maxsize=32)
def unblurring(model: str, line: tuple[float, ...], window: float) -> np.ndarray:
    """Matrix from blurred values on a line to the model's coefficients, (terms, points)."""
    kernel = blur(window)
    heights = np.array(line)[:, None] - kernel.x
    columns = []
    for side, power in _MODELS[model]:
        here = _SIDES[side](heights)
        sideways = -0.5 * here if power == 2 else 0.0 * here
        columns.append((here * heights**power) @ kernel.kernel + sideways @ kernel.sideways)
    return np.linalg.pinv(np.stack(columns, axis=1))


def unblurred(model: str, height: np.ndarray, coefficients: np.ndarray) -> np.ndarray:
    """Values (n, 3) of the model at heights (n,), from coefficients (n, terms, 3)."""
    terms = [
        _SIDES[side](height) * np.power(height, power, dtype=float)
        for side, power in _MODELS[model]
    ]
    return np.einsum("tn,ntc->nc", np.array(terms, float), coefficients)


def axis_of(structure: np.ndarray) -> np.ndarray:
    """Direction of the surface's normal, sign left open, (n, 3); from `Surroundings.structure`."""
    matrices = structure[:, [0, 3, 4, 3, 1, 5, 4, 5, 2]].reshape(-1, 3, 3)
    return np.linalg.eigh(matrices)[1][:, :, 2]


def outward(field: SmearedField, points: np.ndarray, near: Surroundings) -> np.ndarray:
    """Unit normals towards less filled space, (n, 3)."""
    normal = axis_of(near.structure)
    step = 0.5 * field.system.cells.spacing
    above, below = (field.around(points + sign * step * normal) for sign in (1, -1))
    rises = above.fraction.sum(axis=1) > below.fraction.sum(axis=1)
    return np.where(rises[:, None], -normal, normal)


def continued(e: np.ndarray, density: np.ndarray, normal: np.ndarray, eps) -> np.ndarray:
    """E where the permittivity is `eps`, from blurred E and 4 pi P by continuity alone, (n, 3)."""
    normal_e = np.einsum("nc,nc->n", e, normal)
    displacement = normal_e + np.einsum("nc,nc->n", density, normal)
    return e + (displacement / eps - normal_e)[:, None] * normal


def flat_along(
    field: SmearedField,
    foot: np.ndarray,
    normal: np.ndarray,
    line: tuple[float, ...],
    window: float,
) -> np.ndarray:
    """Whether the filling along the normals is that of a plane, (n,) bool."""
    expected = blur(window).filled(np.array(line))
    flat = np.ones(len(foot), bool)
    for height, filled in zip(line, expected, strict=True):
        there = field.around(foot + height * field.system.cells.spacing * normal)
        flat &= np.abs(there.fraction.sum(axis=1) - filled) < _FLAT
    return flat


def outer_values(field, incident, foot, normal, height, line, window) -> np.ndarray:
    """E outside at `height` (spacings) above the foot points, unblurred, (n, 3).

    `incident` is a function of points.
    """
    d = field.system.cells.spacing
    matrix = unblurring("outer", line, window)
    coefficients = np.zeros((len(foot), len(matrix), 3), complex)
    places = (foot[None] + d * np.array(line)[:, None, None] * normal[None]).reshape(-1, 3)
    e = field.scattered(places)[0] + incident(places)
    density = field.around(places).density
    many = np.tile(normal, (len(line), 1))
    values = continued(e, density, many, 1.0).reshape(len(line), -1, 3)
    coefficients = np.einsum("tl,lnc->ntc", matrix, values)
    return unblurred("outer", height, coefficients)


def inner_values(field, eps, foot, normal, height, line, window) -> np.ndarray:
    """E inside at `height` (spacings, negative), from the dipoles below the surface, (n, 3)."""
    d = field.system.cells.spacing
    matrix = unblurring("inner", line, window)
    density = [field.around(foot + d * h * normal).density for h in line]
    coefficients = np.einsum("tl,lnc->ntc", matrix, np.array(density))
    return unblurred("inner", height, coefficients) / (eps - 1)[:, None]
