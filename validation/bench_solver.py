"""The solver: what neighbouring wavelengths and mirrors save."""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence

import numpy as np

import dda
import shapes
from dda.lattice import Polarization, System
from dda.response.settled import settle
from validation.measure import Figure, bench

SPECTRUM = np.linspace(500, 800, 60)
CELLS_OF_SPECTRUM = 20
KNOWN = 5

Solve = Callable[[System, Sequence[np.ndarray]], Polarization]


@bench("recycling")
def recycling(cells: int) -> list[Figure]:
    """Products with G for a spectrum of 60 wavelengths, with and without neighbouring solutions."""
    cube = shapes.voxelize(
        shapes.cube(edge=60, rounding=8, material="gold"), cells=CELLS_OF_SPECTRUM
    )
    light = dda.plane_wave()

    def plain(system: System, known: Sequence[np.ndarray]) -> Polarization:
        return dda.solve(system, light, tolerance=1e-4)

    def settling(system: System, known: Sequence[np.ndarray]) -> Polarization:
        return settle(system, light, previous=known).polarization

    along = list(range(len(SPECTRUM)))
    residual, _ = sweep(cube, plain, along, 0)
    alone, reference = sweep(cube, settling, along, 0)
    ahead, one_way = sweep(cube, settling, along, KNOWN)
    between, both_ways = sweep(cube, settling, coarse_then_fine(len(SPECTRUM)), KNOWN)
    n, name = len(SPECTRUM), f"gold cube, {CELLS_OF_SPECTRUM} cells, {len(SPECTRUM)} wavelengths: "
    change = max(np.max(np.abs(v / reference - 1)) for v in (one_way, both_ways))
    return [
        Figure(f"{name}to a residual of 1e-4, products a point", residual / n),
        Figure(f"{name}until settled to 1e-3, products a point", alone / n),
        Figure(f"{name}with {KNOWN} solutions, one way, products a point", ahead / n),
        Figure(f"{name}with {KNOWN} solutions, coarse then fine", between / n),
        Figure(f"{name}without / with, one way", alone / ahead, "x"),
        Figure(f"{name}without / with, coarse then fine", alone / between, "x", least=2.5),
        Figure(f"{name}residual of 1e-4 / with, coarse then fine", residual / between, "x"),
        Figure(f"{name}largest change of C_ext, C_abs", 100 * change, "%", most=1.0),
    ]


def sweep(
    cells: shapes.Cells, solve: Solve, order: Sequence[int], known: int
) -> tuple[int, np.ndarray]:
    """Products over a spectrum, and C_ext and C_abs (wavelengths, 2), with nearest solutions."""
    done: dict[int, np.ndarray] = {}
    values = np.empty((len(SPECTRUM), 2))
    products = 0
    for i in order:
        nearest = sorted(done, key=lambda j: (abs(j - i), j))[:known]
        system = dda.system(cells, SPECTRUM[i], "water")
        found = solve(system, [done[j] for j in nearest])
        done[i] = found.p
        products += found.products
        sections = dda.cross_sections(found)
        values[i] = sections.c_ext, sections.c_abs
    return products, values


def coarse_then_fine(n: int) -> list[int]:
    """Every fourth and the last first, then those in between.

    >>> coarse_then_fine(7)
    [0, 4, 6, 2, 1, 5, 3]
    """
    out = [*range(0, n, 4)]
    if (n - 1) % 4:
        out.append(n - 1)
    for rest in (2, 1, 3):
        out += [i for i in range(rest, n, 4) if i not in out]
    return out


@bench("mirrors")
def mirrors(cells: int) -> list[Figure]:
    """Time to solution with and without mirror sectors, light along an axis."""
    # the window's outermost cells make the box two cells larger
    cube = shapes.voxelize(shapes.cube(edge=60, rounding=8, material="gold"), cells=cells - 2)
    light = dda.plane_wave()
    system = dda.system(cube, 560.0, "water")
    ways = {"with": None, "without": (False, False, False)}
    seconds = dict.fromkeys(ways, 0.0)
    values = {}
    for turn in range(3):
        for name, planes in ways.items():
            begin = time.perf_counter()
            found = dda.solve(system, light, tolerance=1e-3, mirrors=planes)
            if turn:
                seconds[name] += time.perf_counter() - begin
            values[name] = dda.cross_sections(found).c_ext
    label = f"gold cube in {cube.shape[0]}^3, light along z: "
    off = abs(values["with"] / values["without"] - 1)
    return [
        Figure(
            f"{label}without mirrors / with", seconds["without"] / seconds["with"], "x", least=3
        ),
        Figure(f"{label}C_ext differs by", 100 * off, "%", most=0.1),
    ]
