"""Krylov methods and preconditioners on the same systems."""

from __future__ import annotations

import time
from dataclasses import dataclass

import numpy as np

import dda
import shapes
from dda.lattice import System, relative_system
from dda.lattice.krylov import METHODS, Iteration
from dda.lattice.sectors import Sector, sectors
from dda.response.settled import SectionsGoal
from validation.compare import permittivity
from validation.results import Table, group

_CASES = (
    ("gold", 80.0, 600.0),
    ("gold", 80.0, 785.0),
    ("silver", 40.0, 400.0),
    ("silver", 60.0, 450.0),
)
_LIMIT = 1500


@dataclass(frozen=True)
class _Run:
    products: int
    seconds: float
    c_ext: float
    status: str


@group("solvers", rank=90)
def solvers(quick: bool) -> Table:
    """Krylov methods with and without the block-diagonal preconditioner."""
    rows = []
    for material, diameter, wavelength in _CASES[:1] if quick else _CASES:
        cells = shapes.voxelize(shapes.sphere(diameter, material), cells=10 if quick else 20)
        system = relative_system(
            cells, wavelength, 1.33, [permittivity(material, wavelength) / 1.33**2]
        )
        first = None
        for preconditioned in (True, False):
            for method in METHODS:
                run = _run(system, method, preconditioned)
                first = first or run
                rows.append(
                    [
                        f"{material}, {diameter:g} nm, {wavelength:g} nm",
                        method,
                        "block diagonal" if preconditioned else "none",
                        run.status,
                        str(run.products),
                        f"{run.seconds:.1f}",
                        f"{100 * (run.c_ext / first.c_ext - 1):+.2f}",
                    ]
                )
    return Table(
        "Solvers compared",
        "Products within mirror sectors until C_ext and C_abs have settled to 1e-3 "
        f"(at most {_LIMIT} steps a sector); light along z, spheres of 20 cells across. GMRES is "
        "looked at when it restarts, every 80 steps. The last column compares with the first row "
        "of each case: where a method reached the limit it is no answer.",
        ("case", "method", "preconditioner", "status", "products", "time, s", "C_ext against "
         "the first, %"),
        rows,
    )  # fmt: skip


def _run(system: System, method: str, preconditioned: bool) -> _Run:
    light = dda.plane_wave()
    incident = light.field(system.positions, system.k)
    goal = SectionsGoal(system, 1e-3)
    begin, products, c_ext, statuses = time.perf_counter(), 0, 0.0, []
    for sector in sectors(system):
        b = sector.fold(incident)
        if np.linalg.norm(b) < 1e-9 * np.linalg.norm(incident):
            continue
        watch = goal.watch(sector, incident, None)
        watch.by_residual = method == "cocg"
        result = METHODS[method](
            sector,
            b,
            sector.precondition if preconditioned else None,
            Iteration(tolerance=1e-6, limit=_LIMIT, monitor=watch),
        )
        watch.look(result.iterations, result.x, result.residual)
        goal.add(watch)
        products += result.products
        c_ext += _extinction(sector, incident, result.x)
        statuses.append(result.status)
    missed = [status for status in statuses if status not in ("converged", "stopped")]
    return _Run(products, time.perf_counter() - begin, c_ext, max(missed) if missed else "settled")


def _extinction(sector: Sector, incident: np.ndarray, x: np.ndarray) -> float:
    k = sector.system.k
    return float(4 * np.pi * k * np.dot(sector.fold(incident.conj()), x).imag)
