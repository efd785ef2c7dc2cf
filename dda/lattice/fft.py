"""The FFT library behind the convolution: scipy.fft, or ducc0 when it is installed."""

from __future__ import annotations

import importlib.util
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import scipy.fft

from ..errors import InputError


@dataclass(frozen=True)
class FFT:
    """Unscaled complex transforms along one axis, single threaded and lock free.

    Attributes
    ----------
    name : str
    transform : callable
        ``transform(array, axis, forward, out)`` writes the transform to `out` and returns it.
        `out` may be `array` itself.
    """

    name: str
    transform: Callable[[np.ndarray, int, bool, np.ndarray], np.ndarray]


def choose(name: str = "auto") -> FFT:
    """Pick an FFT library.

    Parameters
    ----------
    name : {"auto", "scipy", "ducc0"}
        "auto" is ducc0 when installed, otherwise scipy.

    Raises
    ------
    InputError
        If the library is unknown or not installed.
    """
    if name == "auto":
        name = "ducc0" if importlib.util.find_spec("ducc0") else "scipy"
    if name == "scipy":
        return FFT("scipy", _scipy)
    if name == "ducc0":
        if importlib.util.find_spec("ducc0") is None:
            raise InputError(
                "fft = \"ducc0\" but ducc0 is not installed: pip install 'motelight[fast]'"
            )
        return FFT("ducc0", _ducc())
    raise InputError(f'unknown FFT library {name!r}; use "auto", "scipy" or "ducc0"')


def _scipy(array: np.ndarray, axis: int, forward: bool, out: np.ndarray) -> np.ndarray:
    if forward:
        result = scipy.fft.fft(array, axis=axis, overwrite_x=array is out)
    else:
        result = scipy.fft.ifft(array, axis=axis, norm="forward", overwrite_x=array is out)
    if result is not out and not np.shares_memory(result, out):
        out[...] = result
    return out


def _ducc() -> Callable[[np.ndarray, int, bool, np.ndarray], np.ndarray]:
    from ducc0.fft import c2c

    def transform(array: np.ndarray, axis: int, forward: bool, out: np.ndarray) -> np.ndarray:
        return c2c(array, axes=(axis,), forward=forward, out=out, nthreads=1)

    return transform
