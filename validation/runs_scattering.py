"""Scattered light by angle, radiation pressure, asymmetry, dichroism: against exact solutions."""

from __future__ import annotations

import time
from collections.abc import Iterator

import numpy as np

import dda
import shapes
from dda.response.mueller import mueller_matrix
from validation.compare import permittivity
from validation.ebcm import Spheroid, spheroid
from validation.mie import sphere
from validation.results import Table, group, number, verdict
from validation.vector_waves import far_field

HOST = 1.33
MIE = "Mie series, Bohren & Huffman (1983)"
EBCM = "null-field method, Waterman (1971), summed over directions"
SIGN = "mirror image"
COLUMNS = (
    "case", "quantity", "source", "ours", "reference", "difference", "allowed", "cells (across)",
    "time, s", "verdict",
)  # fmt: skip


@group("scattering", rank=52)
def scattering(quick: bool) -> Table:
    """Angular scattering, asymmetry, radiation pressure and dichroism against exact solutions."""
    text = """
Host 1.33. Spheres for one direction of light against Mie; a spheroid of size parameter 4.2
averaged over orientations: C_ext and the Mueller matrix, analytic from our T-matrix, against the
null-field method's amplitudes summed over 800 directions of its axis. Published tables of larger
spheroids are not among the references: none was at hand to be quoted with certainty. Differences
are relative for cross sections and absolute for ratios. Dichroism is that of C_ext, left less
right, for one direction and averaged.
"""
    rows: list[list[str]] = []
    checks = (_spheres, _hands) if quick else (_spheres, _spheroid, _hands)
    for check in checks:
        begin = time.perf_counter()
        found = list(check(12 if quick else 32))
        seconds = (time.perf_counter() - begin) / len(found)
        rows += [[*row[:8], f"{seconds:.1f}", row[8]] for row in found]
    return Table("Scattered light", text, COLUMNS, rows)


def _line(case, quantity, source, ours, reference, allowed, cells, ratio=False) -> list[str]:
    difference = ours - reference if ratio else ours / reference - 1
    shown = f"{difference:+.4f}" if ratio else f"{100 * difference:+.2f} %"
    limit = f"{allowed:g}" if ratio else f"{100 * allowed:g} %"
    return [
        case, quantity, source, number(ours), number(reference), shown, limit, f"{cells:g}",
        verdict(abs(difference) <= allowed),
    ]  # fmt: skip


def _spheres(cells: int) -> Iterator[list[str]]:
    # material, diameter, wavelength, allowed for the mean cosine
    cases = (("gold", 80.0, 560.0, 2e-4), ("2.5", 200.0, 500.0, 5e-3))
    times = 1 if cells > 20 else 10
    for material, diameter, wavelength, tight in cases:
        case = f"{material} sphere, {diameter:g} nm, {wavelength:g} nm"
        exact = sphere(diameter, wavelength, permittivity(material, wavelength), HOST)
        lattice = shapes.voxelize(shapes.sphere(diameter, material), cells=cells)
        both = dda.one_direction(dda.system(lattice, wavelength, HOST), (1, 2, 2))
        pressure = dda.radiation_pressure(both.first)
        g = float(pressure.asymmetry @ both.direction)
        yield _line(case, "⟨cos⟩", MIE, g, exact.asymmetry, tight * times, cells, ratio=True)
        reference = exact.c_ext - exact.asymmetry * exact.c_sca
        yield _line(
            case,
            "C_pr, nm²",
            MIE,
            float(pressure.c_pr @ both.direction),
            reference,
            0.01 * times,
            cells,
        )
        s1, s2 = exact.amplitudes(np.deg2rad([0, 90, 180]))
        intensity = (abs(s1) ** 2 + abs(s2) ** 2) / 2
        m = both.mueller_matrices([0, 90, 180], azimuth=20)
        for i, name in enumerate(("forward", "90°", "backward")):
            ours = m[i, 0, 0] / both.k**2
            yield _line(
                case, f"dC_sca/dΩ {name}, nm²/sr", MIE, ours, intensity[i] / exact.k**2,
                0.02 * times, cells,
            )  # fmt: skip
        linear = (abs(s1[1]) ** 2 - abs(s2[1]) ** 2) / (2 * intensity[1])
        ours = -m[1, 0, 1] / m[1, 0, 0]
        yield _line(case, "-S12/S11 at 90°", MIE, ours, linear, 3e-3 * times, cells, ratio=True)


