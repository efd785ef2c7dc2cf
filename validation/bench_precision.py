"""Precision of the products: what it costs in steps, and saves in time and memory."""

from __future__ import annotations

import time

import numpy as np

import dda
import shapes
from dda.lattice import System, relative_system
from validation.bench_product import LIBRARIES, box_system, multiplying
from validation.compare import permittivity
from validation.measure import Figure, bench, medians, random_dipoles

PRECISIONS = ("double", "mixed", "single")
RESIDUAL = 1e-6
# name, material or permittivity, diameter and wavelength in nm, host, cells across
CASES = (
    ("gold 40 nm, 530 nm", "gold", 40, 530, 1.33, 32),
    ("gold 80 nm, 785 nm", "gold", 80, 785, 1.33, 24),
    ("silver 40 nm, 400 nm", "silver", 40, 400, 1.33, 12),
    ("m = 1.5, 200 nm, 500 nm", 2.25, 200, 500, 1.0, 48),
)


@bench("precision")
def precision(cells: int) -> list[Figure]:
    """Double, mixed and single precision: a product, and solutions to a residual of 1e-6."""
    figures = []
    for library in LIBRARIES:
        double, single = (
            box_system(cells, fft=library, precision=name) for name in ("double", "single")
        )
        p = random_dipoles(double.n, complex)
        q = p.astype(np.complex64)
        seconds = medians({"double": multiplying(double, p), "single": multiplying(single, q)})
        name = f"{cells}^3 cells, {library}: product in double / single"
        figures.append(Figure(name, seconds["double"] / seconds["single"], "x"))
    for case in CASES:
        figures += solved(*case)
    return figures


def solved(name: str, material, diameter, wavelength, host: float, across: int) -> list[Figure]:
    """Products, times and errors of one case, the precisions taking turns."""
    body = shapes.voxelize(shapes.sphere(diameter, str(material)), cells=across)
    eps = permittivity(material, wavelength) if isinstance(material, str) else material
    systems = {
        precision: relative_system(
            body, wavelength, host, np.array([eps / host**2]), precision=precision
        )
        for precision in PRECISIONS
    }
    light = dda.plane_wave()
    times: dict[str, list[float]] = {precision: [] for precision in PRECISIONS}
    found = {}
    for _ in range(3):
        for precision, system in systems.items():
            begin = time.perf_counter()
            found[precision] = dda.solve(system, light, tolerance=RESIDUAL, limit=3000)
            times[precision].append(time.perf_counter() - begin)
    exact = dda.cross_sections(found["double"]).c_ext
    figures = []
    for precision in PRECISIONS:
        label = f"{name}, {precision}"
        off = abs(dda.cross_sections(found[precision]).c_ext / exact - 1)
        bound = None if precision == "single" else RESIDUAL
        figures += [
            Figure(f"{label}: products of sectors", found[precision].products),
            Figure(f"{label}: residual", found[precision].residual, "", most=RESIDUAL),
            Figure(f"{label}: kernel, a cell of the box", kernel_bytes(systems[precision]), "B"),
            Figure(f"{label}: double / this, time", min(times["double"]) / min(times[precision])),
            Figure(f"{label}: C_ext off double", off, "", most=bound),
        ]  # fmt: skip
    return figures


def kernel_bytes(system: System) -> float:
    """Bytes of the interaction's transform a cell of the box."""
    return system.convolution.kernel.spectrum.nbytes / float(np.prod(system.cells.shape))
