"""Near fields: spheres against Mie, a gap against two spheres, the ways that were tried."""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache

import numpy as np
from scipy.special import sici

import dda
import shapes
from dda.lattice.solution import Polarization
from dda.response.hot_spots import field_numbers
from dda.response.near_error import refined_field
from dda.response.near_field import fields_at
from dda.response.smeared import SmearedField
from dda.response.surface_points import cover_surface
from dda.response.two_sided import continued
from validation.compare import percent, permittivity
from validation.mie import sphere
from validation.results import Table, group, number, verdict
from validation.two_spheres import two_spheres

MIE = "Mie series, Bohren & Huffman (1983)"
HOST = 1.33

# material, diameter nm, wavelength nm
SPHERES = (
    ("gold", 40, 530),
    ("gold", 80, 600),
    ("silver", 60, 500),
    ("silver", 40, 420),
    ("silicon", 100, 600),
)
# height in cells of the finer spacing, largest error of |E|^2 allowed
HEIGHTS = ((0.5, None), (1, 0.10), (2, 0.05), (4, 0.05), (-1, None), (-2, 0.05), (-4, 0.05))
ACROSS = (24, 32)


@group("near-field", rank=40)
def spheres(quick: bool) -> Table:
    """|E|^2 of spheres against the Mie near field, outside and inside, with its error bar."""
    text = f"""
|E|² at 300 points all around a sphere at heights counted in cells of the finer spacing (negative:
inside), host {HOST}, from {ACROSS[0]} and {ACROSS[1]} cells across. Errors are of the local value:
mean over the points, root mean square and largest; "bar" is the median error bar of the program,
"within" the part of the points whose true error is within the bar, and within three. Where the
program marks the points as unknown there is no verdict.
"""
    columns = (
        "sphere", "source", "height, cells", "mean, %", "rms, %", "largest, %", "allowed, %",
        "bar, %", "within 1 / 3 bars", "marked unknown", "products", "verdict",
    )  # fmt: skip
    rows = []
    across = (16, 20) if quick else ACROSS
    for material, diameter, wavelength in SPHERES[:: 2 if quick else 1]:
        solved = [solve(material, diameter, wavelength, n) for n in across]
        exact = mie(material, diameter, wavelength)
        particle = shapes.sphere(diameter, material)
        spacing = solved[-1].system.cells.spacing
        heights = [h for h, _ in HEIGHTS]
        points = np.concatenate([directions(300) * (diameter / 2 + h * spacing) for h in heights])
        true = e2(exact.fields(points)[0])
        best = refined_field([fields_at(s, points, particle=particle) for s in solved])
        ended = " + ".join(
            f"{s.products}" + ("" if s.status == "converged" else f" ({s.status})") for s in solved
        )
        for i, (height, allowed) in enumerate(HEIGHTS):
            here = slice(300 * i, 300 * i + 300)
            error = best.e2[here] / true[here] - 1
            off = np.abs(best.e2[here] - true[here]) / best.e2_error[here]
            rows.append(
                [
                    f"{material}, {diameter} nm, {wavelength} nm",
                    MIE,
                    f"{height:+g}",
                    *_three(best.e2[here], true[here]),
                    "-" if allowed is None else f"{100 * allowed:g}",
                    f"{100 * np.median(best.e2_error[here] / best.e2[here]):.1f}",
                    f"{(off <= 1).mean():.2f} / {(off <= 3).mean():.2f}",
                    f"{1 - best.trusted[here].mean():.0%}",
                    ended,
                    "-" if allowed is None else verdict(float(np.abs(error).max()) <= allowed),
                ]
            )
    return Table("Near field of spheres", text, columns, rows)


@group("near-field-ways", rank=41)
def ways(quick: bool) -> Table:
    """Ways to take a field from the dipoles, one cell off the surface and elsewhere."""
    text = """
Error of |E|² against Mie (mean / rms over 200 points, %) of a gold sphere of 80 nm at 600 nm, 24
cells across, for different ways to make a field between the cells. "Point": bare dipoles.
"Filtered": the continuous filtered tensor of the solver; it rings for many cells. "Smeared": each
dipole a ball of the given radius in cells. "Continuity": tangential E and normal D of the smeared
field taken over to either side, inside from the dipoles over the filled fraction. "Unblurred": the
program's way, which fits solutions of Laplace's equation along the normal to the smeared field.
"""
    heights = (-4, -2, -1, -0.5, 0.5, 1, 1.5, 2, 3)
    columns = ("way", *(f"{h:+g} cells" for h in heights))
    across = 16 if quick else 24
    solved, exact = solve("gold", 80, 600, across), mie("gold", 80, 600)
    spacing, normal = solved.system.cells.spacing, directions(200)
    tried: dict[str, Callable[[np.ndarray, float], np.ndarray]] = {
        "point": lambda points, h: summed(solved, points, "point"),
        "filtered": lambda points, h: summed(solved, points, "fcd"),
    }
    for radius in (1.0, 1.5, 1.75, 2.0):
        tried[f"smeared {radius:g}"] = lambda points, h, r=radius: smeared(solved, points, r)
    for radius in (1.0, 1.5, 1.75, 2.0):
        tried[f"continuity {radius:g}"] = lambda points, h, r=radius: continuity(
            solved, points, normal, h, r
        )
    particle = shapes.sphere(80, "gold")
    tried["unblurred"] = lambda points, h: fields_at(solved, points, particle=particle).e
    rows = []
    for name, way in tried.items():
        cells = []
        for height in heights:
            points = normal * (40 + height * spacing)
            mean, rms, _ = _three(e2(way(points, height)), e2(exact.fields(points)[0]))
            cells.append(f"{mean} / {rms}")
        rows.append([name, *cells])
    return Table("Ways to a near field", text, columns, rows)


