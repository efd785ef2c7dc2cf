"""What a material is to the rest of the program: a permittivity over wavelength, and its origin."""

from dataclasses import dataclass, replace
from typing import Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray

from dda.errors import InputError

TRANSPARENT_K_OVER_N = 1e-4
"""Largest k/n of a host that still counts as transparent.

A wave in such a host loses the fraction 4 pi (k/n) n D / wavelength of its intensity over a length
D: at k/n = 1e-4 about 1e-3 over one wavelength, below the discretization error. Water stays under
it from the near ultraviolet to about 1350 nm.
"""

_EDGE = 1e-9  # relative; conversions between units move the ends of a range by a few ulp
_GAIN = 1e-9  # relative to |eps|; Im eps below minus this is gain, not rounding


class Dispersion(Protocol):
    """A complex relative permittivity (Im >= 0 for loss) as a function of wavelength in nm."""

    def __call__(self, wavelength_nm: NDArray[np.float64], /) -> NDArray[np.complex128]: ...


@dataclass(frozen=True)
class Material:
    """A homogeneous, passive material, isotropic but for `dda.materials.anisotropic`.

    Attributes
    ----------
    name : what the user called it.
    model : permittivity over wavelength; a picklable callable.
    source : citation or description of where the numbers come from.
    range_nm : shortest and longest wavelength the numbers hold for, or None for any.
    notes : remarks a reader of a result should see, such as "k is taken as 0".
    extrapolate : outside `range_nm`, hold n and k constant at the nearer end instead of refusing.

    Notes
    -----
    The time dependence is exp(-i w t), so an absorbing material has Im eps > 0.

    Examples
    --------
    >>> from dda.materials import find
    >>> glass = find(1.5)
    >>> glass.permittivity([400.0, 800.0])
    array([2.25+0.j, 2.25+0.j])
    """

    name: str
    model: Dispersion
    source: str = ""
    range_nm: tuple[float, float] | None = None
    notes: tuple[str, ...] = ()
    extrapolate: bool = False

    def permittivity(self, wavelength_nm: ArrayLike) -> NDArray[np.complex128]:
        """Complex relative permittivity, Im >= 0, with the shape of `wavelength_nm` (vacuum, nm).

        Raises
        ------
        InputError
            A wavelength is not positive, or lies out of the range and `extrapolate` is False;
            or the model has gain there.
        """
        wavelength = self._checked(np.asarray(wavelength_nm, dtype=float))
        eps = np.asarray(self.model(wavelength), dtype=complex)
        gain = ~np.isfinite(eps) | (eps.imag < -_GAIN * np.abs(eps))
        if gain.any():
            at = wavelength[gain].flat[0]
            value = eps[gain].flat[0]
            reason = "gain is not supported" if np.isfinite(value) else "that is not a number"
            raise InputError(
                f"material '{self.name}': permittivity {value:.6g} at {at:.6g} nm; {reason}: "
                "Im eps must be 0 (lossless) or positive (absorbing)"
            )
        lossless = ~(eps.imag > 0)  # also turns -0.0 into +0.0, which decides the branch of sqrt
        return np.where(lossless, eps.real + 0j, eps)[()]

    def index(self, wavelength_nm: ArrayLike) -> NDArray[np.complex128]:
        """Complex refractive index n + i k, n >= 0 and k >= 0, with the shape of the input."""
        return np.sqrt(self.permittivity(wavelength_nm))

    def absorbing(self, wavelength_nm: ArrayLike) -> NDArray[np.bool_]:
        """True where a wave would be noticeably damped: k above `TRANSPARENT_K_OVER_N` times n."""
        index = self.index(wavelength_nm)
        return index.imag > TRANSPARENT_K_OVER_N * index.real

    def extrapolated(self) -> "Material":
        """The same material, with n and k held constant beyond the ends of its range."""
        if self.range_nm is None or self.extrapolate:
            return self
        low, high = self.range_nm
        note = f"outside {low:g} to {high:g} nm, n and k are held constant at the nearer end"
        return replace(self, extrapolate=True, notes=(*self.notes, note))

    def _checked(self, wavelength: NDArray[np.float64]) -> NDArray[np.float64]:
        bad = ~(np.isfinite(wavelength) & (wavelength > 0))
        if bad.any():
            raise InputError(
                f"material '{self.name}': wavelength {wavelength[bad].flat[0]:g} nm; "
                "a wavelength must be a positive number of nm"
            )
        if self.range_nm is None:
            return wavelength
        low, high = self.range_nm
        outside = (wavelength < low * (1 - _EDGE)) | (wavelength > high * (1 + _EDGE))
        if outside.any() and not self.extrapolate:
            raise InputError(
                f"material '{self.name}' is known from {low:.6g} to {high:.6g} nm, not at "
                f"{wavelength[outside].flat[0]:.6g} nm; stay in the range, choose other data, or "
                "ask for extrapolation (extrapolate = true holds n and k at the nearer end)"
            )
        return np.clip(wavelength, low, high)


def require_transparent(material: Material, wavelength_nm: ArrayLike) -> NDArray[np.float64]:
    """Refractive index of a host, refused where the host absorbs.

    Parameters
    ----------
    material : the host.
    wavelength_nm : vacuum wavelengths in nm, any shape.

    Returns
    -------
    ndarray of float, same shape
        The real part of the index; k below `TRANSPARENT_K_OVER_N` times n is dropped.

    Raises
    ------
    InputError
        The host absorbs (or is metallic) at one of the wavelengths, or is anisotropic.

    Examples
    --------
    >>> from dda.materials import find
    >>> round(float(require_transparent(find("water"), 589.3)), 3)
    1.333
    """
    from dda.materials.anisotropic import require_isotropic

    require_isotropic(material, "a host")
    wavelength = np.asarray(wavelength_nm, dtype=float)
    index = np.asarray(material.index(wavelength))
    refused = np.asarray(material.absorbing(wavelength)) | ~(index.real > 0)
    if refused.any():
        at = wavelength[refused].flat[0]
        n, k = index[refused].flat[0].real, index[refused].flat[0].imag
        raise InputError(
            f"host '{material.name}' absorbs at {at:.6g} nm: n = {n:.4g}, k = {k:.3g}, and k may "
            f"be at most {TRANSPARENT_K_OVER_N:g} n. In an absorbing host the incident wave "
            "decays before it reaches the particle and cross sections lose their meaning. Choose "
            "wavelengths where the host is transparent, another host, or a real index "
            "(index = 1.33)"
        )
    return index.real[()]
