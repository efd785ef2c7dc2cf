"""What the tables of a study file are made of: strict numbers, vectors, strict tables."""

from __future__ import annotations

import math
from typing import Annotated, Any, ClassVar

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, model_validator

#: Numbers are strict: "60" and true are not lengths.
Finite = Annotated[float, Field(strict=True, allow_inf_nan=False)]
Positive = Annotated[float, Field(strict=True, gt=0, allow_inf_nan=False)]


def _three(value: Any) -> Any:
    if not isinstance(value, list | tuple) or len(value) != 3:
        raise ValueError("should be three numbers, [x, y, z]")
    return value


Vector = Annotated[tuple[Finite, Finite, Finite], BeforeValidator(_three)]


class Table(BaseModel):
    """A table of the study file: frozen, and strict about its keys."""

    model_config = ConfigDict(extra="forbid", frozen=True, populate_by_name=True)


class Range(Table):
    """``{from = 450, to = 850, step = 10}``: evenly spaced numbers, both ends included.

    A class of its own for each kind of number states how many there may be, and their name.
    """

    most: ClassVar[int] = 1_000_000
    things: ClassVar[str] = "values"

    start: Finite = Field(alias="from")
    stop: Finite = Field(alias="to")
    step: Positive

    @model_validator(mode="after")
    def _ordered(self) -> Range:
        if self.stop < self.start:
            raise ValueError(f"from = {self.start:g} is above to = {self.stop:g}")
        if (self.stop - self.start) / self.step >= self.most:
            raise ValueError(f"step = {self.step:g} makes more than {self.most} {self.things}")
        return self

    def values(self) -> tuple[float, ...]:
        """Return the numbers; the end belongs to them when the steps reach it."""
        count = math.floor((self.stop - self.start) / self.step + 1e-9) + 1
        return tuple(round(self.start + i * self.step, 9) for i in range(count))