@group("near-field-gap", rank=42)
def gap(quick: bool) -> Table:
    """|E|^2 in the middle of a 2 nm gap between two gold spheres."""
    text = """
Two gold spheres of 20 nm, 2 nm apart, polarized along the line, host 1.33: |E|² in the middle of
the gap and beside it, with 2, 3 and 4 cells across the gap. Allowed: 10 %.
"""
    columns = (
        "wavelength", "source", "place, nm", "reference |E|²", "cells in the gap", "ours",
        "error, %", "allowed, %", "products", "verdict",
    )  # fmt: skip
    places = np.array([[0, 0, 0], [0, 1, 1], [0, 3, 0], [0.5, 0, 0]], float)
    rows = []
    bodies = [shapes.sphere(20, "gold").moved((x, 0, 0)) for x in (-11, 11)]
    particle = shapes.Particle(bodies[0].parts + bodies[1].parts)
    for wavelength in (550,) if quick else (530, 550, 580):
        eps = permittivity("gold", wavelength)
        true = e2(two_spheres(20, 2, wavelength, eps, HOST).fields(places)[0])
        for cells in (2,) if quick else (2, 3, 4):
            lattice = shapes.voxelize(particle, spacing=2 / cells)
            solved = dda.solve(dda.system(lattice, wavelength, HOST), dda.plane_wave())
            found = fields_at(solved, places, particle=particle).e2
            for place, ours, reference in zip(places, found, true, strict=True):
                middle = place[0] == 0
                rows.append(
                    [
                        f"{wavelength} nm",
                        "spheres on a line, Bruning & Lo (1971)",
                        ", ".join(f"{v:g}" for v in place),
                        number(reference),
                        f"{cells}",
                        number(ours),
                        percent(ours / reference - 1),
                        "10" if middle else "-",
                        f"{solved.products}",
                        verdict(abs(ours / reference - 1) <= 0.1) if middle else "-",
                    ]
                )
    return Table("Field in a gap of 2 nm", text, columns, rows)


@group("near-field-cube", rank=42.5)
def cube(quick: bool) -> Table:
    """Hot-spot numbers over a gold cube as the cells become finer."""
    text = """
A gold cube of 40 nm with edges rounded by 6 nm at 600 nm, host 1.33. No exact solution exists, so
the numbers over the surface at a height are compared with those of the finest cells: |E|² of two
spacings together and its error bar. Allowed: nine tenths of the points within their bar.
"""
    columns = (
        "height, nm", "cells across", "largest |E|²", "mean |E|²", "mean |E|⁴", "99 % below",
        "marked unknown", "with the coarser: rms off the finest, %", "within 1 / 3 bars", "verdict",
    )  # fmt: skip
    particle = shapes.cube(edge=40, rounding=6)
    across = (12, 16, 20) if quick else (16, 24, 32, 44)
    solved = [
        dda.solve(dda.system(shapes.voxelize(particle, cells=n), 600, HOST), dda.plane_wave())
        for n in across
    ]
    rows = []
    for height in (1.0, 2.0, 4.0):
        shell = cover_surface(particle, 1.25, height)
        fields = [fields_at(s, shell.points, particle=particle) for s in solved]
        finest = fields[-1].e2
        for i, (n, found) in enumerate(zip(across, fields, strict=True)):
            numbers = field_numbers(shell.points, found.e2, shell.areas, percentages=(99,))
            compared = ["-", "-", "-"]
            if 0 < i < len(across) - 1:
                best = refined_field(fields[i - 1 : i + 1])
                off = np.abs(best.e2 - finest) / best.e2_error
                compared = [
                    f"{100 * np.sqrt(np.mean((best.e2 / finest - 1) ** 2)):.1f}",
                    f"{(off <= 1).mean():.2f} / {(off <= 3).mean():.2f}",
                    verdict(float((off <= 1).mean()) >= 0.9),
                ]
            rows.append(
                [
                    f"{height:g}",
                    f"{n}",
                    number(numbers.maximum),
                    number(numbers.mean_e2),
                    number(numbers.mean_e4),
                    number(float(numbers.e2_percentiles[0])),
                    f"{1 - found.trusted.mean():.0%}",
                    *compared,
                ]
            )
    return Table("Hot spots of a cube", text, columns, rows)


