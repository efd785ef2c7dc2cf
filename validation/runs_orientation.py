"""T-matrices and orientation averages: against exact solutions, and one way against the other."""

from __future__ import annotations

import time
from collections.abc import Sequence

import numpy as np

import dda
import shapes
from dda.response.averages import OrientationAverage, orientation_average
from dda.response.directions import quadrature_average
from dda.response.pair import pair
from dda.response.tmatrix import TMatrix
from dda.response.tmatrix_solve import t_matrix
from dda.response.vector_waves import wave_labels
from validation.compare import COLUMNS, percent, permittivity
from validation.ebcm import spheroid
from validation.gans import ellipsoid
from validation.mie import sphere
from validation.results import Table, group, number, verdict
from validation.two_spheres import two_spheres

HOST = 1.33
MIE = "Mie coefficients, Bohren & Huffman (1983)"
EBCM = "null-field method, Waterman (1971)"
GANS = "Gans (1912), averaged"
PAIR = "multiple scattering, Bruning & Lo (1971), Xu (1995)"
OBLIQUE = ((0.6, 0.0, 0.8), (0.8, 0.0, -0.6))


@group("t-matrix", rank=50)
def t_matrices(quick: bool) -> Table:
    """T-matrices of dipole systems and averages from them, against exact solutions."""
    text = """
T-matrices made from the dipole systems, host 1.33. Spheres: the mean diagonal element of a
multipole against its Mie coefficient, as real / imaginary part relative to the modulus. Spheroids
and pairs: C_ext / C_abs, averaged over orientations or at one oblique direction, against the
null-field method, the electrostatic limit and multiple scattering. In the pairs two single
T-matrices are combined by translation; the order is what the gap asks for. Unitarity and
reciprocity are the relative norms by which S S^H = 1 (lossless) and T = T' are missed; the latter
holds almost by construction where no symmetry is used, because T is made in a symmetric form.
"""
    rows: list[list[str]] = []
    rows += _spheres(quick) + _spheroids(quick) + _pairs(quick) + _identities(quick)
    return Table("T-matrices and orientation averages", text, COLUMNS, rows)


def _solved(particle, wavelength: float, cells: float, **options) -> tuple[TMatrix, float]:
    begin = time.perf_counter()
    system = dda.system(shapes.voxelize(particle, cells=cells), wavelength, HOST)
    return t_matrix(system, **options), time.perf_counter() - begin


def _row(case, source, ours, reference, errors, allowed, t: TMatrix, cells, seconds) -> list[str]:
    products = f"{t.products:g}" + ("" if t.status == "converged" else f" ({t.status})")
    return [
        case,
        source,
        " / ".join(number(v) for v in ours),
        " / ".join(number(v) for v in reference),
        " / ".join(percent(e) for e in errors),
        f"{100 * allowed:g}",
        f"({cells:g})",
        products,
        f"{seconds:.1f}",
        verdict(max(abs(e) for e in errors) <= allowed),
    ]


def _spheres(quick: bool) -> list[list[str]]:
    rows = []
    # material, diameter, wavelength, cells, highest order looked at, allowed
    cases = (
        ("gold", 80.0, 560.0, 24, ((1, 1, 0.01), (1, 2, 0.03), (0, 1, 0.05))),
        ("2.5", 200.0, 500.0, 24, ((1, 1, 0.01), (1, 2, 0.02), (0, 1, 0.03), (0, 2, 0.02))),
    )
    names = {(1, 1): "electric dipole", (1, 2): "electric quadrupole"}
    names |= {(0, 1): "magnetic dipole", (0, 2): "magnetic quadrupole"}
    for material, diameter, wavelength, cells, looks in cases[: 1 if quick else None]:
        exact = sphere(diameter, wavelength, permittivity(material, wavelength), HOST)
        cells = 12 if quick else cells
        t, seconds = _solved(
            shapes.sphere(diameter, material), wavelength, cells, order=2, residual=1e-5
        )
        kind, n, _ = wave_labels(2).T
        for i, order, allowed in looks:
            ours = -complex(np.diag(t.matrix)[(kind == i) & (n == order)].mean())
            reference = complex((exact.a if i else exact.b)[order])
            error = (ours - reference) / abs(reference)
            rows.append(
                _row(
                    f"{material} sphere, {diameter:g} nm, {wavelength:g} nm, {names[i, order]}",
                    MIE,
                    (ours.real, ours.imag),
                    (reference.real, reference.imag),
                    (error.real, error.imag),
                    3 * allowed if quick else allowed,
                    t,
                    cells,
                    seconds,
                )
            )
    return rows


