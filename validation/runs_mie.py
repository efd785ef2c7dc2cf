"""Spheres against the Mie series: over size and wavelength, and as the cells become finer."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

import shapes
from validation.compare import COLUMNS, Run, absorbs, percent, permittivity, row, run
from validation.mie import sphere
from validation.results import Table, group, number, verdict

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


# Material, diameter, wavelength, and by cells across the largest error allowed, in %; 0 stands for
# the straight line in d^2.
REFINED = (
    ("gold", 40, 530, {16: 3, 20: 2, 24: 1.5, 29: 1, 0: 0.3}),
    ("gold", 80, 600, {16: 3, 20: 2, 24: 1.5, 29: 1, 0: 0.3}),
    ("gold", 80, 785, {16: 4, 20: 3, 24: 2, 29: 2, 33: 1.5, 0: 1}),
    ("silver", 40, 400, {16: 3, 20: 2, 24: 2, 29: 2, 0: 1}),
    ("2.5", 160, 500, {16: 3, 20: 2, 24: 1.5, 29: 1, 0: 0.3}),
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
The same sphere with 16 to 33 cells across, host 1.33. The surface is the default (window), the
fraction of each cell alone (cell), or none (whole, the plain staircase). The latter two jump about
from one spacing to the next; they stand here for comparison, without a verdict. "d → 0" is the
least-squares straight line in d² through the window's rows. The trial is what a first version of
the method gave, for orientation. Products are those of all mirror sectors together, of which each
costs an eighth of a product with the whole.
"""
    columns = (
        "sphere", "source", "surface", "cells across", "error C_ext / C_abs, %", "trial, %",
        "allowed, %", "products", "time, s", "verdict",
    )  # fmt: skip
    rows = []
    for material, diameter, wavelength, allowed in REFINED[:: 4 if quick else 1]:
        head = [f"{named(material)}, {diameter} nm, {wavelength} nm", SOURCE]
        reference = mie(material, diameter, wavelength, 1.33)
        trial = TRIAL[material, diameter, wavelength]
        particle = shapes.sphere(diameter, material)
        beside = [("whole", 32), ("cell", 16), ("cell", 24), ("cell", 32)]
        for surface, across in beside[: 0 if quick else None]:
            solved = run(particle, wavelength, across, surface=surface, limit=400)
            known = trial.get(f"{surface} {across}", "-")
            rows.append([*head, *_refined(solved, surface, reference, known, "-"), "-"])
        values = {}
        for across in sorted(set(allowed) - {0})[: 2 if quick else None]:
            solved = run(particle, wavelength, across)
            values[across] = errors_of(solved, reference)
            limit, known = allowed[across], trial.get(across, "-")
            rows.append([*head, *_refined(solved, "window", reference, known, f"{limit:g}")])
            rows[-1].append(_within(values[across], limit))
        at_zero = extrapolated(list(values), np.array(list(values.values())))
        cells = ["window", "d → 0", " / ".join(percent(e) for e in at_zero), trial.get(0, "-")]
        rows.append([*head, *cells, f"{allowed[0]:g}", "-", "-", _within(at_zero, allowed[0])])
    return Table("Spheres with finer cells", text, columns, rows)


def _within(errors: Sequence[float], allowed: float) -> str:
    return verdict(100 * max(abs(e) for e in errors) <= allowed)


def _refined(
    solved: Run, surface: str, reference: tuple[float, ...], trial: str, allowed: str
) -> list[str]:
    errors = " / ".join(percent(e) for e in errors_of(solved, reference))
    cost = [solved.products, f"{solved.seconds:.1f}"]
    return [surface, number(solved.across), errors, trial, allowed, *cost]


def errors_of(solved: Run, reference: tuple[float, ...]) -> list[float]:
    """Relative errors of C_ext and, if the reference has it, C_abs."""
    ours = (solved.response.c_ext, solved.response.c_abs)
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
