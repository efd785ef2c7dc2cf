"""The transforms behind the convolution: scipy.fft, or ducc0 when it is installed."""

from __future__ import annotations

import importlib.util
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import scipy.fft

from ..errors import InputError


@dataclass(frozen=True)
class FFT:
    """Unscaled in-place transforms along one axis, single threaded and lock free.

    Attributes
    ----------
    name : str
    complex_transform : callable
        ``(array, axis, forward)`` replaces the complex array by its Fourier transform.
    real_transform : callable
        ``(array, axis, family, type)`` replaces the real and the imaginary part of a complex
        array by their cosine ("dct") or sine ("dst") transform of the type 1, 2 or 3. The axis
        must not be negative.
    """

    name: str
    complex_transform: Callable[[np.ndarray, int, bool], None]
    real_transform: Callable[[np.ndarray, int, str, int], None]


def choose(name: str = "auto") -> FFT:
    """Pick a library.

    Parameters
    ----------
    name : {"auto", "scipy", "ducc0"}
        "auto" is ducc0 when installed, otherwise scipy.

    Raises
    ------
    InputError
        If the library is unknown or not installed.
    """
    installed = importlib.util.find_spec("ducc0") is not None
    if name == "auto":
        name = "ducc0" if installed else "scipy"
    if name == "scipy":
        return FFT("scipy", _scipy_complex, _scipy_real)
    if name == "ducc0":
        if not installed:
            raise InputError(
                "fft = \"ducc0\" but ducc0 is not installed: pip install 'motelight[fast]'"
            )
        return FFT("ducc0", *_ducc())
    raise InputError(f'unknown FFT library {name!r}; use "auto", "scipy" or "ducc0"')


def _parts(array: np.ndarray) -> np.ndarray:
    """A view with a last axis of real and imaginary part, of any strides."""
    real = array.real
    return np.lib.stride_tricks.as_strided(
        real, (*array.shape, 2), (*array.strides, real.dtype.itemsize)
    )


def _scipy_complex(array: np.ndarray, axis: int, forward: bool) -> None:
    if forward:
        result = scipy.fft.fft(array, axis=axis, overwrite_x=True)
    else:
        result = scipy.fft.ifft(array, axis=axis, norm="forward", overwrite_x=True)
    if not np.shares_memory(result, array):
        array[...] = result


def _scipy_real(array: np.ndarray, axis: int, family: str, kind: int) -> None:
    transform = scipy.fft.dct if family == "dct" else scipy.fft.dst
    parts = _parts(array)
    parts[...] = transform(parts, type=kind, axis=axis)


def _ducc() -> tuple[Callable, Callable]:
    from ducc0 import fft

    def complex_transform(array: np.ndarray, axis: int, forward: bool) -> None:
        fft.c2c(array, axes=(axis,), forward=forward, out=array, nthreads=1)

    def real_transform(array: np.ndarray, axis: int, family: str, kind: int) -> None:
        parts = _parts(array)
        transform = fft.dct if family == "dct" else fft.dst
        transform(parts, kind, axes=(axis,), out=parts, nthreads=1)

    return complex_transform, real_transform
