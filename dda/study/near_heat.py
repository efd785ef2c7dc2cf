"""Heat of a near field: absorbed power of the particle and its density."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from dda.beams import GaussianBeam
from dda.design.heat import density_per_e2
from dda.response import Settled
from dda.study.geometry import Geometry
from dda.study.near_levels import widening
from dda.study.near_table import HeatTable


@dataclass(frozen=True, eq=False)
class HeatAnswer:
    """Absorbed power.

    Attributes
    ----------
    intensity : float
        Of the incident light, at the focus of a beam, W/m^2.
    density : ndarray, shape (m + 1,)
        W/m^3 for |E|^2 = 1 in each material; the last is that of the host, zero.
    total, total_error : float
        Absorbed power, W.
    """

    intensity: float
    density: np.ndarray
    total: float
    total_error: float


def heat_answer(
    table: HeatTable,
    levels: tuple[Geometry, Geometry],
    solved: tuple[Sequence[Settled], Sequence[Settled]],
) -> HeatAnswer:
    """Return the heat of a wavelength from its solutions on two lattices."""
    coarse, fine = (float(np.mean([s.sections.c_abs for s in each])) for each in solved)
    solver_error = float(np.mean([s.error[1] for s in solved[1]]))
    polarization = solved[1][0].polarization
    intensity = _intensity(table, polarization.light, polarization.system.k)
    power = intensity * 1e-18  # W for a cross section of 1 nm^2
    error = widening(levels) * abs(coarse - fine) + solver_error
    density = density_per_e2(polarization.system, intensity)
    return HeatAnswer(intensity, density, power * fine, power * error)


def _intensity(table: HeatTable, light: object, k: float) -> float:
    """Intensity in W/m^2, of a beam at its focus from its power."""
    if table.intensity_w_per_cm2 is not None:
        return 1e4 * table.intensity_w_per_cm2
    assert table.power_mw is not None
    assert isinstance(light, GaussianBeam)
    return 1e-3 * table.power_mw / (light.effective_area(k) * 1e-18)
