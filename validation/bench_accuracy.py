"""Time to an accuracy: the program's way against the textbook's, and how time grows with cells."""

from __future__ import annotations

import time

import numpy as np

import dda
import shapes
from dda.lattice import relative_system
from dda.lattice.krylov import Iteration, cocg
from dda.lattice.workers import available_threads
from validation.bench_product import WholeGrid
from validation.compare import permittivity
from validation.levels import settled
from validation.measure import Figure, bench
from validation.mie import sphere

DIAMETER, WAVELENGTH, HOST = 80.0, 600.0, 1.33
ACCURACY = 0.03
DOUBLED = (12, 24, 48, 96)
RESIDUAL, MOST_STEPS, MOST_SECONDS = 1e-4, 2000, 240.0


@bench("accuracy")
def time_to_accuracy(cells: int) -> list[Figure]:
    """Time to 3 % on C_ext of a gold sphere against the textbook way."""
    exact = sphere(DIAMETER, WAVELENGTH, permittivity("gold", WAVELENGTH), HOST).c_ext
    ball = shapes.sphere(DIAMETER, "gold")
    settled(ball, WAVELENGTH, 8, HOST)  # compiles
    ours = error = np.inf
    used = 0
    for across in (8, *DOUBLED):
        begin = time.perf_counter()
        _, rung = settled(ball, WAVELENGTH, across, HOST)
        spent = time.perf_counter() - begin
        ours = spent if used == 0 else ours + spent
        used, error = across, abs(rung.sections[0] / exact - 1)
        if error < ACCURACY:
            break
    label = "gold sphere 80 nm, 600 nm, C_ext to 3 %: "
    figures = [
        Figure(f"{label}ours, error with {used} cells across", 100 * error, "%", most=3.0),
        Figure(f"{label}ours, all levels", ours, "s"),
    ]
    textbook, steps, reached = 0.0, 0, False
    for across in DOUBLED:
        begin = time.perf_counter()
        value, steps, residual = plain_way(ball, across, MOST_SECONDS - textbook)
        textbook += time.perf_counter() - begin
        off = abs(value / exact - 1)
        figures.append(
            Figure(f"{label}textbook, error, {across} across, {steps} steps", 100 * off, "%")
        )
        figures.append(Figure(f"{label}textbook, residual there", residual))
        reached = off < ACCURACY and residual <= RESIDUAL
        if reached or textbook > MOST_SECONDS:
            break
    end = "" if reached else " (NOT REACHED: at least)"
    figures.append(Figure(f"{label}textbook, all levels{end}", textbook, "s"))
    figures.append(Figure(f"{label}textbook / ours{end}", textbook / ours, "x", least=100))
    return figures


def plain_way(particle: shapes.Particle, across: int, patience: float) -> tuple[float, int, float]:
    """Staircase, LDR, unpreconditioned COCG, whole padded grid: C_ext, steps, residual."""
    begin = time.perf_counter()
    light = dda.plane_wave()
    eps = permittivity("gold", WAVELENGTH) / HOST**2
    system = relative_system(
        shapes.voxelize(particle, cells=across), WAVELENGTH, HOST, np.array([eps]),
        surface="whole", polarizability="ldr", light=light,
    )  # fmt: skip
    shape = system.cells.shape
    product = WholeGrid(shape, system.table, available_threads())
    box = np.zeros((*shape, 3), complex)
    place = tuple(system.index.T)

    class Operator:
        shape = system.shape
        dtype = system.dtype

        @staticmethod
        def matvec(v: np.ndarray) -> np.ndarray:
            p = v.reshape(-1, 3)
            box[place] = p
            own = system.alpha_inverse.apply(p, np.empty_like(p))
            return (own - product(box).reshape(*shape, 3)[place]).ravel()

    def late(step: int, x: np.ndarray, residual: float) -> bool:
        return time.perf_counter() - begin > patience

    b = light.field(system.positions, system.k)
    rules = Iteration(tolerance=RESIDUAL, limit=MOST_STEPS, monitor=late)
    found = cocg(Operator, b.ravel(), rules=rules)
    c_ext = 4 * np.pi * system.k * float(np.vdot(b.ravel(), found.x).imag)
    return c_ext, found.iterations, found.residual


@bench("point")
def seconds_a_point(cells: int) -> list[Figure]:
    """Seconds and products per point of a spectrum as the cells grow."""
    figures = []
    for across in sorted({max(8, round(cells * r)) for r in (0.25, 0.375, 0.5, 0.75, 1.0)}):
        done, rung = settled(shapes.sphere(DIAMETER, "gold"), WAVELENGTH, across, HOST)
        name = f"gold sphere 80 nm, 600 nm, {across} across, {rung.cells} cells"
        figures.append(Figure(f"{name}: time", rung.seconds, "s"))
        figures.append(Figure(f"{name}: products of sectors", done.polarization.products))
    return figures
