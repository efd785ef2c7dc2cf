"""How long a run will take: products measured on this machine, times how many are expected."""

from __future__ import annotations

import math
import time
from dataclasses import dataclass
from statistics import median

import numpy as np

from dda.lattice import System

#: Most iterations of one solve.
LIMIT = 2000
#: The number of products is known to about this factor, up and down.
FACTOR = 2.0


@dataclass(frozen=True)
class Cost:
    """What the run costs on this machine.

    Attributes
    ----------
    setup_seconds : float
        Before the solver starts, at each wavelength.
    product_seconds : float
        One product with the matrix of the system, measured.
    products : tuple of float
        Expected products at each wavelength, polarizations added up.
    """

    setup_seconds: float
    product_seconds: float
    products: tuple[float, ...]

    @property
    def seconds(self) -> float:
        """The expected wall time of the run."""
        return len(self.products) * self.setup_seconds + sum(self.products) * self.product_seconds

    @property
    def seconds_between(self) -> tuple[float, float]:
        """The expected wall time, with the uncertainty of the number of products."""
        setup = len(self.products) * self.setup_seconds
        solving = sum(self.products) * self.product_seconds
        return setup + solving / FACTOR, setup + solving * FACTOR


def measure_product(matrix: System, repeats: int = 3) -> float:
    """Return the seconds that one product with a system's matrix takes here.

    The first product is not counted: it compiles and plans.
    """
    rng = np.random.default_rng(1)
    vector = rng.standard_normal((matrix.n, 3)).astype(matrix.dtype)
    matrix.matvec(vector)
    times = []
    for _ in range(repeats):
        started = time.perf_counter()
        matrix.matvec(vector)
        times.append(time.perf_counter() - started)
    return median(times)


def expected_products(m: complex, across: float, tolerance: float) -> float:
    """Return about how many products the solver needs for one polarization.

    Parameters
    ----------
    m : complex
        Refractive index of the material relative to the host.
    across : float
        Cells across the largest extent.
    tolerance : float
        Residual at which the solver stops.

    Notes
    -----
    A fit by eye to the solver's own counts on cubes of gold, silver and silica in water at 16 and
    24 cells across, 350 to 850 nm: a metal takes more, the less it absorbs. Good to a factor of
    two, which is what the plan states.

    Examples
    --------
    >>> expected_products(1.1, 32, 1e-4) < 20 < expected_products(0.2 + 2j, 32, 1e-4)
    True
    """
    eps = m * m
    digits = -math.log10(tolerance) / 4
    if eps.real > 0:
        return digits * (3 + 6 * abs(eps - 1))
    loss = max(eps.imag, 1e-3 * abs(eps))
    return min(LIMIT, digits * (15 + 40 * abs(eps.real) / loss * max(1.0, across / 16)))
