"""Core-shell particles against the series of the layered sphere."""

from __future__ import annotations

import shapes
from validation.coated import coated_sphere
from validation.compare import COLUMNS, absorbs, permittivity, row, run
from validation.results import Table, group
from validation.runs_mie import named

SOURCE = "layered sphere, Aden & Kerker (1951), Yang (2003)"

# core and shell, their outer diameters nm, wavelength nm, cells across
COATED = (
    ("silica", "gold", 40, 80, 620, 32),
    ("silica", "gold", 60, 100, 640, 40),
    ("silica", "gold", 80, 110, 700, 44),
    ("gold", "silica", 40, 80, 530, 32),
    ("gold", "silica", 50, 100, 550, 32),
    ("gold", "silicon", 50, 100, 600, 32),
    ("gold", "silver", 40, 60, 480, 32),
    ("silver", "gold", 30, 60, 530, 32),
    ("silicon", "silica", 80, 140, 500, 32),
    ("copper", "silica", 40, 80, 590, 32),
)


@group("core-shell", rank=30)
def core_shell(quick: bool) -> Table:
    """Coated spheres, metal and dielectric, against the exact series."""
    text = """
C_ext / C_abs, host 1.33. Allowed: 3 %, and 5 % for a shell of fewer than eight cells, whose two
surfaces lie only a few windows apart.
"""
    rows = []
    for core, shell, inner, outer, wavelength, across in COATED[3:4] if quick else COATED:
        eps = [permittivity(m, wavelength) for m in (core, shell)]
        exact = coated_sphere([inner, outer], wavelength, eps, 1.33)
        kept = 2 if absorbs(core, shell, wavelength=wavelength) else 1
        particle = shapes.core_shell(shapes.sphere(inner, core), (outer - inner) / 2, shell)
        solved = run(particle, wavelength, 20 if quick else across)
        in_shell = (outer - inner) / 2 / outer * across
        case = f"{named(core)} {inner} nm in {named(shell)} {outer} nm, {wavelength} nm"
        reference = (exact.c_ext, exact.c_abs)[:kept]
        rows.append(row(case, SOURCE, solved, reference, 0.03 if in_shell >= 8 else 0.05))
    return Table("Core-shell spheres", text, COLUMNS, rows)