def _spheroid(cells: int) -> Iterator[list[str]]:
    axes, wavelength, material = (400.0, 600.0), 600.0, "1.6"
    case = f"spheroid of index 1.6, {axes[0]:g} x {axes[1]:g} nm, {wavelength:g} nm, averaged"
    across = 3 * cells // 2
    exact = spheroid(*axes, wavelength, permittivity(material, wavelength), HOST)
    body = shapes.ellipsoid((axes[0], axes[0], axes[1]), material)
    t = dda.t_matrix(dda.system(shapes.voxelize(body, cells=across), wavelength, HOST))
    average = dda.orientation_average(t)
    yield _line(
        case, "C_ext, nm²", EBCM, average.c_ext, exact.orientation_average()[0], 0.01, across
    )
    angles = np.array([0.0, 60, 120, 180])
    ours, reference = dda.averaged_mueller_matrix(t, angles), _averaged(exact, angles)
    for i, angle in enumerate(angles):
        a, b = ours[i], reference[i]
        yield _line(
            case, f"S11 at {angle:g}°", EBCM, a[0, 0], b[0, 0], 0.02 if angle < 90 else 0.05, across
        )
        for row, column in ((0, 1), (2, 2), (3, 3), (2, 3)) if angle in (60, 120) else ((3, 3),):
            name = f"S{row + 1}{column + 1}/S11 at {angle:g}°"
            one, two = (float(x[row, column] / x[0, 0]) for x in (a, b))
            yield _line(case, name, EBCM, one, two, 0.005, across, ratio=True)


def _averaged(exact: Spheroid, angles: np.ndarray) -> np.ndarray:
    """Mueller matrices (a, 4, 4) of the null-field method, summed over directions of the axis."""
    cosine, weight = np.polynomial.legendre.leggauss(20)
    turns = 2 * np.pi * np.arange(40) / 40
    theta = np.deg2rad(angles)
    zero = np.zeros_like(theta)
    light, x, y = np.array([0, 0, 1.0]), np.array([1.0, 0, 0]), np.array([0, 1.0, 0])
    out = np.stack([np.sin(theta), zero, np.cos(theta)], axis=1)
    parallel = np.stack([np.cos(theta), zero, -np.sin(theta)], axis=1)
    total = np.zeros((len(angles), 4, 4))
    for c, w in zip(cosine, weight, strict=True):
        s = np.sqrt(1 - c**2)
        for turn in turns:
            # rows: the body's axes in the laboratory, the last one the axis of the spheroid
            body = np.array(
                [
                    [c * np.cos(turn), c * np.sin(turn), -s],
                    [-np.sin(turn), np.cos(turn), 0],
                    [s * np.cos(turn), s * np.sin(turn), c],
                ]
            )
            # incident perpendicular is -y: perpendicular x parallel = direction
            fields = [
                sum(
                    far_field(exact.order, m, out @ body.T, f)
                    for m, f in exact.scattered(body @ light, body @ e).items()
                )
                @ body
                for e in (x, -y)
            ]
            j = np.array([[np.sum(f * e, axis=1) for f in fields] for e in (parallel, -y[None])])
            total += w / 2 / len(turns) * mueller_matrix(-1j * np.moveaxis(j, -1, 0))
    return total


def _hands(cells: int) -> Iterator[list[str]]:
    across = 2 * cells // 3
    found = {}
    for hand in ("right", "left"):
        body = shapes.helix(40, 30, 1.5, 16, hand=hand)
        system = dda.system(shapes.voxelize(body, cells=across), 560.0, HOST)
        found[hand] = {
            "along its axis": dda.one_direction(system, (0, 0, 1)).dichroism()[0],
            "averaged": dda.orientation_average(dda.t_matrix(system)).cd_ext,
        }
    for name in found["right"]:
        yield _line(
            f"gold helix, left, 560 nm, {name}", "dichroism, nm²", SIGN, found["left"][name],
            -found["right"][name], 0.01, across,
        )  # fmt: skip
    system = dda.system(shapes.voxelize(shapes.cube(60, 6), cells=across), 560.0, HOST)
    both = dda.one_direction(system, (0, 0, 1))
    average = dda.orientation_average(dda.t_matrix(system))
    for name, value in (
        ("along an axis", both.dichroism()[0] / both.cross_sections("left").c_ext),
        ("averaged", average.cd_ext / average.c_ext),
    ):
        case = f"gold cube, 60 nm, 560 nm, {name}"
        yield _line(case, "dichroism over C_ext", SIGN, value, 0.0, 1e-9, across, ratio=True)
