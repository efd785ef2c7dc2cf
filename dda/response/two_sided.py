"""Fields on either side of a surface from fields smeared over it.

Two averages blur what the lattice knows of the field at a surface: the window that mixed the
permittivities and the ball that the dipoles are smeared over. Across a flat piece of surface the
tangential E and the normal D of the blurred field are those of the true one, blurred, because
both are continuous; only their slopes jump. Along a normal the true field is modelled by solutions
of Laplace's equation on each side, whose blurred values are known (`dda.response.blur`), and their
coefficients are fitted to the blurred field at points of the normal. That undoes the blur. Where
the surface is not flat along the normal (edges, corners, a second surface within reach) the
continuity alone is used, and the point is marked.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from ..lattice.linear_system import System
from .blur import blur_of, unblurred, unblurring
from .smeared import SmearedField, Surroundings

#: Outside, fields at least this many spacings from a flat surface are held to their error bars.
TRUSTED_OUTSIDE = 1.0
#: The same inside, and outside near edges and in narrow gaps.
TRUSTED_ELSEWHERE = 2.0

#: Heights in spacings, outwards, at which the blurred field is read for points outside and inside.
#: A metal's inner field is better known from its dipoles, a cell or more below the surface.
OUTER_LINES = (tuple(np.arange(-1, 3.01, 0.5)), tuple(np.arange(-1, 2.01, 0.5)))
INNER_LINE = tuple(np.arange(-5, -0.99, 0.5))

#: From this height on (spacings) continuity alone is better than the fit.
REACH = 1.5
#: Deeper than this the dipole density over the filled fraction gives the field.
DEEP = 1.0
#: Radius in spacings of the ball that the density is averaged over: metals carry short waves that
#: must not be seen (at 1.75 they are worth up to 7 % of |E|^2, at 2.25 up to 4 %).
INNER_SMEAR = 2.25

# Largest deviation of the filled fraction along a normal from that of a plane: spheres of four
# spacings' radius pass, edges and narrow gaps do not.
_FLAT = 0.08
# A blurred fraction below this is no second material: the lattice alone makes 0.5 % of ripple.
_TRACE = 0.02
_ROUNDING = 1e-6

Incident = Callable[[np.ndarray], np.ndarray]


@dataclass(frozen=True, eq=False)
class Places:
    """Points on one side of the surface.

    Attributes
    ----------
    points : ndarray, shape (n, 3)
        nm.
    height : ndarray, shape (n,)
        Over the particle's surface in spacings.
    eps : ndarray of complex, shape (n,)
        Permittivity there, relative to the host.
    """

    points: np.ndarray
    height: np.ndarray
    eps: np.ndarray

    def __getitem__(self, rows: np.ndarray) -> Places:
        return Places(self.points[rows], self.height[rows], self.eps[rows])


def outside_values(
    field: SmearedField, incident: Incident, at: Places, blurred: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """E in the host, and whether to trust it.

    Parameters
    ----------
    field : SmearedField
    incident : callable
        Incident E at points.
    at : Places
    blurred : ndarray of complex, shape (n, 3)
        Smeared E there, the incident one included.

    Returns
    -------
    e : ndarray of complex, shape (n, 3)
    trusted : ndarray of bool, shape (n,)
    """
    near = field.around(at.points)
    e = blurred.copy()
    trusted = at.height >= TRUSTED_ELSEWHERE - _ROUNDING
    rows = np.flatnonzero((near.structure != 0).any(axis=1))
    trusted[(near.fraction == 0).all(axis=1)] = True
    if len(rows) == 0:
        return e, trusted
    normal = np.zeros_like(at.points)
    normal[rows] = outward(field, at.points[rows], near.structure[rows])
    e[rows] = continued(e[rows], near.density[rows], normal[rows], 1.0)
    window = window_of(field.system)
    if window <= 0:
        return e, trusted
    foot = at.points - at.height[:, None] * field.system.cells.spacing * normal
    single = (near.fraction > _TRACE).sum(axis=1) <= 1
    rows = rows[single[rows] & (at.height[rows] < TRUSTED_ELSEWHERE)]
    for line in OUTER_LINES:
        flat = flat_along(field, foot[rows], normal[rows], line, window)
        found, rows = rows[flat], rows[~flat]
        trusted[found] = at.height[found] >= TRUSTED_OUTSIDE - _ROUNDING
        found = found[at.height[found] < REACH - _ROUNDING]
        if len(found):
            e[found] = _above(
                field, incident, foot[found], normal[found], at.height[found], line, window
            )
    return e, trusted


def inside_values(
    field: SmearedField, incident: Incident, at: Places, blurred: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """E inside the particle, and whether to trust it; `blurred` is not used.

    Other parameters and values as for `outside_values`.
    """
    system = field.system
    d = system.cells.spacing
    within = field.around(at.points, INNER_SMEAR)
    single = (within.fraction > _TRACE).sum(axis=1) <= 1
    e = from_density(within, at.eps, system.k, d)
    trusted = single & (at.height <= -TRUSTED_ELSEWHERE + _ROUNDING)
    mixed = np.flatnonzero(~single)
    if len(mixed):
        # Between two materials continuity alone is used.
        places = at.points[mixed]
        near = field.around(places)
        total = field.scattered(places)[0] + incident(places)
        normal = axis_of(near.structure)
        e[mixed] = continued(total, near.density, normal, at.eps[mixed])
    window = window_of(system)
    rows = np.flatnonzero(single & (at.height > -DEEP))
    if window <= 0 or len(rows) == 0:
        return e, trusted
    normal = outward(field, at.points[rows], field.around(at.points[rows]).structure)
    foot = at.points[rows] - at.height[rows, None] * d * normal
    flat = flat_along(field, foot, normal, INNER_LINE, window)
    if flat.any():
        e[rows[flat]] = _below(field, foot[flat], normal[flat], at[rows[flat]], window)
    return e, trusted


def window_of(system: System) -> float:
    """Width of the window that mixed the surface cells, in spacings; 0 if there was none."""
    cells = system.cells
    seen = np.zeros(cells.n, bool)
    seen[cells.rows()[tuple(system.index.T)]] = True
    left_out = ~seen & (cells.window.sum(axis=1) > 0.05)
    return 0.0 if left_out.any() or len(system.alpha_inverse.where) == 0 else cells.window_width


def continued(e: np.ndarray, density: np.ndarray, normal: np.ndarray, eps) -> np.ndarray:
    """E where the permittivity is `eps`, from blurred E and 4 pi P by continuity alone, (n, 3)."""
    normal_e = np.einsum("nc,nc->n", e, normal)
    displacement = normal_e + np.einsum("nc,nc->n", density, normal)
    return e + (displacement / eps - normal_e)[:, None] * normal


def from_density(near: Surroundings, eps: np.ndarray, k: float, spacing: float) -> np.ndarray:
    """E inside one material from the dipole density over the filled fraction, (n, 3).

    `near` is averaged over balls of `INNER_SMEAR`. The mean of a wave of wave number q over a
    ball is smaller than its middle by q^2 <r^2>/6, with <r^2> = 3 a^2/11 for this density.
    """
    filled = np.maximum(near.fraction.sum(axis=1), _TRACE)
    middle = 1 - k**2 * eps * (INNER_SMEAR * spacing) ** 2 / 22
    return near.density / (filled * (eps - 1) * middle)[:, None]


def axis_of(structure: np.ndarray) -> np.ndarray:
    """Direction of the surface's normal, sign left open, (n, 3); from `Surroundings.structure`."""
    matrices = structure[:, [0, 3, 4, 3, 1, 5, 4, 5, 2]].reshape(-1, 3, 3)
    return np.linalg.eigh(matrices)[1][:, :, 2]


