"""Effective-medium rules for a mixture of two materials on a scale far below the wavelength.

Maxwell Garnett (1904): spheres of the inclusion, well apart in the host. Bruggeman (1935): both
phases on an equal footing. Looyenga (1965): the cube roots add, for low contrast. Lorentz-Lorenz:
the molecular polarizabilities in vacuum add, for liquids and dense glasses.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from dda.errors import InputError
from dda.materials.material import Material

_Complex = NDArray[np.complex128]
_Rule = Callable[[_Complex, _Complex, float], _Complex]


@dataclass(frozen=True)
class Mixture:
    """Permittivity of `rule` (a key of `RULES`) with volume `fraction` of `inclusion` in `host`."""

    rule: str
    host: Material
    inclusion: Material
    fraction: float

    def __call__(self, wavelength_nm: NDArray[np.float64], /) -> _Complex:
        host = np.asarray(self.host.permittivity(wavelength_nm))
        inclusion = np.asarray(self.inclusion.permittivity(wavelength_nm))
        return RULES[self.rule](host, inclusion, self.fraction)


def mixture(rule: str, host: Material, inclusion: Material, fraction: float) -> Material:
    """Effective material of a mixture.

    Parameters
    ----------
    rule : "maxwell-garnett", "bruggeman", "looyenga" or "lorentz-lorenz".
    host, inclusion : the two materials.
    fraction : volume fraction of the inclusion, 0 to 1.

    Raises
    ------
    InputError
        Unknown rule, fraction out of 0 to 1, or no wavelength at which both materials are known.

    Examples
    --------
    >>> from dda.materials import find
    >>> foam = mixture("bruggeman", find(1.0), find(1.5), 0.3)
    >>> float(foam.index(500.0).real.round(4))
    1.1409
    """
    if rule not in RULES:
        raise InputError(f"unknown mixing rule '{rule}'; there are {', '.join(RULES)}")
    if not 0 <= fraction <= 1:
        raise InputError(f"{rule}: fraction = {fraction:g}; a volume fraction lies from 0 to 1")
    notes = []
    if rule == "maxwell-garnett" and fraction > 0.3:
        notes.append("Maxwell Garnett holds for separate spheres: fractions up to about 0.3")
    if rule == "looyenga":
        notes.append("Looyenga holds for low contrast, not for metals")
    return Material(
        name=f"{fraction:g} {inclusion.name} in {host.name}",
        model=Mixture(rule, host, inclusion, fraction),
        source=f"{rule} mixture; host: {host.source}; inclusion: {inclusion.source}",
        range_nm=_common_range(host, inclusion),
        notes=(*notes, *host.notes, *inclusion.notes),
    )


def _common_range(host: Material, inclusion: Material) -> tuple[float, float] | None:
    ranges = [m.range_nm for m in (host, inclusion) if m.range_nm and not m.extrapolate]
    if not ranges:
        return None
    low, high = max(r[0] for r in ranges), min(r[1] for r in ranges)
    if low > high:
        raise InputError(
            f"no wavelength at which both '{host.name}' ({ranges[0][0]:g} to {ranges[0][1]:g} nm) "
            f"and '{inclusion.name}' ({ranges[1][0]:g} to {ranges[1][1]:g} nm) are known"
        )
    return low, high


def _maxwell_garnett(host: _Complex, inclusion: _Complex, fraction: float) -> _Complex:
    # Written so that the limits of fraction 0 and 1 are exact also at resonance.
    numerator = inclusion * (1 + 2 * fraction) + 2 * host * (1 - fraction)
    denominator = inclusion * (1 - fraction) + host * (2 + fraction)
    return host * numerator / denominator


def _bruggeman(host: _Complex, inclusion: _Complex, fraction: float) -> _Complex:
    """The root of 2 e^2 - b e - e1 e2 = 0 with Im e >= 0.

    For lossy constituents exactly one root lies in the upper half plane: the sum of
    f_j e_j / (e_j + 2 e) cannot be 1/3 for real e, so no root crosses the real axis while the e_j
    move in the upper half plane, and for e1 = e2 the roots are e1 and -e1/2. Lossless constituents
    are the limit of vanishing loss.
    """
    loss = 1e-9j * np.maximum(np.abs(host), np.abs(inclusion))
    lossy = _bruggeman_roots(host + loss, inclusion + loss, fraction)
    guide = np.where(lossy[0].imag > lossy[1].imag, lossy[0], lossy[1])
    first, second = _bruggeman_roots(host, inclusion, fraction)
    root = np.where(np.abs(first - guide) <= np.abs(second - guide), first, second)
    return root.real + 1j * np.maximum(root.imag, 0.0)


def _bruggeman_roots(e1: _Complex, e2: _Complex, fraction: float) -> tuple[_Complex, _Complex]:
    b = (2 - 3 * fraction) * e1 + (3 * fraction - 1) * e2
    root = np.sqrt(b * b + 8 * e1 * e2 + 0j)
    return (b + root) / 4, (b - root) / 4


def _looyenga(host: _Complex, inclusion: _Complex, fraction: float) -> _Complex:
    # Im eps >= 0 with +0.0 (Material sees to it), so the principal root is the right one.
    return ((1 - fraction) * host ** (1 / 3) + fraction * inclusion ** (1 / 3)) ** 3


def _lorentz_lorenz(host: _Complex, inclusion: _Complex, fraction: float) -> _Complex:
    # (e - 1)/(e + 2) of the mixture, over a common denominator so that e = -2 is no trouble.
    a, b = host + 2, inclusion + 2
    share = (1 - fraction) * (host - 1) * b + fraction * (inclusion - 1) * a
    return (a * b + 2 * share) / (a * b - share)


RULES: dict[str, _Rule] = {
    "maxwell-garnett": _maxwell_garnett,
    "bruggeman": _bruggeman,
    "looyenga": _looyenga,
    "lorentz-lorenz": _lorentz_lorenz,
}