def _spheroids(quick: bool) -> list[list[str]]:
    rows = []
    cases: Sequence[tuple] = (
        ("gold", (30.0, 30.0, 60.0), 580.0, 40),
        ("gold", (80.0, 80.0, 40.0), 600.0, 40),
        ("2.5", (150.0, 150.0, 250.0), 600.0, 32),
    )
    for material, axes, wavelength, cells in cases[: 1 if quick else None]:
        cells = 16 if quick else cells
        exact = spheroid(axes[0], axes[2], wavelength, permittivity(material, wavelength), HOST)
        t, seconds = _solved(shapes.ellipsoid(axes, material), wavelength, cells)
        average = orientation_average(t)
        kept = 2 if exact.orientation_average()[1] > 1e-6 * exact.orientation_average()[0] else 1
        name = f"{material} spheroid, {axes[0]:g} x {axes[2]:g} nm, {wavelength:g} nm"
        for what, ours, reference in (
            ("average", (average.c_ext, average.c_abs), exact.orientation_average()),
            ("oblique", t.cross_sections(*OBLIQUE), exact.cross_sections(*OBLIQUE)),
        ):
            errors = [a / b - 1 for a, b in zip(ours[:kept], reference[:kept], strict=True)]
            allowed = 0.05 if quick else 0.02
            rows.append(
                _row(
                    f"{name}, {what}",
                    EBCM,
                    ours[:kept],
                    reference[:kept],
                    errors,
                    allowed,
                    t,
                    cells,
                    seconds,
                )
            )
    # smaller than any real particle, because Gans leaves out retardation: 1.4 % at 6 x 12 nm
    axes, wavelength = (3.0, 3.0, 6.0), 560.0
    cells = 16 if quick else 40
    exact_small = ellipsoid(axes, wavelength, permittivity("gold", wavelength), HOST, damping=True)
    t, seconds = _solved(shapes.ellipsoid(axes), wavelength, cells)
    average = orientation_average(t)
    ours, reference = (average.c_ext, average.c_abs), exact_small.orientation_average()[:2]
    errors = [a / b - 1 for a, b in zip(ours, reference, strict=True)]
    rows.append(
        _row(
            "gold spheroid, 3 x 6 nm, 560 nm, average",
            GANS,
            ours,
            reference,
            errors,
            0.05 if quick else 0.02,
            t,
            cells,
            seconds,
        )
    )
    return rows


def _pairs(quick: bool) -> list[list[str]]:
    rows = []
    # diameter, gap, wavelength, cells across one sphere, order, allowed
    cases = (
        (40.0, 20.0, 560.0, 24, 5, 0.02),
        (40.0, 8.0, 560.0, 24, 7, 0.03),
        (40.0, 2.0, 560.0, 32, 12, 0.05),
    )
    for diameter, gap, wavelength, cells, order, allowed in cases[: 1 if quick else None]:
        cells = 12 if quick else cells
        eps = permittivity("gold", wavelength)
        begin = time.perf_counter()
        t, _ = _solved(shapes.sphere(diameter), wavelength, cells, order=order, residual=1e-3)
        both = pair(t, t, (diameter + gap, 0, 0))
        seconds = time.perf_counter() - begin
        for name, light in (
            ("E along", ((0, 0, 1), (1, 0, 0))),
            ("E across", ((0, 0, 1), (0, 1, 0))),
        ):
            exact = two_spheres(diameter, gap, wavelength, eps, HOST, *light).cross_sections()[:2]
            ours = both.cross_sections(*light)[:2]
            errors = [a / b - 1 for a, b in zip(ours, exact, strict=True)]
            rows.append(
                _row(
                    f"pair of gold spheres, {diameter:g} nm, gap {gap:g} nm, order {order}, {name}",
                    PAIR,
                    ours,
                    exact,
                    errors,
                    2 * allowed if quick else allowed,
                    t,
                    cells,
                    seconds,
                )
            )
    return rows


