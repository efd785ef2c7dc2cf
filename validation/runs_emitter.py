"""Emitters, SERS factors and heat of spheres against exact solutions."""

from __future__ import annotations

import numpy as np

import dda
import shapes
from dda.design.emitter import emitter_rates, refined_rates
from dda.design.heat import absorbed_power
from dda.design.sers import sers_on_surface, stokes_wavelength
from dda.response.surface_points import cover_surface
from validation.compare import percent, permittivity
from validation.dipole_sphere import dipole_near_sphere
from validation.results import Table, group, number, verdict
from validation.runs_near_field import e2, mie, solve

HOST = 1.33


@group("emitter", rank=43)
def emitters(quick: bool) -> Table:
    """Decay rates of a dipole over a sphere against the exact series."""
    text = """
Total and radiative decay rate of a point dipole over a sphere, over that in the host, and its
quantum yield; 17 and 24 cells across, and "extrapolated" the program's value of both: straight
lines in d² of what is radiated and in d³ of what is absorbed, or the finer value where the two
differ by more than half. Close to a metal absorption happens in waves too short for the cells: the
error is large there, and the bar says so. Allowed: errors within the bar, 2 % of the radiative
rate, and 10 % of the total one at 8 cells of the finer spacing or more.
"""
    columns = (
        "sphere, dipole", "source", "height, nm (cells)", "total: reference", "error 17 / 24, %",
        "extrapolated, % ± bar", "radiative: reference", "error 17 / 24, %",
        "extrapolated, % ± bar", "yield: reference / ours", "verdict",
    )  # fmt: skip
    rows = []
    cases = (
        ("gold", 40, 550),
        ("gold", 80, 600),
        ("silver", 60, 500),
        ("silicon", 100, 600),
    )
    for material, diameter, wavelength in cases[:: 2 if quick else 1]:
        eps = permittivity(material, wavelength)
        systems = [
            dda.system(
                shapes.voxelize(shapes.sphere(diameter, material), cells=n), wavelength, HOST
            )
            for n in (17, 24)
        ]
        spacings = [s.cells.spacing for s in systems]
        for cells in (8,) if quick else (3, 4, 6, 8, 12):
            height = cells * spacings[-1]
            exact = dipole_near_sphere(diameter, height, wavelength, eps, HOST)
            place = (0, 0, diameter / 2 + height)
            for name, moment, true in (
                ("radial", (0, 0, 1), exact[0]),
                ("tangential", (1, 0, 0), exact[1]),
            ):
                found = [emitter_rates(s, place, moment) for s in systems]
                best, bar = refined_rates(found, spacings)
                total = [r.total / true.total - 1 for r in (*found, best)]
                radiative = [r.radiative / true.radiative - 1 for r in (*found, best)]
                bars = bar.total / true.total, bar.radiative / true.radiative
                good = (cells < 8 or abs(total[2]) < 0.1) and abs(radiative[2]) < 0.02
                good &= abs(total[2]) <= bars[0] and abs(radiative[2]) <= bars[1]
                rows.append(
                    [
                        f"{material}, {diameter} nm, {wavelength} nm, {name}",
                        "Ruppin (1982), Kim, Leung & George (1988)",
                        f"{height:.1f} ({cells})",
                        number(true.total),
                        f"{percent(total[0])} / {percent(total[1])}",
                        f"{percent(total[2])} ± {100 * bars[0]:.1f}",
                        number(true.radiative),
                        f"{percent(radiative[0])} / {percent(radiative[1])}",
                        f"{percent(radiative[2])} ± {100 * bars[1]:.1f}",
                        f"{true.quantum_yield:.4f} / {best.quantum_yield():.4f}",
                        verdict(good),
                    ]
                )
    return Table("Emitters over spheres", text, columns, rows)


@group("sers", rank=44)
def surfaces(quick: bool) -> Table:
    """Surface means of the SERS factor, and absorbed power, of gold spheres against Mie."""
    text = """
|E(laser)|² |E(Stokes)|² on the surface at a height over gold spheres, Raman shift 1000 cm⁻¹, host
1.33, 24 cells across: mean over the surface and largest value. Allowed: 10 % (it is the fourth
power of a field). Last columns: absorbed power over the cells against C_abs of Mie, allowed 2 %.
"""
    columns = (
        "sphere, laser", "source", "height, nm (cells)", "mean: reference", "error, %",
        "largest: reference", "error, %", "allowed, %", "absorbed power, error %", "verdict",
    )  # fmt: skip
    rows = []
    for diameter, laser in ((40, 540), (60, 560), (80, 580))[:: 2 if quick else 1]:
        wavelengths = (laser, stokes_wavelength(laser, 1000))
        solved = [solve("gold", diameter, w, 16 if quick else 24) for w in wavelengths]
        exact = [mie("gold", diameter, w) for w in wavelengths]
        particle = shapes.sphere(diameter, "gold")
        spacing = solved[0].system.cells.spacing
        heat = absorbed_power(solved[0], 1e9).total / (exact[0].c_abs * 1e9 * 1e-18) - 1
        for cells in (0.5, 1.0, 2.0):
            shell = cover_surface(particle, spacing, cells * spacing)
            found = sers_on_surface(
                solved[0], solved[1], shell.points, shell.areas, particle=particle
            )
            true = np.prod([e2(s.fields(shell.points)[0]) for s in exact], axis=0)
            mean = found.mean / np.average(true, weights=shell.areas) - 1
            largest = found.maximum / true.max() - 1
            good = max(abs(mean), abs(largest)) < 0.1 and abs(heat) < 0.02
            rows.append(
                [
                    f"gold, {diameter} nm, {laser} nm",
                    "Mie series, Bohren & Huffman (1983)",
                    f"{cells * spacing:.2f} ({cells:g})",
                    number(np.average(true, weights=shell.areas)),
                    percent(mean),
                    number(true.max()),
                    percent(largest),
                    "10",
                    percent(heat),
                    verdict(good),
                ]
            )
    return Table("SERS and heat of spheres", text, columns, rows)
