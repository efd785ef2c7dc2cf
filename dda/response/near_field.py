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
from .smeared import Progress, SmearedField
from .two_sided import Places, blur_of, inside_values, outside_values

_BEYOND = 3.0  # spacings; what lies farther from the surface need not be told apart
_AT_ONCE = 20_000  # points whose normals are followed at a time, which bounds the memory


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


def fields_at(
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
    >>> found = fields_at(solved, np.array([[25.0, 0, 0], [0, 0, 0]]))
    >>> found.material.tolist(), bool(found.e2[0] > 5 > found.e2[1])
    ([-1, 0], True)
    """
    points = checked_points(points)
    system, light = polarization.system, polarization.light
    if system.tensors is not None:
        raise InputError("near fields of anisotropic materials are not known to this program yet")
    sampler = sampler or SmearedField(polarization, workers)
    height, material = _sides(system, points, sampler, particle)
    inside, outside = np.flatnonzero(material >= 0), np.flatnonzero(material < 0)
    e, h = np.zeros(points.shape, complex), np.zeros(points.shape, complex)
    trusted = np.zeros(len(points), bool)

    def incident(at: np.ndarray) -> np.ndarray:
        return light.field(at, system.k)  # type: ignore[attr-defined]

    sums = [outside, inside] if magnetic else [outside]
    told = _shares(progress, [len(rows) for rows in sums])
    for rows, tell in zip(sums, told, strict=True):
        e[rows], h[rows] = sampler.scattered(points[rows], magnetic, tell)
    e[outside] += incident(points[outside])
    for rows, of in ((outside, outside_values), (inside, inside_values)):
        for part in np.array_split(rows, 1 + len(rows) // _AT_ONCE):
            eps = np.append(system.permittivity, 1.0)[material[part]]
            place = Places(points[part], height[part] / system.cells.spacing, eps)
            e[part], trusted[part] = of(sampler, incident, place, e[part])
    h_incident = _magnetic(light, points, system.k) if magnetic else None
    return NearField(
        points,
        e,
        incident(points),
        h + h_incident if h_incident is not None else None,
        h_incident,
        material,
        height,
        trusted,
        system.cells.spacing,
    )


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
    system: System, points: np.ndarray, sampler: SmearedField, particle: Particle | None
) -> tuple[np.ndarray, np.ndarray]:
    """Height over the surface in nm and material of every point."""
    d = system.cells.spacing
    fraction = sampler.around(points).fraction
    filled = fraction.sum(axis=1)
    height = d * np.clip(blur_of(system.cells.window_width).height(filled), -_BEYOND, _BEYOND)
    if particle is not None:
        measured = outer_distance(particle, points)
        if measured is not None:
            height = -measured
    material = fraction.argmax(axis=1).astype(np.int16)
    material[(height >= 0) | (filled == 0)] = -1
    return height, material


def _magnetic(light, points: np.ndarray, k: float) -> np.ndarray:
    if not hasattr(light, "magnetic"):
        raise InputError(
            f"the light {type(light).__name__} has no magnetic field; ask for the electric one"
        )
    return light.magnetic(points, k)


def _shares(progress: Progress | None, sizes: list[int]) -> list[Progress | None]:
    """Callbacks for parts of a run of so many points each."""
    if progress is None:
        return [None] * len(sizes)
    total, told = sum(sizes), progress

    def after(first: int) -> Progress:
        return lambda done, _: told(first + done, total)

    return [after(int(first)) for first in np.cumsum([0, *sizes])[:-1]]
