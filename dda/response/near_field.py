"""Electric and magnetic fields in and around a particle."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from shapes import Particle

from ..errors import InputError
from ..lattice.linear_system import System
from ..lattice.solution import Polarization
from ..lattice.workers import Workers
from .outer_distance import outer_distance
from .smeared import Progress, SmearedField, Surroundings
from .two_sided import (
    DEEP,
    INNER_LINE,
    OUTER_LINE,
    REACH,
    SHORT_LINE,
    blur,
    continued,
    flat_along,
    inner_values,
    outer_values,
    outward,
)

#: Outside, fields at least this many spacings from a flat surface are held to their error bars.
TRUSTED_OUTSIDE = 1.0
#: The same inside, and everywhere near edges and narrow gaps.
TRUSTED_INSIDE = 2.0

# A blurred fraction this close to 1 is all one material: the lattice alone makes 0.5 % of ripple.
_TRACE = 0.02
_ROUNDING = 1e-6
_BEYOND = 3.0  # spacings; what lies farther from the surface need not be told apart


@dataclass(frozen=True, eq=False)
class NearField:
    """Fields at points, in units of the incident wave's E and H.

    Attributes
    ----------
    points : ndarray, shape (n, 3)
        nm.
    e, e_incident : ndarray of complex, shape (n, 3)
        Total and incident electric field.
    h, h_incident : ndarray of complex, shape (n, 3), or None
        The same of the magnetic field, where it was asked for.
    material : ndarray of int16, shape (n,)
        Index into the cells' materials; -1 in the host.
    height : ndarray, shape (n,)
        Distance from the particle's surface in nm, positive outside; beyond three spacings only
        a bound (plus or minus three spacings) unless the particle was given.
    trusted : ndarray of bool, shape (n,)
        False within the surface's window, where the error is not known: closer than a spacing
        outside a flat surface, two spacings inside it, near an edge or in a narrow gap.
    spacing : float
        Of the cells, nm.
    """

    points: np.ndarray
    e: np.ndarray = field(repr=False)
    e_incident: np.ndarray = field(repr=False)
    h: np.ndarray | None = field(repr=False)
    h_incident: np.ndarray | None = field(repr=False)
    material: np.ndarray = field(repr=False)
    height: np.ndarray = field(repr=False)
    trusted: np.ndarray = field(repr=False)
    spacing: float

    @property
    def e2(self) -> np.ndarray:
        """``|E|^2`` of the total field, (n,)."""
        return (np.abs(self.e) ** 2).sum(axis=1)

    @property
    def e_scattered(self) -> np.ndarray:
        """Total less incident electric field, (n, 3)."""
        return self.e - self.e_incident

    @property
    def h_scattered(self) -> np.ndarray | None:
        """Total less incident magnetic field, (n, 3), or None."""
        return None if self.h is None or self.h_incident is None else self.h - self.h_incident


def near_field(
    polarization: Polarization,
    points: np.ndarray,
    *,
    particle: Particle | None = None,
    magnetic: bool = False,
    progress: Progress | None = None,
    workers: Workers | None = None,
    sampler: SmearedField | None = None,
) -> NearField:
    """Fields at any points, outside and inside the particle.

    Parameters
    ----------
    polarization : Polarization
        Solved dipoles.
    points : ndarray, shape (n, 3)
        nm, in the coordinates of the cells (those of the particle).
    particle : shapes.Particle, optional
        Tells which side of the surface a point is on; without it the cells do, to a twentieth
        of a spacing on smooth bodies.
    magnetic : bool
        Whether H is wanted too.
    progress : callable, optional
        Called with the number of points done and of all, about once a second.
    workers : Workers, optional
        Threads; those of the system by default.
    sampler : SmearedField, optional
        Of this polarization, to use its mesh again for other points.

    Returns
    -------
    NearField

    Raises
    ------
    InputError
        If the points are not (n, 3) finite numbers, or the light has no magnetic field.

    Notes
    -----
    Outside, the field of smeared dipoles; deep inside, the dipole density over the
    susceptibility; near a surface, see `dda.response.two_sided`. H is the smeared one
    everywhere: it is continuous at the surface.

    Examples
    --------
    >>> import dda, shapes
    >>> import numpy as np
    >>> cells = shapes.voxelize(shapes.sphere(diameter=40, material="gold"), cells=12)
    >>> solved = dda.solve(dda.system(cells, wavelength=530), dda.plane_wave())
    >>> found = near_field(solved, np.array([[25.0, 0, 0], [0, 0, 0]]))
    >>> found.material.tolist(), bool(found.e2[0] > 5 > 1 > found.e2[1])
    ([-1, 0], True)
    """
    points = checked_points(points)
    system, light = polarization.system, polarization.light
    sampler = sampler or SmearedField(polarization, workers)
    window = system.cells.window_width if _windowed(system) else 0.0
    near = sampler.around(points)
    height, material = _sides(system, points, near, particle)
    tasks = _Tasks(progress, len(points))

    def incident(at: np.ndarray) -> np.ndarray:
        return light.field(at, system.k)  # type: ignore[attr-defined]

    filled = near.fraction.sum(axis=1)
    inside = material >= 0
    own = np.where(inside, near.fraction[np.arange(len(points)), material], 1 - filled)
    deep = inside & (own > 1 - _TRACE)
    clear = ~inside & ~(near.structure != 0).any(axis=1)
    wanted = np.ones(len(points), bool) if magnetic else ~deep
    e, h = np.zeros(points.shape, complex), np.zeros(points.shape, complex)
    e[wanted], h[wanted] = sampler.scattered(points[wanted], magnetic, tasks.of(wanted))
    e += incident(points)
    eps = np.append(system.permittivity, 1.0)[material]
    e[deep] = near.density[deep] / (own * (eps - 1))[deep, None]
    trusted = deep | clear
    rows = np.flatnonzero(~deep & ~clear)
    if len(rows):
        e[rows], trusted[rows] = _sharpened(
            sampler, incident, points[rows], e[rows], near, rows, height[rows], material[rows],
            eps[rows], window,
        )  # fmt: skip
    tasks.finish()
    e_incident = incident(points)
    h_incident = None
    if magnetic:
        h_incident = _magnetic(light, points, system.k)
        h += h_incident
    return NearField(
        points, e, e_incident, h if magnetic else None, h_incident, material, height, trusted,
        system.cells.spacing,
    )  # fmt: skip


def checked_points(points: np.ndarray) -> np.ndarray:
    """Points as (n, 3) floats, or InputError."""
    array = np.asarray(points, float)
    if array.ndim == 1 and array.shape == (3,):
        array = array[None]
    if array.ndim != 2 or array.shape[1] != 3:
        raise InputError(f"points must have the shape (n, 3), not {np.shape(points)}")
    bad = np.flatnonzero(~np.isfinite(array).all(axis=1))
    if len(bad):
        raise InputError(f"point {bad[0]} is {array[bad[0]].tolist()}: coordinates must be finite")
    return np.ascontiguousarray(array)


def _sides(
    system: System, points: np.ndarray, near: Surroundings, particle: Particle | None
) -> tuple[np.ndarray, np.ndarray]:
    """Height over the surface in nm and material of every point."""
    d = system.cells.spacing
    filled = near.fraction.sum(axis=1)
    height = d * np.clip(blur(system.cells.window_width).height(filled), -_BEYOND, _BEYOND)
    if particle is not None:
        measured = outer_distance(particle, points)
        if measured is not None:
            height = -measured
    material = near.fraction.argmax(axis=1).astype(np.int16)
    material[height >= 0] = -1
    return height, material


def _sharpened(
    sampler: SmearedField,
    incident,
    points: np.ndarray,
    e: np.ndarray,
    around: Surroundings,
    rows: np.ndarray,
    height: np.ndarray,
    material: np.ndarray,
    eps: np.ndarray,
    window: float,
) -> tuple[np.ndarray, np.ndarray]:
    """E of points whose ball reaches over a surface, and whether to trust it."""
    near = Surroundings(around.density[rows], around.fraction[rows], around.structure[rows])
    d = sampler.system.cells.spacing
    u = height / d
    normal = outward(sampler, points, near)
    e = continued(e, near.density, normal, eps)
    # between two materials inside the particle continuity alone is used
    single = (near.fraction > 0.02).sum(axis=1) <= 1
    if window <= 0:
        return e, np.abs(u) >= TRUSTED_INSIDE - _ROUNDING
    trusted = np.abs(u) >= TRUSTED_INSIDE - _ROUNDING
    foot = points - height[:, None] * normal
    outside = material < 0
    left = single & outside & (u < REACH)
    for line in (OUTER_LINE, SHORT_LINE):
        chosen = np.flatnonzero(left)
        chosen = chosen[flat_along(sampler, foot[chosen], normal[chosen], line, window)]
        if len(chosen):
            e[chosen] = outer_values(
                sampler, incident, foot[chosen], normal[chosen], u[chosen], line, window
            )
            trusted[chosen] = u[chosen] >= TRUSTED_OUTSIDE - _ROUNDING
            left[chosen] = False
    within = np.flatnonzero(single & ~outside)
    filled = near.fraction.sum(axis=1)
    e[within] = near.density[within] / (filled * (eps - 1))[within, None]
    chosen = within[u[within] > -DEEP]
    chosen = chosen[flat_along(sampler, foot[chosen], normal[chosen], INNER_LINE, window)]
    if len(chosen):
        e[chosen] = inner_values(
            sampler, eps[chosen], foot[chosen], normal[chosen], u[chosen], INNER_LINE, window
        )
    return e, trusted


def _windowed(system: System) -> bool:
    """Whether the surface cells hold what the window holds, which the unblurring counts on."""
    occupied = int((system.cells.window.sum(axis=1) > 0.02).sum())
    return system.n == occupied and len(system.alpha_inverse.where) > 0


def _magnetic(light, points: np.ndarray, k: float) -> np.ndarray:
    if not hasattr(light, "magnetic"):
        raise InputError(
            f"the light {type(light).__name__} has no magnetic field; ask for the electric one"
        )
    return light.magnetic(points, k)


class _Tasks:
    """Progress of a run whose last tenth is the sharpening."""

    def __init__(self, told: Progress | None, total: int):
        self._told, self._total = told, total

    def of(self, chosen: np.ndarray) -> Progress | None:
        told = self._told
        if told is None:
            return None
        count = max(1, int(chosen.sum()))
        return lambda done, _: told(int(0.9 * self._total * done / count), self._total)

    def finish(self) -> None:
        if self._told is not None:
            self._told(self._total, self._total)
