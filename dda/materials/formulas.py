"""The nine dispersion formulas of the data set, refractive index over wavelength in micrometres.

Their definitions are the data set's own (Polyanskiy 2024, Scientific Data 11, 94). They are written
out here, not called in the package that carries the data, so that a material pickles into worker
processes.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

_Array = NDArray[np.float64]


@dataclass(frozen=True)
class DatabaseFormula:
    """Refractive index n(wavelength in nm) of formula `number` (1 to 9) with `coefficients`."""

    number: int
    coefficients: tuple[float, ...]

    def __call__(self, wavelength_nm: NDArray[np.float64], /) -> NDArray[np.float64]:
        micrometres = np.asarray(wavelength_nm, dtype=float) * 1e-3
        evaluate, square = _FORMULAS[self.number]
        padded = np.asarray((*self.coefficients, *([0.0] * 17)))
        # A pole or a negative n^2 gives inf or nan, which Material refuses with the wavelength.
        with np.errstate(divide="ignore", invalid="ignore"):
            value = evaluate(micrometres, padded, len(self.coefficients))
            return np.sqrt(value) if square else value


def _sellmeier(x: _Array, c: _Array, count: int) -> _Array:
    terms = (c[i] * x**2 / (x**2 - c[i + 1] ** 2) for i in range(1, count, 2))
    return 1 + c[0] + sum(terms, np.zeros_like(x))


def _sellmeier_squared(x: _Array, c: _Array, count: int) -> _Array:
    terms = (c[i] * x**2 / (x**2 - c[i + 1]) for i in range(1, count, 2))
    return 1 + c[0] + sum(terms, np.zeros_like(x))


def _polynomial(x: _Array, c: _Array, count: int) -> _Array:
    return c[0] + sum((c[i] * x ** c[i + 1] for i in range(1, count, 2)), np.zeros_like(x))


def _resonances_and_powers(x: _Array, c: _Array, count: int) -> _Array:
    resonances = (
        c[i] * x ** c[i + 1] / (x**2 - c[i + 2] ** c[i + 3]) for i in range(1, min(8, count), 4)
    )
    powers = (c[i] * x ** c[i + 1] for i in range(9, count, 2))
    return c[0] + sum(resonances, np.zeros_like(x)) + sum(powers, np.zeros_like(x))


def _gas(x: _Array, c: _Array, count: int) -> _Array:
    terms = (c[i] / (c[i + 1] - x**-2.0) for i in range(1, count, 2))
    return 1 + c[0] + sum(terms, np.zeros_like(x))


def _herzberger(x: _Array, c: _Array, count: int) -> _Array:
    pole = 1 / (x**2 - 0.028)
    powers = (c[i] * x ** (2.0 * (i - 2)) for i in range(3, count))
    return c[0] + c[1] * pole + c[2] * pole**2 + sum(powers, np.zeros_like(x))


def _retro(x: _Array, c: _Array, count: int) -> _Array:
    ratio = c[0] + c[1] * x**2 / (x**2 - c[2]) + c[3] * x**2  # (n^2 - 1)/(n^2 + 2)
    return (1 + 2 * ratio) / (1 - ratio)


def _exotic(x: _Array, c: _Array, count: int) -> _Array:
    shifted = x - c[4]
    return c[0] + c[1] / (x**2 - c[2]) + c[3] * shifted / (shifted**2 + c[5])


# number -> (expression, whether it gives n^2)
_FORMULAS = {
    1: (_sellmeier, True),
    2: (_sellmeier_squared, True),
    3: (_polynomial, True),
    4: (_resonances_and_powers, True),
    5: (_polynomial, False),
    6: (_gas, False),
    7: (_herzberger, False),
    8: (_retro, True),
    9: (_exotic, True),
}
