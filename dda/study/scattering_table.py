"""``[scattering]``: what to give of the scattered light, as the user writes it."""

from __future__ import annotations

import math
from typing import Annotated, Any

from pydantic import BeforeValidator, Field, model_validator

from dda.study.fields import Range, Table

#: More scattering angles than this are taken for a slip of the pen.
MOST_ANGLES = 2000
#: Names of the multipoles that have columns.
MULTIPOLES = ("dipole", "quadrupole", "octupole", "hexadecapole")


class AngleRange(Range):
    """``{from = 0, to = 180, step = 5}``, degrees, both ends included."""

    most = MOST_ANGLES
    things = "angles"


def _angles(value: Any) -> Any:
    if isinstance(value, dict):
        if set(value) != {"from", "to", "step"}:
            raise ValueError(f"takes from, to and step, not {', '.join(value) or 'nothing'}")
        value = AngleRange.model_validate(value).values()
    found = _numbers(value, "a list of angles in degrees or {from = 0, to = 180, step = 5}")
    outside = [angle for angle in found if not 0 <= angle <= 180]
    if outside:
        raise ValueError(
            f"a scattering angle lies between 0 (forward) and 180 degrees (backward), not at "
            f"{outside[0]:g}; other sides of the light are other azimuths"
        )
    return found


def _azimuths(value: Any) -> Any:
    return _numbers(value, "a list of azimuths in degrees")


def _numbers(value: Any, wanted: str) -> tuple[float, ...]:
    items = value if isinstance(value, list | tuple) else [value]
    plain = [x for x in items if isinstance(x, int | float) and not isinstance(x, bool)]
    if not items or len(plain) != len(items) or not all(map(math.isfinite, plain)):
        raise ValueError(f"should be {wanted}")
    if len(items) > MOST_ANGLES:
        raise ValueError(f"there are more than {MOST_ANGLES} angles")
    twice = [x for n, x in enumerate(items) if x in items[:n]]
    if twice:
        raise ValueError(f"the angle {twice[0]:g} is listed twice")
    return tuple(float(x) for x in items)


class ScatteringTable(Table):
    """``[scattering]``: asymmetry, radiation pressure, forward and backward scattering, and more.

    ``angles`` are those between the incident and the scattered light, in degrees; ``azimuths``
    turn the scattering plane about the light, from the polarization where that is a real vector.
    """

    angles: Annotated[tuple[float, ...], BeforeValidator(_angles)] | None = None
    azimuths: Annotated[tuple[float, ...], BeforeValidator(_azimuths)] = (0.0,)
    multipoles: Annotated[int, Field(strict=True, ge=1, le=len(MULTIPOLES))] | None = None
    dichroism: Annotated[bool, Field(strict=True)] = False
    t_matrix: Annotated[bool, Field(strict=True)] = False

    @model_validator(mode="after")
    def _planes_of_angles(self) -> ScatteringTable:
        if self.angles is None and "azimuths" in self.model_fields_set:
            raise ValueError("azimuths turn the plane of the scattering angles; give angles too")
        return self

    @property
    def both_polarizations(self) -> bool:
        """Whether it takes the answer to two polarizations."""
        return self.angles is not None or self.dichroism
