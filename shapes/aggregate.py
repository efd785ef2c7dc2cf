"""Fractal aggregate of equal spheres with a given fractal dimension and prefactor."""

from __future__ import annotations

import numpy as np

from .body import FloatArray, Part, Particle, ShapeError
from .builders import SEED
from .catalogue import Parameter, length, shape
from .combine import Union
from .primitives import Sphere
from .solid import Solid

ANGLES = 24  # places tried around each pair of monomer and circle
RESTARTS = 40


@shape(
    number=Parameter("number of spheres", check=">= 1 and <= 2000", kind="count", example=60),
    diameter=length("diameter of a sphere", example=20.0),
    dimension=Parameter("fractal dimension", check="> 1 and <= 3"),
    prefactor=Parameter("fractal prefactor", check="> 0"),
    gap=length("gap between touching spheres; negative if they overlap", "> -diameter/2"),
    seed=SEED,
)
def aggregate(
    number: int,
    diameter: float,
    dimension: float = 1.8,
    prefactor: float = 1.3,
    gap: float = 0.0,
    seed: int = 0,
    material: str = "gold",
) -> Particle:
    """Fractal aggregate of equal spheres.

    The defaults are typical of clusters that grew by diffusion (values from memory).
    """
    centres = aggregate_centres(number, dimension, prefactor, seed) * (diameter + gap) / 2
    centres = centres - (centres.min(axis=0) + centres.max(axis=0)) / 2
    ball = Sphere(diameter)
    balls: tuple[Solid, ...] = tuple(ball.moved(centre) for centre in centres)
    outline = Union(balls, disjoint=gap >= 0)
    return Particle((Part(outline, material),), "aggregate", gap=gap if gap > 0 else None)


def aggregate_centres(number: int, dimension: float, prefactor: float, seed: int) -> FloatArray:
    """Centres of spheres of radius 1 that obey N = k (R_g/a)^D at every step of their growth.

    Spheres are added one at a time, each touching at least one earlier sphere, at the distance
    from the centre of mass that keeps the scaling law (Filippov, Zurita & Rosner 2000). R_g counts
    the spheres' own extent, sqrt(3/5) of their radius.

    Parameters
    ----------
    number : int
    dimension, prefactor : float
        D and k of the law.
    seed : int

    Returns
    -------
    (number, 3) array
        In sphere radii.

    Raises
    ------
    ShapeError
        If no such aggregate was found.

    Examples
    --------
    >>> centres = aggregate_centres(50, 1.8, 1.3, seed=1)
    >>> spread = centres - centres.mean(axis=0)
    >>> gyration = np.sqrt((spread**2).sum() / 50 + 3 / 5)
    >>> round(float(1.3 * gyration**1.8), 3)
    50.0
    """
    for attempt in range(RESTARTS):
        rng = np.random.default_rng([seed, attempt])
        centres = _grown(number, dimension, prefactor, rng)
        if centres is not None:
            return centres
    raise ShapeError(
        f"no aggregate of {number} spheres with dimension {dimension:g} and prefactor "
        f"{prefactor:g} was found; a dimension near 1.8 with a prefactor near 1.3, or near 2.5 "
        "with 0.7, can be built",
        ("dimension",),
    )


def _grown(
    number: int, dimension: float, prefactor: float, rng: np.random.Generator
) -> FloatArray | None:
    """One attempt, None if it got stuck."""
    axis = rng.standard_normal(3)
    axis /= np.linalg.norm(axis)
    centres = np.zeros((number, 3))
    if number > 1:
        centres[1] = 2 * axis
    for n in range(2, number):
        there = centres[:n]
        middle = there.mean(axis=0)
        spread = float(((there - middle) ** 2).sum())
        wanted = ((n + 1) / prefactor) ** (2 / dimension) - 3 / 5  # of R_g^2 of n + 1 spheres
        square = ((n + 1) * wanted - spread) * (n + 1) / n
        place = _place(there, middle, square, rng)
        if place is None:
            return None
        centres[n] = place
    return centres


def _place(
    there: FloatArray, middle: FloatArray, square: float, rng: np.random.Generator
) -> FloatArray | None:
    """A free place that touches a sphere, at the distance sqrt(square) from the middle.

    The first few spheres cannot always meet the law; the nearest distance that can be is taken,
    and later spheres make up for it.
    """
    away = np.linalg.norm(there - middle, axis=1)
    wanted = np.sqrt(max(square, 0.0))
    if len(there) < 8:
        wanted = float(np.clip(wanted, np.sqrt(3.0) * 0.6, away.max() + 2))
    able = np.nonzero((np.abs(away - wanted) <= 2) & (away + wanted >= 2))[0]
    for k in rng.permutation(able):
        line = there[k] - middle
        if away[k] < 1e-9:
            line, along = rng.standard_normal(3), 0.0
            line /= np.linalg.norm(line)
            if abs(wanted - 2) > 1e-9:
                continue
        else:
            line = line / away[k]
            along = (wanted**2 + away[k] ** 2 - 4) / (2 * away[k])
        radius = np.sqrt(max(wanted**2 - along**2, 0.0))
        side = np.cross(line, rng.standard_normal(3))
        side /= np.linalg.norm(side)
        other = np.cross(line, side)
        turn = rng.uniform(0, 2 * np.pi) + 2 * np.pi * np.arange(ANGLES) / ANGLES
        circle = np.outer(np.cos(turn), side) + np.outer(np.sin(turn), other)
        places = middle + along * line + radius * circle
        nearest = np.linalg.norm(places[:, None] - there[None], axis=2).min(axis=1)
        free = np.nonzero(nearest >= 2 - 1e-9)[0]
        if len(free):
            return np.asarray(places[free[0]])
    return None
