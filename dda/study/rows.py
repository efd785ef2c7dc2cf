"""One row of results a point; its fields are the columns of ``spectrum.csv``."""

from __future__ import annotations

import math
from dataclasses import dataclass, field, fields, replace
from typing import Any


@dataclass(frozen=True)
class Row:
    """The answer at one point.

    Attributes
    ----------
    wavelength_nm : float
        In vacuum.
    c_ext_nm2, c_abs_nm2, c_sca_nm2 : float
        Cross sections; NaN when the point failed.
    q_ext, q_abs, q_sca : float
        Efficiencies: the cross sections over pi r_eff^2, r_eff the equal-volume radius.
    cells : int
        Number of cells that hold material.
    spacing_nm : float
        Edge of a cell.
    iterations : int
        Steps of the solver, added up over the polarizations solved.
    residual : float
        |b - A x| / |b| at the end, the largest of the polarizations solved.
    status : str
        "converged" only if the solver says so for every polarization and spacing; else what it
        says ("stalled", "limit"); "coarse" when a target was asked for and not reached; "failed"
        when there is no answer.
    c_ext_error_nm2, c_abs_error_nm2, c_sca_error_nm2 : float
        Estimated error of the cross sections: the parts that follow, added.
    c_ext_spacing_error_nm2, c_abs_spacing_error_nm2, c_sca_spacing_error_nm2 : float
        The part that comes from the cells.
    c_ext_solver_error_nm2, c_abs_solver_error_nm2, c_sca_solver_error_nm2 : float
        The part that comes from the solver.
    c_ext_orientation_error_nm2, c_abs_orientation_error_nm2, c_sca_orientation_error_nm2 : float
        The part that comes from averaging over orientations, the solver's of its columns
        included; zero for a fixed orientation.
    levels : int
        Spacings that were solved.
    balance : float
        (C_abs + C_sca - C_ext) / C_ext, each computed on its own: 0 when energy is conserved.
    seconds : float
        Wall time of this point.
    message : str
        Why a point has no answer or a doubtful one; empty when all is well.
    varied : dict
        The values of the study's varied keys, by dotted name: the first columns of the table.
    more : dict
        Further numbers the study asked for, by column: the last columns of the table.
    """

    wavelength_nm: float
    c_ext_nm2: float = math.nan
    c_abs_nm2: float = math.nan
    c_sca_nm2: float = math.nan
    q_ext: float = math.nan
    q_abs: float = math.nan
    q_sca: float = math.nan
    cells: int = 0
    spacing_nm: float = math.nan
    iterations: int = 0
    residual: float = math.nan
    status: str = "failed"
    c_ext_error_nm2: float = math.nan
    c_abs_error_nm2: float = math.nan
    c_sca_error_nm2: float = math.nan
    c_ext_spacing_error_nm2: float = math.nan
    c_abs_spacing_error_nm2: float = math.nan
    c_sca_spacing_error_nm2: float = math.nan
    c_ext_solver_error_nm2: float = math.nan
    c_abs_solver_error_nm2: float = math.nan
    c_sca_solver_error_nm2: float = math.nan
    c_ext_orientation_error_nm2: float = math.nan
    c_abs_orientation_error_nm2: float = math.nan
    c_sca_orientation_error_nm2: float = math.nan
    levels: int = 0
    balance: float = math.nan
    seconds: float = math.nan
    message: str = ""
    varied: dict[str, Any] = field(default_factory=dict)
    more: dict[str, float] = field(default_factory=dict)

    @property
    def converged(self) -> bool:
        """Whether the solver, and the target if there is one, was reached."""
        return self.status == "converged"

    @property
    def answered(self) -> bool:
        """Whether there are numbers, converged or not."""
        return math.isfinite(self.c_ext_nm2)


#: The columns that every table has.
COLUMNS = tuple(f.name for f in fields(Row) if f.name not in ("varied", "more"))


def as_preview(row: Row) -> Row:
    """Return a coarse answer as what stands for a point until its own answer is there."""
    return replace(row, status="preview") if row.status in ("converged", "coarse") else row
