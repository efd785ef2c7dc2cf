"""Cross sections solved for until they have settled, with the solver's share of their error."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from ..lattice.linear_system import System
from ..lattice.sectors import Sector
from ..lattice.settling import Settling
from ..lattice.solution import Polarization, solve
from .far_field import quadrature_order, radiated, sphere_quadrature
from .sections import CrossSections, cross_sections


@dataclass(frozen=True, eq=False)
class Settled:
    """A solution whose cross sections have settled.

    Attributes
    ----------
    polarization : Polarization
        Its status is "converged" when C_ext and C_abs hold still to the tolerance.
    sections : CrossSections
    error : ndarray, shape (3,)
        Estimated error of C_ext, C_abs, C_sca from the solver alone, nm^2.
    """

    polarization: Polarization
    sections: CrossSections
    error: np.ndarray


def settle(
    system: System,
    light,
    *,
    tolerance: float = 1e-3,
    residual: float = 1e-6,
    limit: int = 6000,
    start: np.ndarray | None = None,
    previous: Sequence[np.ndarray] = (),
    monitor: Callable[[int, np.ndarray, float], bool] | None = None,
    method: str = "cocg",
) -> Settled:
    """Solve until C_ext and C_abs change by less than `tolerance` of their values.

    Parameters
    ----------
    system : System
    light : PlaneWave
    tolerance : float
        Largest solver error allowed, relative, on C_ext and on C_abs.
    residual : float
        A residual this small ends the solve as well.
    limit : int
        Most iterations in a mirror sector.
    start, previous, monitor, method
        As in `dda.solve`.

    Returns
    -------
    Settled

    Notes
    -----
    Of a lossless particle C_abs is zero; it is then asked for to `tolerance` of a thousandth of
    C_ext at least.
    """
    goal = SectionsGoal(system, tolerance)
    polarization = solve(
        system,
        light,
        tolerance=residual,
        limit=limit,
        start=start,
        previous=previous,
        monitor=monitor,
        goal=goal,
        method=method,
    )
    sections = cross_sections(polarization)
    # Solved in fewer steps than the estimate needs: the residual bounds it.
    bound = 10 * polarization.residual * abs(sections.c_ext)
    error = np.where(np.isfinite(goal.error), goal.error, bound)
    return Settled(polarization, sections, error)


class SectionsGoal:
    """C_ext and C_abs of one light, sector by sector.

    Both are sums over the sectors: fields of different parity do not interfere in a cross
    section. For the same reason the far field of a sector is needed in one octant only.
    """

    def __init__(self, system: System, tolerance: float):
        self._system = system
        self._tolerance = tolerance
        self._done = np.zeros(3)
        self.error = np.zeros(3)
        self._directions: dict[tuple[int, int, int], tuple[np.ndarray, np.ndarray]] = {}

    def watch(self, sector: Sector, incident: np.ndarray, after_step) -> Settling:
        """See `dda.lattice.settling.Goal`."""
        conjugate = sector.fold(incident.conj()).astype(complex)
        system = self._system
        directions, weights = self._octant(sector.signs)
        step = system.k * system.cells.spacing

        def quantities(x: np.ndarray) -> np.ndarray:
            ext = 4 * np.pi * system.k * np.dot(conjugate, x).imag
            p = np.ascontiguousarray(sector.unfold(x), np.complex128)
            total = radiated(system.index, p, directions, step)
            total -= directions * (directions * total).sum(axis=1, keepdims=True)
            sca = system.k**4 * float(weights @ (abs(total) ** 2).sum(axis=1))
            return np.array([ext, ext - sca, sca])

        def allowed(values: np.ndarray) -> np.ndarray:
            whole = np.abs(values + self._done)
            c_abs = max(whole[1], 1e-3 * whole[0])
            return self._tolerance * np.array([whole[0], c_abs, np.inf])

        # scattering alone is not stationary at the solution
        return Settling(quantities, allowed, after_step, orders=(2, 2, 1))

    def add(self, watch: Settling) -> None:
        """See `dda.lattice.settling.Goal`."""
        self._done = self._done + watch.values[-1]
        self.error = self.error + watch.spread

    def _octant(self, signs: tuple[int, int, int]) -> tuple[np.ndarray, np.ndarray]:
        if signs not in self._directions:
            system = self._system
            half = system.positions - system.positions.mean(axis=0)
            order = quadrature_order(system.k * float(np.sqrt((half**2).sum(axis=1).max())))
            n, w = sphere_quadrature(order + order % 2, half_turned=True)
            for axis, sign in enumerate(signs):
                if sign:
                    keep = n[:, axis] > 0
                    n, w = n[keep], 2 * w[keep]
            self._directions[signs] = np.ascontiguousarray(n), w
        return self._directions[signs]
