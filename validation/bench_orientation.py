"""Products with the interaction matrix for an orientation average: T-matrix against directions."""

from __future__ import annotations

import numpy as np

import dda
import shapes
from dda.response.averages import orientation_average
from dda.response.directions import lebedev
from dda.response.one_direction import one_direction
from dda.response.symmetry import find_sectors
from dda.response.tmatrix_solve import t_matrix
from validation.measure import Figure, bench

TOLERANCE = 1e-3  # of both ways


@bench("orientation")
def orientation(cells: int) -> list[Figure]:
    """A 60 nm gold cube on 3/4 of the standard cells: T-matrix against 2 x 26 solves.

    Only the directions that differ on a cube are solved (3 of 26) and counted as often as they
    occur; "with symmetry" counts them once.
    """
    across = max(8, 3 * cells // 4)
    body = shapes.cube(edge=60, rounding=6)
    system = dda.system(shapes.voxelize(body, cells=across), 560.0, 1.33)
    t = t_matrix(system, tolerance=TOLERANCE)
    average = orientation_average(t)
    share = 2.0 ** -sum(system.cells.mirrors)
    group = find_sectors(system).group
    directions, weights = lebedev(7)
    alike = np.round(np.sort(abs(directions), axis=1), 9)
    assert len(group) == 48, "a cube's cells have all symmetries of the cube"
    once = whole = c_ext = 0.0
    for kind in np.unique(alike, axis=0):
        members = (alike == kind).all(axis=1)
        both = one_direction(system, directions[members][0], tolerance=TOLERANCE)
        once += share * both.products
        whole += share * both.products * members.sum()
        parts = [both.first, both.second]
        values = [4 * np.pi * system.k * np.vdot(p.incident, p.p).imag for p in parts]
        c_ext += float(weights[members].sum() * np.mean(values))
    name = f"{across} cells across"
    return [
        Figure(
            f"{name}: products of 2 x 26 solves over those of the T-matrix",
            whole / t.products,
            "x",
            least=8,
        ),
        Figure(f"{name}: the same, symmetry used by both", once / t.products, "x"),
        Figure(f"{name}: products of the T-matrix, in those with all cells", t.products),
        Figure(
            f"{name}: difference of the two averages of C_ext",
            100 * abs(c_ext / average.c_ext - 1),
            "%",
            most=0.2,
        ),
    ]
