"""Rules for averages over directions, and the orientation average by solving for each direction.

The second, independent way to an orientation average: nothing here knows of multipoles.
"""

from __future__ import annotations

import itertools
from functools import lru_cache

import numpy as np

from ..errors import InputError
from ..lattice.linear_system import System
from .averages import LEAST_ABSORPTION, OrientationAverage
from .one_direction import OneDirection, one_direction, radiation_pressure
from .symmetry import find_sectors
from .vector_waves import real_harmonics

# Degrees of the rules taken one after the other. The first four Lebedev rules (6, 14, 26 and 50
# points) hold the points of those before them, so that refining costs only the new ones.
LEBEDEV_DEGREES = (3, 5, 7, 11, 17, 23, 29, 35, 41)
DESIGN_DEGREES = (3, 7, 9, 11, 13, 15)


def lebedev(degree: int) -> tuple[np.ndarray, np.ndarray]:
    """Lebedev's rule of a degree.

    Returns
    -------
    directions : ndarray, shape (d, 3)
    weights : ndarray, shape (d,)
        They sum to one.

    References
    ----------
    Lebedev, V. I., Laikov, D. N. (1999), Dokl. Math. 59, 477.

    Examples
    --------
    >>> len(lebedev(7)[1])
    26
    """
    from scipy.integrate import lebedev_rule

    points, weights = lebedev_rule(degree)
    return np.ascontiguousarray(points.T), weights / weights.sum()


@lru_cache(maxsize=8)
def spherical_design(degree: int) -> np.ndarray:
    """Directions whose plain mean integrates spherical harmonics up to a degree exactly.

    Parameters
    ----------
    degree : int
        Up to 15.

    Returns
    -------
    ndarray, shape (d, 3)

    Notes
    -----
    The octahedron (degree 3), or a few points turned by the 24 rotations of the cube, placed so
    that the sums of all harmonics vanish (McLaren 1963, Math. Comput. 17, 361; Hardin & Sloane
    1996, Discrete Comput. Geom. 15, 429). Few harmonics are invariant under these rotations, so
    that few points do.

    Examples
    --------
    >>> len(spherical_design(7))
    24
    """
    from scipy.optimize import least_squares

    if not 1 <= degree <= DESIGN_DEGREES[-1]:
        raise InputError(f"spherical designs go up to degree {DESIGN_DEGREES[-1]}, not {degree}")
    if degree <= 3:
        return np.concatenate([np.eye(3), -np.eye(3)])
    rotations = _cube_rotations()

    def points(x: np.ndarray) -> np.ndarray:
        seeds = x.reshape(-1, 3)
        seeds = seeds / np.linalg.norm(seeds, axis=1, keepdims=True)
        return (rotations @ seeds.T).transpose(0, 2, 1).reshape(-1, 3)

    def sums(x: np.ndarray) -> np.ndarray:
        return real_harmonics(degree, points(x)).mean(axis=0)[1:]

    random = np.random.default_rng(0)
    for count in itertools.count(1):
        for _ in range(20):
            found = least_squares(sums, random.normal(size=3 * count), xtol=1e-15, gtol=1e-15)
            if abs(found.fun).max() < 1e-13:
                return points(found.x)
    raise AssertionError  # pragma: no cover


def _cube_rotations() -> np.ndarray:
    out = []
    for order in itertools.permutations(range(3)):
        for signs in itertools.product((1.0, -1.0), repeat=3):
            g = np.zeros((3, 3))
            g[range(3), order] = signs
            if np.linalg.det(g) > 0:
                out.append(g)
    return np.array(out)


