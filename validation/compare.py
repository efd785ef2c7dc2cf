"""One solved particle against one reference, as a row of a table."""

from __future__ import annotations

import time
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

import dda
import shapes
from dda.materials import find
from validation.results import number, verdict

COLUMNS = (
    "case",
    "source",
    "ours, nm²",
    "reference, nm²",
    "error, %",
    "allowed, %",
    "cells (across)",
    "products",
    "time, s",
    "verdict",
)


@dataclass(frozen=True)
class Run:
    """A solved particle.

    Attributes
    ----------
    response : dda.CrossSections
    polarization : dda.Polarization
    across : float
        Cells across the largest extent of the particle.
    seconds : float
        Voxelization to cross sections.
    """

    response: dda.CrossSections
    polarization: dda.Polarization
    across: float
    seconds: float

    @property
    def products(self) -> str:
        """Products with the interaction matrix, and how the solver ended if not well."""
        p = self.polarization
        return f"{p.products}" if p.status == "converged" else f"{p.products} ({p.status})"


def run(
    particle: shapes.Particle,
    wavelength: float,
    cells: float,
    host: float = 1.33,
    light: dda.PlaneWave | None = None,
    tolerance: float = 1e-4,
    limit: int | None = None,
    **options,
) -> Run:
    """Voxelize, solve and take cross sections with the program's defaults.

    Parameters
    ----------
    particle : shapes.Particle
    wavelength : float
        In vacuum, nm.
    cells : float
        Across the largest extent.
    host : float
        Refractive index.
    light : dda.PlaneWave, optional
        Along z, polarized along x by default.
    tolerance : float
        Of the solver.
    limit : int, optional
        Of the solver's iterations, where comparison alone is not worth a long wait.
    **options
        Of `dda.system`.
    """
    begin = time.perf_counter()
    light = light or dda.plane_wave()
    system = dda.system(
        shapes.voxelize(particle, cells=cells), wavelength, host, light=light, **options
    )
    patience = {} if limit is None else {"limit": limit}
    polarization = dda.solve(system, light, tolerance=tolerance, **patience)
    response = dda.cross_sections(polarization)
    return Run(response, polarization, cells, time.perf_counter() - begin)


def row(
    case: str,
    source: str,
    solved: Run,
    reference: Sequence[float],
    allowed: float,
) -> list[str]:
    """A row of a table with the columns `COLUMNS`.

    Parameters
    ----------
    case, source : str
    solved : Run
    reference : (C_ext,) or (C_ext, C_abs)
        nm^2; C_abs is left out where nothing absorbs.
    allowed : float
        Largest relative error of each.
    """
    ours = (solved.response.c_ext, solved.response.c_abs)[: len(reference)]
    error = [a / b - 1 for a, b in zip(ours, reference, strict=True)]
    return [
        case,
        source,
        " / ".join(number(v) for v in ours),
        " / ".join(number(v) for v in reference),
        " / ".join(percent(v) for v in error),
        f"{100 * allowed:g}",
        f"{solved.polarization.system.n} ({solved.across:g})",
        solved.products,
        f"{solved.seconds:.1f}",
        verdict(max(abs(v) for v in error) <= allowed),
    ]


def percent(value: float) -> str:
    """A relative error in per cent with its sign.

    >>> percent(-0.00123), percent(0.123)
    ('-0.12', '+12.3')
    """
    return f"{100 * value:+.2f}" if abs(value) < 0.0995 else f"{100 * value:+.1f}"


def absorbs(*specs: str | float, wavelength: float) -> bool:
    """Whether any of the materials absorbs."""
    return any(permittivity(spec, wavelength).imag > 0 for spec in specs)


def permittivity(spec: str | float, wavelength: float) -> complex:
    """Absolute permittivity of a material at a wavelength in nm."""
    return complex(find(spec).permittivity(np.array([wavelength]))[0])
