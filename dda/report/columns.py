"""What the columns of the table of results are called, measured in and mean."""

from __future__ import annotations

from collections.abc import Iterator

CONVENTIONS = "lengths in nm; wavelengths in vacuum; angles in degrees; time dependence exp(-i w t)"

# Endings of columns that name a unit, the longest first.
_UNITS = {
    "_per_cm": "cm^-1",
    "_nm2": "nm^2",
    "_nm3": "nm^3",
    "_cm2": "cm^2",
    "_um2": "um^2",
    "_nm": "nm",
    "_deg": "degree",
    "_kelvin": "K",
    "_percent": "%",
    "_seconds": "s",
}
_SECTIONS = {"ext": "extinction", "abs": "absorption", "sca": "scattering"}
_PARTS = {
    "error": "estimated error of the {}",
    "spacing_error": "error of the {} that comes from the cells",
    "solver_error": "error of the {} that comes from the solver",
    "orientation_error": "error of the {} that comes from averaging over orientations",
}
_MEANINGS = {
    "cells": ("1", "number of cells that hold material"),
    "spacing_nm": ("nm", "edge of a cell"),
    "iterations": ("1", "steps of the solver"),
    "residual": ("1", "relative residual of the linear system"),
    "levels": ("1", "number of spacings that were solved"),
    "balance": ("1", "(absorption + scattering - extinction) / extinction"),
    "seconds": ("s", "wall time"),
    "status": ("", "how the point ended; only converged ones are to be relied on"),
    "message": ("", "why there is no answer or a doubtful one"),
}


def plain_name(column: str) -> str:
    """Return a column's name without the unit.

    >>> plain_name("c_ext_error_nm2"), plain_name("seconds")
    ('c_ext_error', 'seconds')
    """
    unit = _ending(column)
    return column.removesuffix(unit) if unit else column


def attributes_of(column: str) -> dict[str, str]:
    """Return unit and meaning of a column, by the names that labelled arrays use.

    >>> attributes_of("c_sca_nm2")["long_name"]
    'scattering cross section'
    """
    for name, unit, meaning in _sections():
        if name == column:
            others = {"ancillary_variables": f"{plain_name(column)}_error status"}
            whole = column.count("_") == 2 and unit != "1"
            return {"units": unit, "long_name": meaning} | (others if whole else {})
    if column in _MEANINGS:
        unit, meaning = _MEANINGS[column]
        return ({"units": unit} if unit else {}) | {"long_name": meaning}
    name = plain_name(column)
    ending = _ending(column)
    return {"units": _UNITS[ending] if ending else "1", "long_name": name.replace("_", " ")}


def _sections() -> Iterator[tuple[str, str, str]]:
    for short, long in _SECTIONS.items():
        yield f"c_{short}_nm2", "nm^2", f"{long} cross section"
        yield f"q_{short}", "1", f"{long} efficiency, over pi r^2 of the sphere of equal volume"
        for part, meaning in _PARTS.items():
            yield f"c_{short}_{part}_nm2", "nm^2", meaning.format(f"{long} cross section")


def _ending(column: str) -> str | None:
    return next((e for e in _UNITS if column.endswith(e) and len(column) > len(e)), None)