@lru_cache(maxsize=16)
def solve(material: str, diameter: float, wavelength: float, across: int) -> Polarization:
    """A solved sphere in the host."""
    cells = shapes.voxelize(shapes.sphere(diameter, material), cells=across)
    return dda.solve(dda.system(cells, wavelength, HOST), dda.plane_wave())


def mie(material: str, diameter: float, wavelength: float):
    """The exact sphere."""
    return sphere(diameter, wavelength, permittivity(material, wavelength), HOST)


def e2(field: np.ndarray) -> np.ndarray:
    """``|E|^2`` of vectors (n, 3)."""
    return (np.abs(field) ** 2).sum(axis=1)


def directions(count: int) -> np.ndarray:
    """Unit vectors spread evenly (a spiral over the sphere), (count, 3)."""
    k = np.arange(count) + 0.5
    z = 1 - 2 * k / count
    turn = k * np.pi * (3 - np.sqrt(5))
    across = np.sqrt(1 - z**2)
    return np.stack([across * np.cos(turn), across * np.sin(turn), z], axis=1)


def summed(solved: Polarization, points: np.ndarray, kernel: str) -> np.ndarray:
    """E from a kernel's continuous radial functions, (n, 3)."""
    system = solved.system
    out = solved.light.field(points, system.k)
    for i, point in enumerate(points):
        offset = point - system.positions
        r = np.maximum(np.linalg.norm(offset, axis=1), 1e-3 * system.cells.spacing)
        isotropic, dyadic = radial(kernel, r, system.cells.spacing, system.k)
        along = np.einsum("nc,nc->n", offset, solved.p) / r**2
        out[i] += isotropic @ solved.p + (dyadic * along) @ offset
    return out


def radial(kernel: str, r: np.ndarray, d: float, k: float) -> tuple[np.ndarray, np.ndarray]:
    """``a, b`` of ``G = a I + b RR`` at any distance, of point or filtered dipoles (nm^-3).

    Filtered: Piller & Martin (1998), IEEE Trans. Antennas Propag. 46, 1126.
    """
    if kernel == "point":
        wave, near = np.exp(1j * k * r) / r, (1 - 1j * k * r) / r**2
        return wave * (k**2 - near), wave * (3 * near - k**2)
    edge = np.pi / d
    (si_sum, ci_sum), (si_dif, ci_dif) = sici((edge + k) * r), sici((edge - k) * r)
    leaving, standing = 1j * np.pi + ci_dif - ci_sum, si_sum + si_dif
    u = (np.sin(k * r) * leaving + np.cos(k * r) * standing) / np.pi
    v = (np.cos(k * r) * leaving - np.sin(k * r) * standing) / np.pi
    sine, cosine = np.sin(edge * r), np.cos(edge * r)
    u1 = k * v + 2 * sine / (np.pi * r)
    u2 = -(k**2) * u + 2 / np.pi * (edge * cosine / r - sine / r**2)
    g, g1 = u / r, u1 / r - u / r**2
    g2 = u2 / r - 2 * u1 / r**2 + 2 * u / r**3
    local = 2 / (3 * np.pi) * (sine - edge * r * cosine) / r**3
    return k**2 * g + g1 / r + local, g2 - g1 / r


def smeared(solved: Polarization, points: np.ndarray, radius: float) -> np.ndarray:
    """E of dipoles smeared over `radius` cells, (n, 3)."""
    field = SmearedField(solved)
    field.radius = radius * solved.system.cells.spacing
    return solved.light.field(points, solved.system.k) + field.scattered(points)[0]


def continuity(
    solved: Polarization, points: np.ndarray, normal: np.ndarray, height: float, radius: float
) -> np.ndarray:
    """E on either side by the continuity of tangential E and normal D alone, (n, 3)."""
    field = SmearedField(solved)
    field.radius = radius * solved.system.cells.spacing
    near = field.around(points, radius)
    if height < 0:
        eps = solved.system.permittivity[0]
        return near.density / (near.fraction * (eps - 1))
    return continued(smeared(solved, points, radius), near.density, normal, 1.0)


def _three(ours: np.ndarray, true: np.ndarray) -> tuple[str, str, str]:
    """Mean, root mean square and largest relative error, in per cent."""
    error = ours / true - 1
    return (
        f"{100 * (ours.mean() / true.mean() - 1):+.1f}",
        f"{100 * np.sqrt(np.mean(error**2)):.1f}",
        f"{100 * np.abs(error).max():.1f}",
    )
