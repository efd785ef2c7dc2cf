"""What holds whatever the particle: conservation, reciprocity, symmetry, the direct solution."""

from __future__ import annotations

import importlib.util
import time
from collections.abc import Callable, Iterator

import numpy as np

import dda
import shapes
from dda.lattice import solve_dense
from dda.response import scattering_amplitude
from validation.results import Table, group, number, verdict

COLUMNS = (
    "identity", "source", "ours", "reference", "error", "allowed", "cells", "time, s", "verdict",
)  # fmt: skip

HOST = 1.33
# Far below what any identity is held to, so that the identity is tested and not the solver.
TIGHT = 1e-9
Check = Callable[[int], Iterator[list[str]]]


@group("identities", rank=50)
def identities(quick: bool) -> Table:
    """Optical theorem, energy, reciprocity, rotations, handedness, scaling, direct solution."""
    text = """
The body without symmetry is an ellipsoid of silicon stuck to a sphere of gold, 560 nm, host 1.33,
solved to a residual of 1e-9. What is exact in the discrete method is held to 1e-6; what holds only
as the cells become small is held to 5 %: the gold sphere has 13 cells across.
"""
    rows = []
    for check in CHECKS[:: 3 if quick else 1]:
        begin = time.perf_counter()
        found = list(check(10 if quick else 20))
        seconds = (time.perf_counter() - begin) / len(found)
        rows += [[*row[:7], f"{seconds:.1f}", row[7]] for row in found]
    return Table("Identities", text, COLUMNS, rows)


def lopsided() -> shapes.Particle:
    """A body without any symmetry."""
    ball = shapes.sphere(36, "gold").parts
    egg = shapes.ellipsoid((44, 26, 20), "silicon").rotated(35, (1, 2, 3)).moved((22, 12, 9)).parts
    return shapes.Particle(egg + ball)


def solved(particle, cells, light=None, wavelength=560.0, tolerance=TIGHT, **options):
    """Polarization of a particle or of ready-made cells."""
    if not isinstance(particle, shapes.Cells):
        particle = shapes.voxelize(particle, cells=cells)
    system = dda.system(particle, wavelength, HOST, **options)
    return dda.solve(system, light or dda.plane_wave(), tolerance=tolerance, limit=4000)


def line(name, source, ours, reference, allowed, cells) -> list[str]:
    """A row; the error is the norm of the difference over the norm of the reference."""
    scale = np.linalg.norm(np.atleast_1d(reference))
    error = float(np.linalg.norm(np.atleast_1d(ours) - np.atleast_1d(reference)) / scale)
    shown = [_shown(v) for v in (ours, reference)]
    last = [f"{error:.1e}", f"{allowed:g}", f"{cells}", verdict(error <= allowed)]
    return [name, source, *shown, *last]


def _shown(values) -> str:
    values = np.atleast_1d(values)
    if np.iscomplexobj(values):
        return " / ".join(f"{v.real:.5g}{v.imag:+.5g}i" for v in values)
    return " / ".join(number(float(v), 6) for v in values)


def conservation(cells: int) -> Iterator[list[str]]:
    """Extinction three ways, absorption of a lossless body."""
    p = solved(lopsided(), cells)
    r, n = dda.cross_sections(p), p.system.n
    k = p.system.k
    forward = scattering_amplitude(p, p.light.direction[None])[0]
    c_ext = 4 * np.pi / k * float((p.light.polarization.conj() @ forward).imag)
    name = "C_ext from the forward amplitude"
    yield line(name, "optical theorem, Jackson (1999)", c_ext, r.c_ext, 1e-6, n)
    total = r.c_abs_cells + r.c_sca_far
    name = "C_abs (cells) + C_sca (far field)"
    yield line(name, "conservation of energy", total, r.c_ext, 1e-5, n)
    p = solved(shapes.sphere(120, "1.9"), cells)
    r = dda.cross_sections(p)
    name = "C_sca (far field) of a lossless sphere"
    yield line(name, "conservation of energy", r.c_sca_far, r.c_ext, 1e-5, p.system.n)


def reciprocity(cells: int) -> Iterator[list[str]]:
    """Source and detector exchanged."""
    body = shapes.voxelize(lopsided(), cells=cells)
    pairs = (
        (((0, 0, 1), (1, 0, 0)), ((1, 0, 0), (0, 1, 0))),
        (((0, 0, 1), (0, 1, 0)), ((1, 1, 1), (1, -1, 0))),
    )
    for (n1, e1), (n2, e2) in pairs:
        there, back = dda.plane_wave(n1, e1), dda.plane_wave(-np.array(n2), e2)
        a = solved(body, cells, there)
        b = solved(body, cells, back)
        to_detector = scattering_amplitude(a, -back.direction[None])[0] @ back.polarization
        to_source = scattering_amplitude(b, -there.direction[None])[0] @ there.polarization
        name = f"amplitude {n1} to {n2} as that of the way back"
        yield line(name, "reciprocity, Saxon (1955)", to_detector, to_source, 1e-6, body.n)


