"""Error bars of near fields from two or three spacings."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ..errors import InputError
from .near_field import NearField

# Closer than this many coarse spacings to a surface, outside and inside, the two fields differ
# mostly by the lattice's roughness, which does not fall as a power of the spacing: extrapolating
# would only magnify it.
_SMOOTH_OUTSIDE, _SMOOTH_INSIDE = 3.0 - 1e-6, 2.0 - 1e-6


@dataclass(frozen=True, eq=False)
class RefinedField:
    """``|E|^2`` with its error.

    Attributes
    ----------
    e2 : ndarray, shape (n,)
        Best value: extrapolated to zero spacing three coarse spacings or more outside a surface
        and two inside, that of the finest spacing closer by.
    e2_error : ndarray, shape (n,)
        Its error bar.
    trusted : ndarray of bool, shape (n,)
        Whether the error bar is known to hold: not within the window of the finest spacing's
        surface.
    """

    e2: np.ndarray
    e2_error: np.ndarray
    trusted: np.ndarray


def refined_field(fields: Sequence[NearField]) -> RefinedField:
    """Compare fields at the same points from different spacings.

    Parameters
    ----------
    fields : sequence of two or three NearField
        In any order.

    Returns
    -------
    RefinedField

    Raises
    ------
    InputError
        If there are fewer than two fields, or their points or spacings do not suit.

    Notes
    -----
    Away from surfaces the error falls as d^2: the values are extrapolated along a least-squares
    line in d^2 and the error bar is the size of the correction. Near surfaces it is the largest
    difference from the finest value, widened by a half and more if the spacings are close. Since
    a difference can vanish by chance, no bar is narrower than the root mean square relative one
    of its kind of points (away or near, outside or inside), and one near a surface is a quarter
    wider than that away from it on the same side.

    Examples
    --------
    >>> import dda, shapes
    >>> import numpy as np
    >>> from dda.response.near_field import fields_at
    >>> sphere, fields = shapes.sphere(diameter=40, material="gold"), []
    >>> for n in (10, 14):
    ...     system = dda.system(shapes.voxelize(sphere, cells=n), wavelength=530)
    ...     solved = dda.solve(system, dda.plane_wave())
    ...     fields.append(fields_at(solved, np.array([[40.0, 0, 0]]), particle=sphere))
    >>> best = refined_field(fields)
    >>> bool(best.trusted[0] and best.e2_error[0] < 0.02 * best.e2[0])
    True
    """
    fields = sorted(fields, key=lambda f: -f.spacing)
    _check(fields)
    spacing = np.array([f.spacing for f in fields])
    values = np.array([f.e2 for f in fields])
    fine = values[-1]
    scale = np.maximum(fine, 1e-12)
    line = np.polynomial.polynomial.polyfit(spacing**2, values, 1)[0]
    inside = fields[-1].material >= 0
    smooth = np.where(inside, _SMOOTH_INSIDE, _SMOOTH_OUTSIDE)
    away = np.abs(fields[0].height) >= smooth * spacing[0]
    # a line may overshoot below zero where the field almost vanishes
    extrapolated = np.clip(line, 0.25 * fine, 4 * fine)
    widened = 1.5 * max(1.0, 1 / ((spacing[0] / spacing[-1]) ** 2 - 1))
    roughness = widened * np.abs(values[:-1] - fine).max(axis=0)
    error = np.where(away, np.abs(extrapolated - fine), roughness)
    for side in (inside, ~inside):
        least = 0.0
        for kind in (side & away, side & ~away):
            least *= 1.25
            if kind.any():
                relative = np.minimum(error[kind] / scale[kind], 1)
                least = max(least, float(np.sqrt(np.mean(relative**2))))
                error[kind] = np.maximum(error[kind], least * scale[kind])
    same = np.array([f.material == fields[-1].material for f in fields]).all(axis=0)
    return RefinedField(np.where(away, extrapolated, fine), error, fields[-1].trusted & same)


def _check(fields: Sequence[NearField]) -> None:
    if len(fields) < 2:
        raise InputError("an error of the near field needs the same particle at two spacings")
    for coarse, fine in itertools.pairwise(fields):
        if coarse.points.shape != fine.points.shape or not np.allclose(coarse.points, fine.points):
            raise InputError("the fields to compare must be at the same points")
        if coarse.spacing < 1.1 * fine.spacing:
            raise InputError(
                f"spacings {coarse.spacing:.3g} and {fine.spacing:.3g} nm are too close to tell an "
                "error: make them differ by a fifth or more"
            )
