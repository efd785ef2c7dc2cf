"""What the window and the smearing make of a field near a plane, and how to undo it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from .smeared import SMEAR


@dataclass(frozen=True, eq=False)
class Blur:
    """The blur across a plane: its kernel and its mean square sideways, over distance.

    Attributes
    ----------
    x : ndarray, shape (q,)
        Distances in spacings.
    kernel, sideways : ndarray, shape (q,)
        Weight at a distance (sum 1), and weight times mean rho^2 there.
    """

    x: np.ndarray
    kernel: np.ndarray
    sideways: np.ndarray

    def filled(self, height: np.ndarray) -> np.ndarray:
        """Blurred fraction of a half space below zero, at `height` in spacings."""
        return np.interp(height, self.x, 1 - np.cumsum(self.kernel) + self.kernel / 2)

    def height(self, filled: np.ndarray) -> np.ndarray:
        """Height in spacings at which a half space has the blurred fraction `filled`.

        >>> blur_of(2.2).height(blur_of(2.2).filled(np.array([-1.0, 0.5]))).round(6).tolist()
        [-1.0, 0.5]
        """
        heights = np.linspace(-3, 3, 1201)
        return np.interp(-np.asarray(filled), -self.filled(heights), heights)


@lru_cache(maxsize=8)
def blur_of(window: float, smear: float = SMEAR) -> Blur:
    """Blur by a ball window of diameter `window` and the smearing ball of radius `smear`.

    Both in spacings. With ``window = 0`` the smearing alone.
    """
    x = np.linspace(-5, 5, 2001)
    u = np.clip(1 - (x / smear) ** 2, 0, None)
    total = (u**4 / 4).sum()
    ball, ball_sideways = u**4 / 4 / total, smear**2 * u**5 / 20 / total
    if window <= 0:
        return Blur(x, ball, ball_sideways)
    v = np.clip((window / 2) ** 2 - x**2, 0, None)
    pane, pane_sideways = v / v.sum(), v**2 / 2 / v.sum()
    kernel = np.convolve(pane, ball, "same")
    sideways = np.convolve(pane, ball_sideways, "same") + np.convolve(pane_sideways, ball, "same")
    return Blur(x, kernel, sideways)


# Solutions of Laplace's equation that are even around the normal: 1, s and s^2 - rho^2/2, on the
# side(s) where they live.
_SIDES: dict[str, Callable[[np.ndarray], np.ndarray]] = {
    "both": lambda s: np.ones_like(s),
    "out": lambda s: (s > 0).astype(float),
    "in": lambda s: (s < 0).astype(float),
}
_MODELS = {
    "outer": (("both", 0), ("out", 1), ("out", 2), ("in", 1)),
    "inner": (("in", 0), ("in", 1)),
}


@lru_cache(maxsize=32)
def unblurring(model: str, line: tuple[float, ...], window: float) -> np.ndarray:
    """Matrix from blurred values to the coefficients of a model.

    Parameters
    ----------
    model : {"outer", "inner"}
        The field on both sides with a kink between, or that of the inner side, nothing outside.
    line : tuple of float
        Heights of the blurred values, in spacings.
    window : float
        Width of the window in spacings.

    Returns
    -------
    ndarray, shape (terms, len(line))
    """
    kernel = blur_of(window)
    heights = np.array(line)[:, None] - kernel.x
    columns = []
    for side, power in _MODELS[model]:
        here = _SIDES[side](heights)
        column = (here * heights**power) @ kernel.kernel
        if power == 2:
            column = column - 0.5 * here @ kernel.sideways
        columns.append(column)
    return np.linalg.pinv(np.stack(columns, axis=1))


def unblurred(model: str, height: np.ndarray, coefficients: np.ndarray) -> np.ndarray:
    """Values (n, 3) of a model at heights (n,) in spacings, from coefficients (n, terms, 3)."""
    side_of_sheet = np.where(height == 0, -1e-12 if model == "inner" else 1e-12, height)
    terms = [_SIDES[side](side_of_sheet) * height**power for side, power in _MODELS[model]]
    return np.einsum("tn,ntc->nc", np.array(terms), coefficients)
