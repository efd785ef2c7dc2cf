"""What the tables of a study file are made of: strict numbers, vectors, strict tables."""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field

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
