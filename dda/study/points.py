"""A study as a list of points: each a complete set of inputs of one solve."""

from __future__ import annotations

import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from dda.study.reader import Study
from dda.study.schema import AccuracyTable, HostTable, LimitsTable, ParticleTable, SolverTable

Polarization = str | tuple[complex, complex, complex]


@dataclass(frozen=True)
class Point:
    """Everything that determines one row of the spectrum.

    Attributes
    ----------
    particle, host, accuracy, solver, limits
        The tables of the study that hold for this point.
    materials : dict
        The user's own materials, as written.
    wavelength : float
        In vacuum, nm.
    direction : (3,) tuple of float
        Where the light goes, of any length.
    polarization : (3,) tuple of complex, or "left", "right", "unpolarized"
    averaged : bool
        Whether the particle tumbles; direction and polarization then mean nothing.
    folder : Path
        Where relative paths start.
    """

    particle: ParticleTable
    host: HostTable
    accuracy: AccuracyTable
    solver: SolverTable
    limits: LimitsTable
    materials: dict[str, dict[str, Any]]
    wavelength: float
    direction: tuple[float, float, float]
    polarization: Polarization
    averaged: bool
    folder: Path

    @property
    def geometry_key(self) -> str:
        """A text that is the same for points that share their cells."""
        tables = {
            "particle": self.particle.model_dump(exclude_none=True),
            "accuracy": self.accuracy.model_dump(exclude_none=True),
            "folder": str(self.folder),
        }
        return json.dumps(tables, sort_keys=True, default=str)


def points_of(study: Study) -> tuple[Point, ...]:
    """Return the points of a study in the order in which they are computed: by wavelength."""
    tables = study.tables
    return tuple(
        Point(
            particle=tables.particle,
            host=tables.host,
            accuracy=tables.accuracy,
            solver=tables.solver,
            limits=tables.limits,
            materials=tables.materials,
            wavelength=wavelength,
            direction=tables.light.direction,
            polarization=tables.light.polarization,
            averaged=tables.light.orientation == "average",
            folder=study.folder,
        )
        for wavelength in sorted(tables.light.values())
    )
