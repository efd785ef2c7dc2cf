"""What a point gives beside its cross sections: further columns, and arrays for its own file."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np


@dataclass(frozen=True, eq=False)
class Array:
    """An array of a point's file.

    Attributes
    ----------
    name : str
        Plain, may name groups: "t_matrix/values".
    values : ndarray
    unit : str
        "" for pure numbers.
    about : str
        What its axes and conventions are, for a reader without this program.
    """

    name: str
    values: np.ndarray
    unit: str
    about: str


@dataclass(frozen=True, eq=False)
class More:
    """Further answers of a point.

    Attributes
    ----------
    columns : dict
        Numbers for the point's row, by the names of their columns (the unit in the name).
    arrays : tuple of Array
        For the point's file.
    """

    columns: dict[str, float] = field(default_factory=dict)
    arrays: tuple[Array, ...] = ()


#: Of a study that asks for nothing else.
NOTHING_MORE = More()
