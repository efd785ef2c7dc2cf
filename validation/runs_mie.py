"""Spheres against the Mie series: over size and wavelength, and as the cells become finer."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

import dda
import shapes
from dda.accuracy import Level, combined
from validation.compare import COLUMNS, absorbs, percent, permittivity, row, run
from validation.levels import settled
from validation.mie import sphere
from validation.results import Table, group, verdict

SOURCE = "Mie series, Bohren & Huffman (1983)"

# material, diameter nm, wavelength nm, index of the host, cells across
SPHERES = (
    ("silica", 100, 500, 1.0, 24),
    ("polystyrene", 200, 450, 1.33, 24),
    ("polystyrene", 500, 500, 1.33, 24),
    ("1.33", 500, 500, 1.0, 32),
    ("1.33", 1000, 500, 1.0, 48),
    ("titania-rutile", 150, 550, 1.33, 24),
    ("titania-rutile", 250, 550, 1.33, 32),
    ("silicon", 60, 450, 1.33, 24),
    ("silicon", 120, 600, 1.0, 32),
    ("gold", 10, 520, 1.33, 24),
    ("gold", 40, 400, 1.33, 24),
    ("gold", 40, 530, 1.33, 24),
    ("gold", 60, 550, 1.0, 24),
    ("gold", 80, 560, 1.33, 24),
    ("gold", 100, 480, 1.33, 24),
    ("gold", 100, 580, 1.33, 24),
    ("gold", 150, 650, 1.33, 32),
    ("copper", 50, 500, 1.33, 24),
    ("copper", 80, 590, 1.33, 24),
    ("platinum", 50, 450, 1.33, 24),
    ("titanium-nitride", 60, 600, 1.33, 24),
    ("silver", 100, 350, 1.33, 24),
    ("silver", 40, 450, 1.33, 24),
    ("silver", 100, 500, 1.33, 24),
    ("gold", 80, 785, 1.33, 24),
)


@group("mie", rank=10)
def over_size_and_wavelength(quick: bool) -> Table:
    """Dielectric and metal spheres over size and wavelength against the Mie series."""
    text = """
C_ext / C_abs of spheres with the program's defaults (filtered coupled dipoles, window of 2.2
cells). Allowed: 2 %, which is what a user who takes 24 to 32 cells without asking for an accuracy
may count on.
"""
    rows = []
    for material, diameter, wavelength, host, across in SPHERES[:: 8 if quick else 1]:
        solved = run(shapes.sphere(diameter, material), wavelength, across, host)
        rows.append(
            row(
                f"{named(material)}, {diameter} nm, {wavelength} nm, host {host:g}",
                SOURCE,
                solved,
                mie(material, diameter, wavelength, host),
                0.02,
            )
        )
    return Table("Spheres over size and wavelength", text, COLUMNS, rows)


# Material, diameter, wavelength, largest error allowed in % by cells across, and of C_ext and C_abs
# after extrapolation.
REFINED = (
    ("gold", 40, 530, {16: 3, 20: 2, 24: 1.5, 28: 1, 32: 1}, (0.1, 0.1)),
    ("gold", 80, 600, {16: 3, 20: 2, 24: 1.5, 28: 1, 32: 1}, (0.3, 1.0)),
    ("gold", 80, 785, {16: 4, 20: 3, 24: 2, 28: 2, 32: 1.5}, (0.3, 1.0)),
    ("silver", 40, 400, {16: 3, 20: 2, 24: 2, 28: 2, 32: 2}, (0.3, 1.0)),
    ("2.5", 160, 500, {16: 3, 20: 2, 24: 1.5, 28: 1, 32: 1}, (0.3,)),
)
# What a first trial of the method gave, C_ext / C_abs in %.
TRIAL = {
    ("gold", 40, 530): {
        16: "+1.22 / +1.16", 20: "+0.76 / +0.72", 24: "+0.52 / +0.50", 29: "+0.35 / +0.33",
        0: "0.00 / 0.00", "whole 32": "+0.5 / +1.1",
        "cell 16": "-0.1 / +0.1", "cell 24": "0.0 / +0.1", "cell 32": "0.0 / +0.1",
    },
    ("gold", 80, 600): {
        16: "+2.29 / +1.76", 20: "+1.42 / +1.06", 24: "+1.01 / +0.76", 29: "+0.66 / +0.51",
        0: "+0.02 / 0.00", "whole 32": "+16 / +43",
        "cell 16": "+5.7 / +12", "cell 24": "+3.3 / +6.4", "cell 32": "+2.6 / +4.5",
    },
    ("gold", 80, 785): {
        16: "+2.7 / +3.5", 20: "+1.7 / +2.2", 24: "+1.2 / +1.5", 33: "+0.9 / +1.5", 0: "about 0",
        "whole 32": "+60 / +209",
        "cell 16": "+7.9 / +31", "cell 24": "+3.3 / +12", "cell 32": "+2.3 / +10",
    },
    ("silver", 40, 400): {
        16: "+0.08 / +1.1", 20: "+0.2 / +0.8", 24: "-0.2 / +0.7", 29: "+0.1 / +1.6",
        "whole 32": "-42 / -5",
        "cell 16": "-9.5 / +6", "cell 24": "-7.2 / +6", "cell 32": "-5.7 / +3",
    },
    ("2.5", 160, 500): {
        16: "+0.29", 20: "+0.07", 24: "+0.01", 29: "+0.02", 0: "-0.1",
        "cell 16": "-1.0", "cell 32": "-0.3",
    },
}  # fmt: skip


@group("refinement", rank=11)
def refinement(quick: bool) -> Table:
    """Spheres with finer and finer cells, and the staircase beside them."""
    text = """
