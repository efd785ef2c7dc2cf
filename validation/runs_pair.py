"""Pairs of spheres against multiple scattering."""

from __future__ import annotations

import dda
import shapes
from validation.compare import COLUMNS, absorbs, permittivity, row, run
from validation.results import Table, group
from validation.runs_mie import named
from validation.two_spheres import two_spheres

SOURCE = "multiple scattering, Bruning & Lo (1971), Xu (1995)"
ALONG, ACROSS, END_ON = ((0, 0, 1), (1, 0, 0)), ((0, 0, 1), (0, 1, 0)), ((1, 0, 0), (0, 1, 0))
NAMES = {ALONG: "E along the pair", ACROSS: "E across", END_ON: "light along the pair"}

# material, diameter nm, gap nm, wavelength nm, light, cells across the pair
PAIRS = (
    ("gold", 40, 8, 550, ALONG, 44),
    ("gold", 40, 8, 550, ACROSS, 44),
    ("gold", 40, 8, 550, END_ON, 44),
    ("gold", 40, 4, 570, ALONG, 63),
    ("gold", 40, 2, 590, ALONG, 82),
    ("gold", 80, 10, 600, ALONG, 68),
    ("silicon", 100, 10, 600, ALONG, 63),
    ("silicon", 100, 10, 600, END_ON, 63),
    ("silica", 200, 20, 500, ALONG, 42),
)


@group("pair", rank=40)
def pair_of_spheres(quick: bool) -> Table:
    """Two spheres with a gap, three directions of light, against multiple scattering."""
    text = """
Two equal spheres on the x axis, host 1.33. C_ext / C_abs. The gap holds 2 to 8 cells. Allowed: 5 %,
since the window (2.2 cells) is as wide as the narrowest gap; the near field in gaps has a group of
its own.
"""
    rows = []
    for material, diameter, gap, wavelength, light, across in PAIRS[-1:] if quick else PAIRS:
        eps = permittivity(material, wavelength)
        exact = two_spheres(
            diameter, gap, wavelength, eps, 1.33, direction=light[0], polarization=light[1]
        )
        reference = exact.c_ext, exact.c_abs
        particle = shapes.dimer(shapes.sphere(diameter, material), gap)
        wave = dda.plane_wave(*light)
        solved = run(particle, wavelength, 28 if quick else across, light=wave)
        cells_in_gap = gap * across / (2 * diameter + gap)
        case = (
            f"{named(material)}, {diameter} nm, gap {gap} nm ({cells_in_gap:.1f} cells), "
            f"{wavelength} nm, {NAMES[light]}"
        )
        kept = 2 if absorbs(material, wavelength=wavelength) else 1
        rows.append(row(case, SOURCE, solved, reference[:kept], 0.05))
    return Table("Pairs of spheres", text, COLUMNS, rows)
