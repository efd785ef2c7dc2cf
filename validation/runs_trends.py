"""Facts of the trade: where resonances lie and how they move."""

from __future__ import annotations

import time
from collections.abc import Sequence

import numpy as np

import shapes
from dda.materials.damping import fermi_speed
from validation.compare import permittivity, run
from validation.mie import sphere
from validation.results import Table, group, verdict

COLUMNS = (
    "fact", "source", "ours", "reference", "error", "allowed", "cells across", "time, s", "verdict",
)  # fmt: skip
VENDORS = "suppliers' data sheets of gold colloids, from memory"


@group("trends", rank=60)
def trends(quick: bool) -> Table:
    """Resonances of gold and silver spheres and of rods, the Fermi speed of copper."""
    text = """
Positions of maxima in nm, from a parabola through the highest of wavelengths 10 nm apart and its
neighbours, in water. The Mie reference is put through the same parabola. Peaks measured on real
colloids are known to about 3 nm and depend on their spread of sizes.
"""
    rows = _spheres(quick) + ([] if quick else _rods() + _silver())
    speed = fermi_speed(7.0)
    error = speed / 1.57e6 - 1
    rows.append(
        ["v_F of copper from E_F = 7 eV, m/s", "Ashcroft & Mermin (1976), from memory",
         f"{speed:.4g}", "1.57e6", f"{error:+.1e}", "3e-3", "-", "-", verdict(abs(error) < 3e-3)]
    )  # fmt: skip
    return Table("Facts of the trade", text, COLUMNS, rows)


def _spheres(quick: bool) -> list[list[str]]:
    """Gold in water from 40 to 100 nm: each peak, and that they move to the red."""
    rows, peaks = [], []
    wavelengths = range(510, 601, 10)
    measured = {40: 526, 60: 535, 80: 550, 100: 570}
    for diameter in (40, 100) if quick else measured:
        across = 12 if quick else 20
        begin = time.perf_counter()
        ours = _peak("c_ext", shapes.sphere(diameter, "gold"), wavelengths, across)
        seconds = f"{time.perf_counter() - begin:.1f}"
        exact = _mie_peak("c_ext", "gold", diameter, wavelengths)
        peaks.append(ours)
        for source, reference, allowed in (
            ("Mie series", exact, 1),
            (VENDORS, measured[diameter], 6),
        ):
            fact = f"extinction of gold spheres, {diameter} nm"
            rows.append(_position(fact, source, ours, reference, allowed, across, seconds))
            seconds = "-"
    rows.append(_growing("gold spheres shift to the red as they grow", peaks))
    return rows


def _rods() -> list[list[str]]:
    """Rods of one diameter, light polarized along them."""
    peaks = []
    begin = time.perf_counter()
    for length, wavelengths in ((40, range(540, 641, 10)), (60, range(600, 721, 10))):
        rod = shapes.rod(length=length, diameter=20)
        peaks.append(_peak("c_ext", rod, wavelengths, length // 2))
    row = _growing("a rod 60 nm long peaks to the red of one of 40 nm, both 20 nm thick", peaks)
    return [[*row[:7], f"{time.perf_counter() - begin:.1f}", row[8]]]


def _silver() -> list[list[str]]:
    """Silver against gold, 30 nm."""
    rows, peaks = [], []
    for metal, wavelengths in (("silver", range(370, 431, 10)), ("gold", range(500, 551, 10))):
        begin = time.perf_counter()
        ours = _peak("c_abs", shapes.sphere(30, metal), wavelengths, 16)
        seconds = f"{time.perf_counter() - begin:.1f}"
        exact = _mie_peak("c_abs", metal, 30, wavelengths)
        peaks.append(ours)
        fact = f"absorption of {metal} spheres, 30 nm"
        rows.append(_position(fact, "Mie series", ours, exact, 2, 16, seconds))
    rows.append(_growing("silver absorbs to the blue of gold", peaks))
    return rows


def _peak(quantity: str, particle, wavelengths: Sequence[int], across: float) -> float:
    values = [
        getattr(run(particle, w, across, host="water", tolerance=1e-3).response, quantity)
        for w in wavelengths
    ]
    return maximum(wavelengths, values)


def _mie_peak(quantity: str, material: str, diameter: float, wavelengths: Sequence[int]) -> float:
    spheres = [
        sphere(diameter, w, permittivity(material, w), permittivity("water", w).real ** 0.5)
        for w in wavelengths
    ]
    return maximum(wavelengths, [getattr(s, quantity) for s in spheres])


def maximum(places: Sequence[float], values: Sequence[float]) -> float:
    """Place of the maximum: vertex of the parabola through the highest of three even places."""
    top = int(np.argmax(values))
    if not 0 < top < len(values) - 1:
        raise ArithmeticError(f"the maximum lies at the end of the range, {places[top]}")
    left, middle, right = values[top - 1 : top + 2]
    step = places[top + 1] - places[top]
    return places[top] + step * (left - right) / (2 * (left - 2 * middle + right))


def _position(fact, source, ours, reference, allowed, across, seconds) -> list[str]:
    error = ours - reference
    return [
        fact, source, f"{ours:.1f} nm", f"{reference:.1f} nm", f"{error:+.1f} nm", f"{allowed} nm",
        f"{across}", seconds, verdict(abs(error) <= allowed),
    ]  # fmt: skip


def _growing(fact: str, peaks: Sequence[float]) -> list[str]:
    shown = ", ".join(f"{p:.0f}" for p in peaks)
    good = bool(np.all(np.diff(peaks) > 0))
    return [fact, "textbooks", f"{shown} nm", "growing", "-", "-", "-", "-", verdict(good)]
