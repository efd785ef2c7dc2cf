"""Light on a particle that tumbles: one call for a point of a spectrum."""

from __future__ import annotations

from dataclasses import dataclass

from ..errors import InputError
from ..lattice.linear_system import System
from .averages import OrientationAverage, orientation_average
from .directions import quadrature_average
from .tmatrix import TMatrix
from .tmatrix_solve import ColumnMemory, t_matrix

WAYS = ("t-matrix", "quadrature")


@dataclass(frozen=True)
class Tumbling:
    """An orientation average and what it came from.

    Attributes
    ----------
    average : OrientationAverage
    t_matrix : TMatrix or None
        None when the way is quadrature.
    """

    average: OrientationAverage
    t_matrix: TMatrix | None


def tumbling(
    system: System,
    *,
    way: str = "t-matrix",
    tolerance: float = 1e-3,
    order: int | None = None,
    limit: int = 3000,
    memory: ColumnMemory | None = None,
    monitor=None,
) -> Tumbling:
    """Orientation average of a system.

    Parameters
    ----------
    system : System
        Made without a light (polarizability "fcd-corners", "fcd" or "rr").
    way : {"t-matrix", "quadrature"}
    tolerance : float
        Relative error to allow in the averages of C_ext and C_abs, the spacing aside.
    order : int, optional
        Highest multipole order, or least degree of the rule of directions.
    limit : int
        Most iterations of a solve.
    memory : ColumnMemory, optional
        Of the T-matrix, see `dda.response.tmatrix_solve.t_matrix`.
    monitor : callable, optional
        ``monitor(done, of)`` as columns are solved; `of` grows if more orders turn out to be
        needed. For quadrature ``monitor(directions)``.

    Returns
    -------
    Tumbling

    Raises
    ------
    InputError
        If the way is unknown.

    Examples
    --------
    >>> import dda, shapes
    >>> cells = shapes.voxelize(shapes.sphere(diameter=30, material="gold"), cells=8)
    >>> result = tumbling(dda.system(cells, wavelength=530))
    >>> result.average.status, result.t_matrix.order
    ('converged', 3)
    """
    if way not in WAYS:
        raise InputError(f"orientation average by {way!r} is not known; use {' or '.join(WAYS)}")
    if way == "quadrature":
        average = quadrature_average(
            system, tolerance=tolerance, degree=order, limit=limit, monitor=monitor
        )
        return Tumbling(average, None)
    t = t_matrix(
        system, order=order, tolerance=tolerance, limit=limit, memory=memory, monitor=monitor
    )
    return Tumbling(orientation_average(t), t)