def outward(field: SmearedField, points: np.ndarray, structure: np.ndarray) -> np.ndarray:
    """Unit normals towards less filled space, (n, 3)."""
    normal = axis_of(structure)
    step = 0.5 * field.system.cells.spacing
    above, below = (field.around(points + sign * step * normal) for sign in (1, -1))
    rises = above.fraction.sum(axis=1) > below.fraction.sum(axis=1)
    return np.where(rises[:, None], -normal, normal)


def flat_along(
    field: SmearedField,
    foot: np.ndarray,
    normal: np.ndarray,
    line: tuple[float, ...],
    window: float,
) -> np.ndarray:
    """Whether the filling along the normals is that of a plane, (n,) bool."""
    expected = blur_of(window).filled(np.array(line))
    flat = np.ones(len(foot), bool)
    for height, filled in zip(line, expected, strict=True):
        there = field.around(foot + height * field.system.cells.spacing * normal)
        flat &= np.abs(there.fraction.sum(axis=1) - filled) < _FLAT
    return flat


def _above(field, incident, foot, normal, height, line, window) -> np.ndarray:
    """E outside at `height` above the foot points, unblurred, (n, 3)."""
    d = field.system.cells.spacing
    places = (foot[None] + d * np.array(line)[:, None, None] * normal[None]).reshape(-1, 3)
    e = field.scattered(places)[0] + incident(places)
    density = field.around(places).density
    values = continued(e, density, np.tile(normal, (len(line), 1)), 1.0)
    matrix = unblurring("outer", line, window)
    coefficients = np.einsum("tl,lnc->ntc", matrix, values.reshape(len(line), -1, 3))
    return unblurred("outer", height, coefficients)


def _below(field, foot, normal, at: Places, window) -> np.ndarray:
    """E inside from the dipole density deeper down the normal, unblurred, (n, 3)."""
    d = field.system.cells.spacing
    density = [field.around(foot + d * h * normal).density for h in INNER_LINE]
    matrix = unblurring("inner", INNER_LINE, window)
    coefficients = np.einsum("tl,lnc->ntc", matrix, np.array(density))
    return unblurred("inner", at.height, coefficients) / (at.eps - 1)[:, None]