def quadrature_average(
    system: System,
    *,
    rule: str = "lebedev",
    tolerance: float = 1e-3,
    degree: int | None = None,
    solver_tolerance: float | None = None,
    symmetry: bool = True,
    limit: int = 3000,
    monitor=None,
) -> OrientationAverage:
    """Orientation average by light from many directions, with two polarizations each.

    Parameters
    ----------
    system : System
    rule : {"lebedev", "design"}
    tolerance : float
        Rules are refined until the averages of C_ext and C_abs change by less, relatively.
    degree : int, optional
        Stop at the rule of at least this degree instead.
    solver_tolerance : float, optional
        Largest solver error allowed for each direction, relative; half of `tolerance` by default.
    symmetry : bool
        Whether directions that a symmetry of the cells turns into each other are solved once.
    limit : int
        Most iterations of a solve.
    monitor : callable, optional
        ``monitor(directions solved)`` after each.

    Returns
    -------
    OrientationAverage
        Its errors are the changes from the last rule but one and the solver's mean error.

    Raises
    ------
    InputError
        If the rule is unknown.

    Examples
    --------
    >>> import dda, shapes
    >>> cells = shapes.voxelize(shapes.sphere(diameter=30, material="gold"), cells=8)
    >>> average = quadrature_average(dda.system(cells, wavelength=530))
    >>> 1400 < average.c_ext < 1500
    True
    """
    if rule not in ("lebedev", "design"):
        raise InputError(f'rule {rule!r} is not known; use "lebedev" or "design"')
    solved = _Directions(system, solver_tolerance or tolerance / 2, symmetry, limit, monitor)
    before = None
    degrees = LEBEDEV_DEGREES if rule == "lebedev" else DESIGN_DEGREES
    for step in degrees:
        if rule == "lebedev":
            directions, weights = lebedev(step)
        else:
            directions = spherical_design(step)
            weights = np.full(len(directions), 1 / len(directions))
        values = weights @ np.array([solved.response(a) for a in directions])
        if before is not None:
            change = abs(values - before)
            absorbed = max(values[1], LEAST_ABSORPTION * values[0])
            small = change[0] < tolerance * values[0] and change[1] < tolerance * absorbed
            if step >= degree if degree is not None else small:
                break
        before = values
    error = np.hypot(change[[0, 1, 3]], values[6:])
    return OrientationAverage(
        c_ext=float(values[0]),
        c_abs=float(values[1]),
        c_sca=float(values[0] - values[1]),
        asymmetry=float(values[2] / values[3]),
        cd_ext=float(values[4]),
        cd_abs=float(values[5]),
        c_ext_error=float(error[0]),
        c_abs_error=float(error[1]),
        c_sca_error=float(error[2]),
        area=float(np.pi * system.r_eff**2),
        way="quadrature",
        order=len(weights),
        products=solved.products,
        status=solved.status,
    )


class _Directions:
    """Responses by direction, each solved once."""

    def __init__(self, system: System, tolerance: float, symmetry: bool, limit: int, monitor):
        self.system, self.tolerance = system, tolerance
        self.limit, self.monitor = limit, monitor
        self.group = find_sectors(system, symmetry).group
        self.known: dict[tuple, np.ndarray] = {}
        self.products, self.status = 0.0, "converged"
        self.share = 2.0 ** -sum(system.mirrors)  # a product of a mirror sector

    def response(self, direction: np.ndarray) -> np.ndarray:
        """C_ext, C_abs, C_sca <cos> and C_sca unpolarized, C_ext and C_abs left less right, and
        the errors of C_ext, C_abs and C_sca.
        """
        for g in self.group:
            found = self.known.get(_key(g @ direction))
            if found is not None:
                # a mirror image answers to right circular light as the original to left
                sign = np.where(np.isin(np.arange(9), (4, 5)), np.linalg.det(g), 1)
                return sign * found
        both = one_direction(self.system, direction, tolerance=self.tolerance, limit=self.limit)
        self.products += self.share * both.products
        for part in (both.first, both.second):
            if part.status != "converged":
                self.status = part.status
        value = _unpolarized(both)
        self.known[_key(direction)] = value
        if self.monitor is not None:
            self.monitor(len(self.known))
        return value


def _unpolarized(both: OneDirection) -> np.ndarray:
    rows = []
    for polarization in ("left", "right"):
        light = both.polarized(polarization)
        pressure = radiation_pressure(light)
        c_ext = 4 * np.pi * both.k * np.vdot(light.incident, light.p).imag
        along = pressure.c_sca * (pressure.asymmetry @ both.direction)
        rows.append([c_ext, c_ext - pressure.c_sca, along, pressure.c_sca])
    left, right = np.array(rows)
    return np.concatenate([(left + right) / 2, (left - right)[:2], both.error])


def _key(direction: np.ndarray) -> tuple:
    return tuple(np.round(direction, 9) + 0.0)
