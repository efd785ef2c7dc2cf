"""From what a user writes for a material to the material."""

from collections.abc import Mapping
from dataclasses import replace
from numbers import Number
from pathlib import Path
from typing import Any

import numpy as np

from dda.errors import InputError
from dda.materials.database import from_page
from dda.materials.material import Material
from dda.materials.models import Constant
from dda.materials.names import from_short_name, unknown_name
from dda.materials.table import from_table

_TABLE_SUFFIXES = (".csv", ".txt", ".dat")

Spec = str | float | complex | Path | Mapping[str, Any] | Material
"""What stands for a material: see `find`."""


def find(spec: Spec, base_dir: str | Path | None = None, extrapolate: bool = False) -> Material:
    """The material that `spec` stands for.

    Parameters
    ----------
    spec : one of
        - a short name: ``"gold"``, ``"water"``, ``"Au"``; see `dda.materials.SHORT_NAMES`;
        - a page of the data set: ``"main/Au/Olmon-ev"``;
        - a CSV file: ``"film.csv"``, relative to `base_dir`; see `dda.materials.table`;
        - a number: the refractive index, complex with k >= 0 if need be;
        - a table: ``{"index": 1.5}``, ``{"eps": [-10, 1]}``, ``{"table": "film.csv"}``,
          ``{"page": "main/Au/Johnson"}``, ``{"material": "gold", "extrapolate": True}``, or
          ``{"model": "drude", ...}``; see `dda.materials.study_table`;
        - a Material, which is returned.
    base_dir : where relative paths of tables start; default the working directory.
    extrapolate : outside its range, hold the material's n and k at the nearer end.

    Raises
    ------
    InputError
        The spec means nothing; the message names what is near it and how to list what there is.

    Examples
    --------
    >>> find("gold").permittivity([659.5]).round(1)
    array([-13.6+1.j])
    >>> find({"index": 1.5}).index([500.0])
    array([1.5+0.j])
    """
    material = _found(spec, base_dir, extrapolate)
    return material.extrapolated() if extrapolate else material


def constant_index(index: complex) -> Material:
    """Material of one refractive index n + i k at all wavelengths.

    >>> constant_index(1.33).name
    'n = 1.33'
    """
    index = complex(index)
    if not np.isfinite(index) or index.real < 0 or index.imag < 0 or index == 0:
        raise InputError(
            f"refractive index {index:g}: n and k must be finite and 0 or more, and not both 0 "
            "(absorption means k > 0)"
        )
    shown = f"{index.real:g}" if index.imag == 0 else f"{index.real:g} + {index.imag:g} i"
    return Material(f"n = {shown}", Constant(index**2), "a constant of the user")


def _found(spec: Spec, base_dir: str | Path | None, extrapolate: bool) -> Material:
    if isinstance(spec, Material):
        return spec
    if isinstance(spec, Mapping):
        from dda.materials.study_table import from_study_table

        return from_study_table(spec, base_dir, extrapolate)
    if isinstance(spec, Path):
        return from_table(spec, base_dir)
    if isinstance(spec, str):
        return _from_text(spec.strip(), base_dir)
    if isinstance(spec, Number) and not isinstance(spec, bool):
        return constant_index(complex(spec))  # type: ignore[call-overload]
    raise InputError(
        f"a material cannot be {spec!r}; write a name, a page, a CSV file, a refractive index or "
        "a table such as {index = 1.5}"
    )


def _from_text(text: str, base_dir: str | Path | None) -> Material:
    material = from_short_name(text)
    if material is not None:
        return material
    if text.lower().endswith(_TABLE_SUFFIXES):
        return replace(from_table(text, base_dir), name=text)
    try:
        return constant_index(complex(text))
    except ValueError as error:
        if isinstance(error, InputError):
            raise
    if text.count("/") >= 2:
        return from_page(text)
    raise unknown_name(text)