def _identities(quick: bool) -> list[list[str]]:
    rows = []
    cells = 10 if quick else 20
    clear = shapes.star(60, 6, 40, 20, 8, seed=3, material="2.0")
    t, seconds = _solved(clear, 500.0, cells, tolerance=1e-4)
    measures = [("lossless star, departure from unitarity", t.unitarity(), 1e-3, t, seconds)]
    t, seconds = _solved(shapes.star(30, 7, 22, 8, 3, seed=2), 560.0, cells, tolerance=1e-4)
    measures.append(("gold star, departure from reciprocity", t.reciprocity(), 1e-4, t, seconds))
    for case, value, allowed, t, seconds in measures:
        rows.append(_row(case, "identity", (value,), (0.0,), (value,), allowed, t, cells, seconds))
    return rows


BODIES = {
    "gold cube, 60 nm, rounding 6": lambda: shapes.cube(edge=60, rounding=6),
    "gold rod, 60 x 24 nm": lambda: shapes.rod(60, 24),
    "gold star, 7 spikes": lambda: shapes.star(30, 7, 22, 8, 3, seed=2),
    "gold helix, right": lambda: shapes.helix(40, 30, 1.5, 16),
    "gold helix, left": lambda: shapes.helix(40, 30, 1.5, 16, hand="left"),
}


@group("orientation", rank=51)
def two_ways(quick: bool) -> Table:
    """Averages from the T-matrix against averages over directions."""
    text = """
Gold particles in a host of 1.33 at 560 nm, averaged over orientations from the T-matrix and over
directions (nested Lebedev rules, symmetry used by both), each asked for 0.1 %. ± is the error each
states for itself, the spacing aside. CD is C_ext of left less that of right circular light. The
verdict: C_ext, C_abs and C_sca agree within the sum of the stated errors, CD within twice that.
Products are in units of one with all cells.
"""
    columns = (
        "particle",
        "way",
        "C_ext, nm²",
        "C_abs, nm²",
        "⟨cos⟩",
        "CD, nm²",
        "order or directions",
        "cells",
        "products",
        "verdict",
    )
    rows = []
    bodies = list(BODIES.items())
    for name, body in bodies[1:2] if quick else bodies:
        cells = shapes.voxelize(body(), cells=10 if quick else 20)
        system = dda.system(cells, 560.0, HOST)
        one = orientation_average(t_matrix(system))
        two = quadrature_average(system)
        for average in (one, two):
            rows.append(
                [
                    name,
                    average.way,
                    f"{number(average.c_ext, 6)} ± {number(average.c_ext_error, 2)}",
                    f"{number(average.c_abs, 6)} ± {number(average.c_abs_error, 2)}",
                    f"{average.asymmetry:.4f}",
                    _dichroism(average),
                    f"{average.order}",
                    f"{system.n}",
                    f"{average.products:g}",
                    verdict(_agree(one, two)),
                ]
            )
    return Table("Orientation averages, two ways", text, columns, rows)


def _dichroism(average: OrientationAverage) -> str:
    small = abs(average.cd_ext) < 1e-9 * average.c_ext
    return "0 to rounding" if small else number(average.cd_ext, 5)


def _agree(one: OrientationAverage, two: OrientationAverage) -> bool:
    def near(quantity: str, error: str, times: float = 1.0) -> bool:
        allowed = times * (getattr(one, error) + getattr(two, error))
        return abs(getattr(one, quantity) - getattr(two, quantity)) <= allowed

    return (
        all(near(q, f"{q}_error") for q in ("c_ext", "c_abs", "c_sca"))
        and near("cd_ext", "c_ext_error", 2)
        and near("cd_abs", "c_abs_error", 2)
    )
