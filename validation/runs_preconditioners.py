"""What could make the iteration shorter, on the same systems: preconditioners, modes, blocks."""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np

import dda
import shapes
from dda.lattice import System, relative_system
from dda.lattice.krylov import METHODS, Iteration, Subspace
from dda.lattice.sectors import sectors
from dda.response.settled import SectionsGoal
from validation.compare import percent, permittivity
from validation.preconditioners import (
    block_cocg,
    circulant,
    coarse_grid,
    deflation,
    slow_modes,
)
from validation.results import Table, group

CASES = (("gold", 80.0, 785.0), ("silver", 40.0, 400.0), ("silver", 60.0, 450.0))
ACROSS = 12
LIMIT = 800
MODES = (10, 30)
APART = 5.0
BLOCK_RESIDUAL = 1e-3


@group("preconditioners", rank=91)
def preconditioners(quick: bool) -> Table:
    """Every Krylov method with every preconditioner, deflation of slow modes, and blocks."""
    text = f"""
Spheres of {ACROSS} cells across, host 1.33, light along z, without mirror sectors. Products until
C_ext and C_abs have settled to 1e-3 (at most {LIMIT} steps; "limit" and "stalled" are no answers).
"Setting up" is the time and the products before the first step. Preconditioners: circulant (the
inverse for a body of the mean polarizability that fills the padded box, by FFT); coarse grid (block
diagonal plus the exact solution for cubes of 2³ cells). Slow modes: harmonic Ritz vectors of the
system {APART:g} nm away, deflated; finding them takes 120 products more there. The last rows of a
case: two polarizations in a block and alone, to a residual of {BLOCK_RESIDUAL:g}.
"""
    rows: list[list[str]] = []
    for material, diameter, wavelength in CASES[:1] if quick else CASES:
        case = f"{material}, {diameter:g} nm, {wavelength:g} nm"
        cells = shapes.voxelize(shapes.sphere(diameter, material), cells=8 if quick else ACROSS)
        system, near = (
            relative_system(cells, w, 1.33, [permittivity(material, w) / 1.33**2])
            for w in (wavelength, wavelength + APART)
        )
        first = 0.0
        ways: tuple[tuple[str, Callable[[System], Callable | None], int], ...] = (
            ("block diagonal", lambda s: s.precondition, 0),
            ("none", lambda s: None, 0),
            ("circulant", circulant, 0),
            ("coarse grid", coarse_grid, 3 * len(np.unique(system.index // 2, axis=0))),
        )
        for name, build, products in ways:
            begin = time.perf_counter()
            preconditioner = build(system)
            setup = f"{time.perf_counter() - begin:.1f} s, {products}"
            for method in METHODS:
                found, c_ext = _solved(system, method, preconditioner)
                first = first or c_ext
                rows.append([case, method, name, setup, *found, percent(c_ext / first - 1)])
        b = dda.plane_wave().field(near.positions, near.k).ravel().astype(complex)
        for count in MODES:
            begin = time.perf_counter()
            space = deflation(system, slow_modes(near, b, count))
            setup = f"{time.perf_counter() - begin:.1f} s, {count}"
            found, c_ext = _solved(system, "cocg", system.precondition, space)
            name = f"block diagonal, {count} slow modes"
            rows.append([case, "cocg", name, setup, *found, percent(c_ext / first - 1)])
        rows += [[case, *row, "-"] for row in _blocks(system)]
    columns = (
        "case", "method", "preconditioner", "setting up", "status", "products", "time, s",
        "C_ext against the first, %",
    )  # fmt: skip
    return Table("Preconditioners compared", text, columns, rows)


def _solved(system: System, method: str, preconditioner, space: Subspace | None = None):
    """Status, products and time until the cross sections have settled, and C_ext in nm^2."""
    light = dda.plane_wave()
    incident = light.field(system.positions, system.k)
    (whole,) = sectors(system, (False, False, False))
    watch = SectionsGoal(system, 1e-3).watch(whole, incident, None)
    watch.by_residual = method == "cocg"
    rules = Iteration(tolerance=1e-6, limit=LIMIT, subspace=space, monitor=watch)
    begin = time.perf_counter()
    found = METHODS[method](system, whole.fold(incident), preconditioner, rules)
    seconds = time.perf_counter() - begin
    reached = found.status in ("converged", "stopped")
    watch.look(found.iterations, found.x, found.residual)
    status = "settled" if reached else found.status
    return [status, f"{found.products}", f"{seconds:.1f}"], float(watch.values[-1][0])


def _blocks(system: System) -> list[list[str]]:
    """Two polarizations together and one after the other."""
    lights = [dda.plane_wave((0, 0, 1), p) for p in ((1, 0, 0), (1, 1, 0))]
    b = np.stack([light.field(system.positions, system.k).ravel() for light in lights])
    b = b.astype(complex)
    rules = Iteration(tolerance=BLOCK_RESIDUAL, limit=2 * LIMIT)
    begin = time.perf_counter()
    alone = [METHODS["cocg"](system, v, system.precondition, rules) for v in b]
    middle = time.perf_counter()
    _, steps = block_cocg(system, b, BLOCK_RESIDUAL, 2 * LIMIT)
    end = time.perf_counter()
    status = "converged" if all(r.status == "converged" for r in alone) else "limit"
    both = "converged" if steps < 2 * LIMIT else "limit"
    name = "block diagonal, two polarizations"
    return [
        ["cocg, one by one", name, "-", status, f"{sum(r.products for r in alone)}",
         f"{middle - begin:.1f}"],
        ["cocg, in a block", name, "-", both, f"{2 * steps}", f"{end - middle:.1f}"],
    ]  # fmt: skip