def rotations(cells: int) -> Iterator[list[str]]:
    """Particle and light turned together."""
    body = lopsided()
    light = dda.plane_wave((0, 0, 1), (1, 0, 0))
    first = _sections(solved(body, cells, light))
    for angle, axis, allowed, why in (
        (90, (0, 0, 1), 1e-6, "lattice onto itself"),
        (120, (1, 1, 1), 1e-6, "lattice onto itself"),
        (30, (1, -2, 2), 0.05, "lattice differs"),
    ):
        turn = rotation(angle, axis)
        wave = dda.plane_wave(turn @ light.direction, turn @ light.polarization)
        spacing = float(max(body.extent)) / cells
        turned_cells = shapes.voxelize(body.rotated(angle, axis), spacing=spacing)
        turned = solved(turned_cells, cells, wave, tolerance=TIGHT if allowed < 1e-3 else 1e-6)
        name = f"C_ext / C_abs, body and light turned by {angle}° about {axis}, {why}"
        yield line(name, "isotropy of space", _sections(turned), first, allowed, turned.system.n)


def rotation(angle: float, axis) -> np.ndarray:
    """Matrix of a turn by `angle` degrees about `axis` (Rodrigues' formula)."""
    x, y, z = np.asarray(axis, float) / np.linalg.norm(axis)
    cross = np.array([[0, -z, y], [z, 0, -x], [-y, x, 0]])
    angle = np.deg2rad(angle)
    return np.eye(3) + np.sin(angle) * cross + (1 - np.cos(angle)) * cross @ cross


def handedness(cells: int) -> Iterator[list[str]]:
    """Circular light on bodies with and without a mirror plane."""
    cube = shapes.voxelize(shapes.cube(edge=40, rounding=6, material="gold"), cells=cells)
    body = shapes.voxelize(lopsided(), cells=cells)

    def lit(what: shapes.Cells, polarization) -> np.ndarray:
        return _sections(solved(what, cells, dda.plane_wave((0, 0, 1), polarization)))

    name = "C_ext / C_abs of a cube, left as right circular light"
    yield line(name, "mirror symmetry", lit(cube, "left"), lit(cube, "right"), 1e-6, cube.n)
    circular = [lit(body, hand) for hand in ("left", "right")]
    linear = [lit(body, axis) for axis in ((1, 0, 0), (0, 1, 0))]
    name = "mean of left and right as mean of x and y"
    pair = np.mean(circular, axis=0), np.mean(linear, axis=0)
    yield line(name, "linearity", *pair, 1e-6, body.n)


def scaling(cells: int) -> Iterator[list[str]]:
    """Size and wavelength twice as large."""
    small, large = (
        _sections(solved(shapes.ellipsoid(size, "0.4+2.5j"), cells, wavelength=wavelength))
        for size, wavelength in (((40, 30, 30), 500), ((80, 60, 60), 1000))
    )
    name = "C/4 of twice the size at twice the wavelength, same index"
    source = "Maxwell's equations have no scale"
    yield line(name, source, large / 4, small, 1e-6, "same")


def direct(cells: int) -> Iterator[list[str]]:
    """The iteration against elimination on the dense matrix."""
    few = shapes.voxelize(lopsided(), cells=min(cells, 11))
    p = solved(few, cells)
    exact = solve_dense(p.system, p.light)
    source = "dense direct solution"
    yield line("C_ext / C_abs", source, _sections(p), _sections(exact), 1e-6, few.n)
    error = np.linalg.norm(p.p - exact.p) / np.linalg.norm(exact.p)
    last = [f"{error:.1e}", "1e-06", f"{few.n}", verdict(error <= 1e-6)]
    yield ["all dipoles", source, "-", "-", *last]


def number_types(cells: int) -> Iterator[list[str]]:
    """Single precision and the other FFT library give the same answers."""
    body = shapes.voxelize(lopsided(), cells=cells)
    double = _sections(solved(body, cells))
    single = _sections(solved(body, cells, tolerance=1e-5, precision="single"))
    name = "C_ext / C_abs in single precision, residual 1e-5"
    yield line(name, "double precision", single, double, 1e-4, body.n)
    if importlib.util.find_spec("ducc0"):
        one, other = (_sections(solved(body, cells, fft=fft)) for fft in ("scipy", "ducc0"))
        yield line("C_ext / C_abs with ducc0", "with scipy.fft", other, one, 1e-6, body.n)


def _sections(polarization) -> np.ndarray:
    response = dda.cross_sections(polarization)
    return np.array([response.c_ext, response.c_abs])


CHECKS: tuple[Check, ...] = (
    conservation, reciprocity, rotations, handedness, scaling, direct, number_types,
)  # fmt: skip
