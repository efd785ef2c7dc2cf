"""Efficiencies: cross sections over that of the sphere of equal volume."""

from __future__ import annotations


class Efficiencies:
    """For results that hold `c_ext`, `c_abs`, `c_sca` and `area`, all in nm^2."""

    c_ext: float
    c_abs: float
    c_sca: float
    area: float

    @property
    def q_ext(self) -> float:
        """Extinction efficiency."""
        return self.c_ext / self.area

    @property
    def q_abs(self) -> float:
        """Absorption efficiency."""
        return self.c_abs / self.area

    @property
    def q_sca(self) -> float:
        """Scattering efficiency."""
        return self.c_sca / self.area