The same sphere with 16 to 32 cells across, host 1.33, each solved until its cross sections settle
to 1e-4. The surface is the default (window), the fraction of each cell alone (cell), or none
(whole, the plain staircase). The latter two jump about from one spacing to the next; they stand
here for comparison, without a verdict. "d → 0" is the program's extrapolation of the window's rows,
with its error bar. The trial is what a first version of the method gave, for orientation. Products
are those of all mirror sectors together, of which each costs an eighth of a product with the whole.
"""
    columns = (
        "sphere", "source", "surface", "cells across", "error C_ext / C_abs, %", "trial, %",
        "allowed, %", "products", "time, s", "verdict",
    )  # fmt: skip
    rows = []
    for material, diameter, wavelength, allowed, at_zero in REFINED[:: 4 if quick else 1]:
        head = [f"{named(material)}, {diameter} nm, {wavelength} nm", SOURCE]
        reference = mie(material, diameter, wavelength, 1.33)
        trial = TRIAL[material, diameter, wavelength]
        particle = shapes.sphere(diameter, material)
        beside = [("whole", 32), ("cell", 16), ("cell", 24), ("cell", 32)]
        for surface, across in beside[: 0 if quick else None]:
            solved = run(particle, wavelength, across, surface=surface, limit=400)
            errors = errors_of(solved.response, reference)
            known = trial.get(f"{surface} {across}", "-")
            cost = [solved.products, f"{solved.seconds:.1f}"]
            rows.append([*head, surface, f"{across}", _two(errors), known, "-", *cost, "-"])
        rungs: list[Level] = []
        for across in list(allowed)[: 3 if quick else None]:
            done, rung = settled(particle, wavelength, across, tolerance=1e-4, limit=2500)
            rungs.append(rung)
            errors = errors_of(done.sections, reference)
            products = f"{rung.products}" + f" ({rung.status})" * (rung.status != "converged")
            rows.append(
                [*head, "window", f"{across}", _two(errors), trial.get(across, "-"),
                 f"{allowed[across]:g}", products, f"{rung.seconds:.1f}",
                 _within(errors, [allowed[across]] * 2)]
            )  # fmt: skip
        found = combined(rungs, float(diameter), "ladder")
        errors = [v / e - 1 for v, e in zip(found.sections, reference, strict=False)]
        bars = [v / e for v, e in zip(found.error, reference, strict=False)]
        shown = _two(errors) + " ± " + " / ".join(f"{100 * v:.2g}" for v in bars)
        limits = " / ".join(f"{v:g}" for v in at_zero)
        rows.append(
            [*head, "window", "d → 0", shown, trial.get(0, "-"), limits, "-", "-",
             _within(errors, at_zero)]
        )  # fmt: skip
    return Table("Spheres with finer cells", text, columns, rows)


def _within(errors: Sequence[float], allowed: Sequence[float]) -> str:
    return verdict(all(100 * abs(e) <= a for e, a in zip(errors, allowed, strict=False)))


def _two(errors: Sequence[float]) -> str:
    return " / ".join(percent(e) for e in errors)


def errors_of(sections: dda.CrossSections, reference: tuple[float, ...]) -> list[float]:
    """Relative errors of C_ext and, if the reference has it, C_abs."""
    ours = (sections.c_ext, sections.c_abs)
    return [a / b - 1 for a, b in zip(ours, reference, strict=False)]


def extrapolated(across: list[int], values: np.ndarray) -> np.ndarray:
    """Least-squares straight line in d^2 through values (steps, q), at d = 0, (q,)."""
    square = 1 / np.asarray(across, float) ** 2
    return np.polynomial.polynomial.polyfit(square, values, 1)[0]


def mie(material: str, diameter: float, wavelength: float, host: float) -> tuple[float, ...]:
    """C_ext and, if the sphere absorbs, C_abs in nm^2."""
    solved = sphere(diameter, wavelength, permittivity(material, wavelength), host)
    if absorbs(material, wavelength=wavelength):
        return solved.c_ext, solved.c_abs
    return (solved.c_ext,)


def named(material: str) -> str:
    """A material's name; a number is an index."""
    return f"n = {material}" if material[0].isdigit() else material
