"""``[near_field]``: where the near field is wanted, as the user writes it."""

from __future__ import annotations

import math
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BeforeValidator, Field, model_validator

from dda.study.fields import Finite, Positive, Table, Vector

#: Keys that a region needs, and those that it may have besides.
NEEDED = {
    "plane": ("normal", "size", "step"),
    "box": ("size", "step"),
    "line": ("start", "end", "step"),
    "surface": (),
    "points": (),
}
ALLOWED = {
    "plane": ("centre",),
    "box": ("centre",),
    "line": (),
    "surface": ("step",),
    "points": (),
}
_PLACING = ("normal", "size", "step", "centre", "start", "end")


def _wavelengths(value: Any) -> Any:
    items = value if isinstance(value, list | tuple) else [value]
    for item in items:
        number = isinstance(item, int | float) and not isinstance(item, bool)
        if item != "peak" and not (number and 0 < item < float("inf")):
            raise ValueError(
                f'{item!r} is no wavelength; give numbers in nm, or "peak" for the peak of the '
                "extinction, or a list of both"
            )
    if not items:
        raise ValueError("the list of wavelengths is empty")
    twice = [item for n, item in enumerate(items) if item in items[:n]]
    if twice:
        raise ValueError(f"the wavelength {twice[0]} is listed twice")
    return tuple(item if item == "peak" else float(item) for item in items)


def _size(value: Any) -> Any:
    edges = value if isinstance(value, list | tuple) else [value]
    numbers = [e for e in edges if isinstance(e, int | float) and not isinstance(e, bool)]
    if len(numbers) != len(edges) or not all(0 < e < float("inf") for e in numbers):
        raise ValueError("should be the edges of the region, lengths above zero in nm")
    return tuple(float(e) for e in numbers)


def _shift(value: float) -> float:
    if value > 5000:
        raise ValueError(f"{value:g} is no Raman shift; vibrations lie below 5000 (cm^-1)")
    return value


class SersTable(Table):
    """``[near_field.sers]``: a laser line and a Raman shift."""

    laser_nm: Positive
    shift_per_cm: Annotated[Positive, AfterValidator(_shift)]
    height_nm: Positive | None = None
    orientation: Literal["fixed", "average"] = "fixed"


def _axis(value: Any) -> Any:
    if value == "average":
        return value
    numbers = value if isinstance(value, list | tuple) else ()
    good = [c for c in numbers if isinstance(c, int | float) and not isinstance(c, bool)]
    if len(numbers) != 3 or len(good) != 3 or not any(good) or not all(map(math.isfinite, good)):
        raise ValueError(f'{value!r} is no orientation; give a vector [x, y, z] or "average"')
    return tuple(float(c) for c in value)


class EmitterTable(Table):
    """``[[near_field.emitters]]``: a dipole beside the particle, place from its centre.

    ``quantum_yield`` is that in the host alone; ``wavelength_nm`` that of the emitted light, those
    of ``[near_field]`` by default.
    """

    position: Vector
    orientation: Annotated[
        tuple[float, float, float] | Literal["average"], BeforeValidator(_axis)
    ] = "average"
    quantum_yield: Annotated[float, Field(strict=True, gt=0, le=1)] = 1.0
    wavelength_nm: Positive | None = None


def _several(value: Any) -> Any:
    if isinstance(value, dict):
        raise ValueError("each emitter is a table of its own: [[near_field.emitters]]")
    return value


class HeatTable(Table):
    """``[near_field] heat``: how strong the light is; at the focus of a beam, or its power."""

    intensity_w_per_cm2: Positive | None = None
    power_mw: Positive | None = None

    @model_validator(mode="after")
    def _one_of_two(self) -> HeatTable:
        if (self.intensity_w_per_cm2 is None) == (self.power_mw is None):
            raise ValueError(
                "give intensity_w_per_cm2 = 1000, or power_mw = 1 for a Gaussian beam, one of the "
                "two"
            )
        return self


class NearFieldTable(Table):
    """``[near_field]``: wavelengths, a region and how fine it is sampled.

    Lengths are in nm and start at the particle's centre; ``height`` is that over the particle's
    surface at which statistics are taken, a cell and a half by default.
    """

    wavelengths: Annotated[tuple[float | Literal["peak"], ...], BeforeValidator(_wavelengths)]
    region: Literal["plane", "box", "line", "surface"] | None = None
    points: Annotated[str, Field(min_length=1)] | None = None
    normal: Literal["x", "y", "z"] | None = None
    size: Annotated[tuple[float, ...], BeforeValidator(_size)] | None = None
    step: Positive | None = None
    centre: Vector | None = None
    start: Vector | None = None
    end: Vector | None = None
    height: Annotated[Finite, Field(ge=0)] | None = None
    threshold: Positive | None = None
    magnetic: Annotated[bool, Field(strict=True)] = False
    sers: SersTable | None = None
    emitters: Annotated[tuple[EmitterTable, ...], BeforeValidator(_several)] = ()
    heat: HeatTable | None = None

    @property
    def kind(self) -> str:
        """Which of "plane", "box", "line", "surface" (the default) and "points" is asked for."""
        return self.region or ("surface" if self.points is None else "points")

    @model_validator(mode="after")
    def _one_region(self) -> NearFieldTable:
        if self.region is not None and self.points is not None:
            raise ValueError(
                'give either region = "plane" ("box", "line", "surface") or points = "FILE.csv", '
                "one of the two"
            )
        kind = self.kind
        what = "points" if kind == "points" else f'region = "{kind}"'
        missing = [key for key in NEEDED[kind] if getattr(self, key) is None]
        if missing:
            raise ValueError(f"{what} needs {', '.join(missing)} as well")
        known = NEEDED[kind] + ALLOWED[kind]
        extra = [k for k in _PLACING if k not in known and getattr(self, k) is not None]
        if extra:
            keys = f"; it takes {', '.join(known)}" if known else ""
            raise ValueError(f"{', '.join(extra)}: not for {what}{keys}")
        self._check_shape(kind)
        return self

    def _check_shape(self, kind: str) -> None:
        edges = {"plane": 2, "box": 3}.get(kind)
        if edges is not None and len(self.size or ()) not in (1, edges):
            raise ValueError(f"size: a {kind} has {edges} edges, or one for all")
        if kind == "line" and self.start == self.end:
            raise ValueError("start and end are the same point")
