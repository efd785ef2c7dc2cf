"""How long a run will take: steps measured on this machine, times how many are expected."""

from __future__ import annotations

import math
import time
from dataclasses import dataclass
from statistics import median

import numpy as np

from dda.lattice import System
from dda.lattice.sectors import Sector, sectors
from dda.study.lights import Light

#: Most iterations of one solve.
LIMIT = 6000
#: Bytes that a finished point takes on the disk at least: its file and its lines (measured).
POINT_BYTES = 14_000
#: The number of steps is known to about this factor, up and down.
FACTOR = 3.0


@dataclass(frozen=True)
class Cost:
    """What the run costs on this machine.

    Attributes
    ----------
    setup_seconds : float
        Before the solver starts, at each wavelength.
    step_seconds : float
        One step of the solver, measured.
    steps : tuple of float
        Expected steps at each wavelength, polarizations added up.
    """

    setup_seconds: float
    step_seconds: float
    steps: tuple[float, ...]

    @property
    def seconds(self) -> float:
        """The expected wall time of the run."""
        return len(self.steps) * self.setup_seconds + sum(self.steps) * self.step_seconds

    @property
    def seconds_between(self) -> tuple[float, float]:
        """The expected wall time, with the uncertainty of the number of steps."""
        setup = len(self.steps) * self.setup_seconds
        solving = sum(self.steps) * self.step_seconds
        return setup + solving / FACTOR, setup + solving * FACTOR


def measure_step(matrix: System, light: Light, repeats: int = 3) -> float:
    """Return the seconds that one step of the solver takes here: a product in every sector.

    Mirror sectors that the light does not reach are not solved and not counted. The first product
    is not timed: it compiles and plans.
    """
    incident = light.field(matrix.positions, matrix.k)
    total = 0.0
    for sector in sectors(matrix):
        vector = sector.fold(incident)
        if np.linalg.norm(vector) < 1e-12 * np.linalg.norm(incident):
            continue
        vector = vector.astype(matrix.dtype)
        sector.matvec(vector)
        total += median(_seconds(sector, vector) for _ in range(repeats))
    return total


def _seconds(sector: Sector, vector: np.ndarray) -> float:
    started = time.perf_counter()
    sector.precondition(sector.matvec(vector))
    return time.perf_counter() - started


def expected_steps(m: complex, across: float, tolerance: float) -> float:
    """Return about how many steps the solver needs for one polarization.

    Parameters
    ----------
    m : complex
        Refractive index of the material relative to the host.
    across : float
        Cells across the largest extent.
    tolerance : float
        Relative error that the solver may leave in the cross sections.

    Notes
    -----
    A fit by eye to the solver's own counts on cubes and rods of gold, silver, silicon and silica
    in water, 16 and 28 cells across, 350 to 850 nm: a metal takes more, the less it absorbs.
    Single wavelengths scatter about it by a factor of three, which is what the plan states.

    Examples
    --------
    >>> expected_steps(1.1, 32, 1e-3) < 20 < expected_steps(0.2 + 2j, 32, 1e-3)
    True
    """
    eps = m * m
    digits = -math.log10(tolerance) / 3
    if eps.real > 0:
        return digits * (4 + 2 * abs(eps - 1))
    quality = abs(eps.real) / max(eps.imag, 1e-3 * abs(eps))
    return min(LIMIT, digits * (22 + 9 * quality * math.sqrt(across / 20)))
