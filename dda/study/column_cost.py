"""What the columns of a T-matrix cost, for the plan of particles that tumble."""

from __future__ import annotations

import time
from dataclasses import dataclass
from statistics import median

import numpy as np

from dda.lattice import System
from dda.response.symmetry import find_sectors
from dda.response.tmatrix_solve import expected_columns

# Most columns matter less than the first ones and end sooner than a solve for a plane wave
# (gold cube, star and helix, silver rod: 0.4 to 1.0 of the steps expected of that).
_SHARE = 0.7


@dataclass(frozen=True)
class ColumnCost:
    """Cost of an orientation average.

    Attributes
    ----------
    columns : float
        Number of columns, each weighed by how soon it ends.
    step_seconds : float
        A step of one of them, measured.
    """

    columns: float
    step_seconds: float


def measure_columns(matrix: System, repeats: int = 3) -> ColumnCost:
    """Count the columns that are solved and measure a step of one.

    In mirror sectors a step is a product with a part of the cells; with other symmetries a
    product with all cells serves a column of every sector.
    """
    sectors = find_sectors(matrix)
    operator = sectors.mirrored[0] if sectors.mirrored else matrix
    shared = 1 if sectors.mirrored else sectors.count
    count = len(sectors.cells) if sectors.mirrored else matrix.n
    vector = np.ones((count, 3), matrix.dtype)
    operator.matvec(vector)  # compiles and plans
    times = []
    for _ in range(repeats):
        started = time.perf_counter()
        operator.precondition(operator.matvec(vector))
        times.append(time.perf_counter() - started)
    return ColumnCost(_SHARE * expected_columns(matrix), median(times) / shared)
