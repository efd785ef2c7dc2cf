"""``[light] beam``: light other than a plane wave, as the user writes it."""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import BeforeValidator, model_validator

from dda.study.fields import Positive, Table, Vector

_GAUSSIAN, _DIPOLE = ("waist_nm", "focus"), ("position", "moment", "reference")


def complex_component(value: Any, what: str) -> complex:
    """Read a number, or a complex one as the pair [re, im]."""
    if isinstance(value, complex):
        return value
    pair = value if isinstance(value, list | tuple) else (value, 0.0)
    numbers = [c for c in pair if isinstance(c, int | float) and not isinstance(c, bool)]
    if len(pair) != 2 or len(numbers) != 2 or not all(abs(c) < float("inf") for c in numbers):
        raise ValueError(
            f"{value!r} is no component of {what}: it is a number, or a complex number as the "
            "pair [re, im]"
        )
    return complex(*pair)


def _moment(value: Any) -> Any:
    if not isinstance(value, list | tuple) or len(value) != 3:
        raise ValueError("the moment is a vector of three components")
    vector = tuple(complex_component(c, "a moment") for c in value)
    if not any(vector):
        raise ValueError("the moment has length zero")
    return vector


class BeamTable(Table):
    """A focused Gaussian beam, ``{waist_nm, focus}``, or a dipole, ``{position, moment}``.

    Places are in nm from the particle's centre. Fields, and the intensity to which cross sections
    refer, have unit size at the focus of a Gaussian beam and at ``reference`` for a dipole, the
    particle's centre by default: the moment has a direction alone.
    """

    waist_nm: Positive | None = None
    focus: Vector | None = None
    position: Vector | None = None
    moment: Annotated[tuple[complex, complex, complex], BeforeValidator(_moment)] | None = None
    reference: Vector | None = None

    @property
    def gaussian(self) -> bool:
        """Whether this is a Gaussian beam; else it is a dipole."""
        return self.waist_nm is not None

    @model_validator(mode="after")
    def _one_kind(self) -> BeamTable:
        given = [k for k in (*_GAUSSIAN, *_DIPOLE) if getattr(self, k) is not None]
        own = _GAUSSIAN if "waist_nm" in given else _DIPOLE
        if not {"waist_nm", "position"} & set(given) or any(k not in own for k in given):
            raise ValueError(
                "a beam is either {waist_nm = 400, focus = [0, 0, 0]}, a focused Gaussian one, or "
                "{position = [0, 0, 60], moment = [0, 0, 1]}, the light of a point dipole"
            )
        if own is _DIPOLE:
            if self.moment is None:
                raise ValueError("a dipole needs its moment as well, such as [0, 0, 1]")
            if self.position == (self.reference or (0.0, 0.0, 0.0)):
                raise ValueError(
                    "the field of the dipole is infinite where it sits, so the intensity there "
                    "can be no unit; give the place whose intensity is to be 1 as reference"
                )
        return self
