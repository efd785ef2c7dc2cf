"""A study as a list of points: each a complete set of inputs of one solve."""

from __future__ import annotations

import json
from dataclasses import dataclass, field, replace
from functools import cached_property
from pathlib import Path
from typing import Any

from dda.study.reader import Study
from dda.study.schema import (
    AccuracyTable,
    HostTable,
    LimitsTable,
    ParticleTable,
    SolverTable,
    StudyTables,
)

Polarization = str | tuple[complex, complex, complex]


@dataclass(frozen=True)
class Point:
    """Everything that determines one row of the spectrum.

    Attributes
    ----------
    tables : StudyTables
        The study as it holds for this point: varied keys have their value, the wavelengths of
        ``[light]`` are those of the whole study.
    wavelength : float
        In vacuum, nm.
    folder : Path
        Where relative paths start.
    varied : dict
        The value of each varied key, by its dotted name.
    """

    tables: StudyTables
    wavelength: float
    folder: Path
    varied: dict[str, Any] = field(default_factory=dict)

    @property
    def particle(self) -> ParticleTable:
        """``[particle]``."""
        return self.tables.particle

    @property
    def host(self) -> HostTable:
        """``[host]``."""
        return self.tables.host

    @property
    def accuracy(self) -> AccuracyTable:
        """``[accuracy]``."""
        return self.tables.accuracy

    @property
    def solver(self) -> SolverTable:
        """``[solver]``."""
        return self.tables.solver

    @property
    def limits(self) -> LimitsTable:
        """``[limits]``."""
        return self.tables.limits

    @property
    def materials(self) -> dict[str, dict[str, Any]]:
        """The user's own materials, as written."""
        return self.tables.materials

    @property
    def direction(self) -> tuple[float, float, float]:
        """Where the light goes, of any length."""
        return self.tables.light.direction

    @property
    def polarization(self) -> Polarization:
        """A vector, or "left", "right", "unpolarized"."""
        return self.tables.light.polarization

    @property
    def averaged(self) -> bool:
        """Whether the particle tumbles; direction and polarization then mean nothing."""
        return self.tables.light.orientation == "average"

    def at(self, wavelength: float, **tables: Any) -> Point:
        """Return the same point at another wavelength, nm, perhaps with other tables."""
        return replace(self, wavelength=wavelength, tables=self.tables.model_copy(update=tables))

    @cached_property
    def geometry_key(self) -> str:
        """A text that is the same for points that share their cells."""
        tables = {
            "particle": self.particle.model_dump(exclude_none=True),
            "accuracy": self.accuracy.model_dump(exclude_none=True),
            "folder": str(self.folder),
        }
        return json.dumps(tables, sort_keys=True, default=str)


def points_of(study: Study) -> tuple[Point, ...]:
    """Return the points of a study: its combinations of varied keys, each sorted by wavelength.

    Raises
    ------
    InputError
        A combination does not make a study.
    """
    return tuple(
        Point(tables, wavelength, study.folder, varied)
        for varied, tables in study.variants()
        for wavelength in sorted(tables.light.values())
    )
