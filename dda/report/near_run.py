"""Runs the near field of a study: solves, writes and prints it, wavelength by wavelength."""

from __future__ import annotations

import math
import sys
from collections.abc import Sequence
from pathlib import Path

from dda.design.heat import CAUTION
from dda.report.near_folder import NearFolder
from dda.report.progress import ProgressBar
from dda.study.geometry import Geometries
from dda.study.near import NearAnswer, NearRun
from dda.study.near_emitters import EmitterAnswer
from dda.study.near_numbers import Number, numbers_of, numbers_of_emitter, numbers_of_sers
from dda.study.near_plan import near_steps
from dda.study.near_sers import SersAnswer
from dda.study.points import Point
from dda.study.rows import Row

#: Share of points of unknown error from which it is worth a remark.
_MANY = 0.02


def run_near(
    point: Point, rows: Sequence[Row], geometries: Geometries, path: Path, title: str
) -> bool:
    """Compute the near field of a point whose spectrum is known, and write it into a folder.

    One unit of work: the files are in their place when it returns, ``near_field_numbers.csv``
    last, and none of them if it ends early.

    Parameters
    ----------
    point : Point
        Any of the points that share their tables; its wavelength does not matter.
    rows : sequence of Row
        The spectrum of these points.
    geometries : Geometries
        Where cells that are already made may be found.
    path : Path
        The folder; made if need be.
    title : str
        Of the pictures.

    Returns
    -------
    bool
        Whether the solver converged everywhere.
    """
    table = point.tables.near_field
    assert table is not None
    near = NearFolder(path, geometries.of(point).particle, title)
    good = True
    try:
        with ProgressBar(near_steps(table)) as bar:
            run = NearRun(point, rows, geometries, bar.watch, bar.advance)
            for answer in run.answers():
                numbers = numbers_of(answer, table.threshold)
                near.add(answer, numbers)
                print("\n" + near_text(answer, numbers), flush=True)
                good &= _warn(answer.status, answer.wavelength)
            sers = run.sers()
            if sers is not None:
                near.numbers += numbers_of_sers(sers)
                print("\n" + sers_text(sers), flush=True)
                good &= _warn(sers.status, sers.laser)
            for emitter in run.emitters():
                near.numbers += numbers_of_emitter(emitter)
                print("\n" + emitter_text(emitter), flush=True)
                good &= _warn(emitter.rates.status, emitter.wavelength)
        near.finish()
    finally:
        near.discard()
    if table.sers is not None or table.heat is not None:
        print(f"\ncaution: {CAUTION}")
    print(f"\nwritten to {near.path}: {', '.join(near.files)}", flush=True)
    return good


def near_text(answer: NearAnswer, numbers: list[Number]) -> str:
    """Return the near field at a wavelength in a few lines."""
    peak = ", the peak of the extinction" if answer.peak else ""
    lines = [
        f"near field at {answer.wavelength:g} nm{peak} (|E|^2 over the incident wave's; cells of "
        f"{answer.spacing:.3g} and {answer.coarser:.3g} nm)"
    ]
    for where in dict.fromkeys(number.where for number in numbers):
        if where == "particle":
            lines += _heat_lines([n for n in numbers if n.where == where])
            continue
        found = {n.quantity: n for n in numbers if n.where == where}
        place = where
        if where == "surface":
            place = f"surface {answer.cover.height:.3g} nm over the particle's"
        lines.append(f"  {place}, {found['points'].value:.0f} points")
        for name in ("|E|^2, maximum", "|E|^2, mean", "|E|^4, mean"):
            lines.append(f"    {name:<14} {_value(found[name])}")
        parts = [n for q, n in found.items() if q.startswith("|E|^2, ") and q.endswith("below")]
        levels = ", ".join(f"{_percent(n)} % of it below {n.value:.4g}" for n in parts)
        lines.append(f"    {levels}")
        lines += _spot_lines(found)
        doubtful = found["share of points with unknown error"].value
        if doubtful > _MANY:
            lines.append("    " + _doubt(where, doubtful))
    return "\n".join(lines)


def sers_text(answer: SersAnswer) -> str:
    """Return SERS factors in words."""
    best = answer.best
    lines = [
        f"SERS, laser {answer.laser:g} nm, Stokes line {answer.stokes:.1f} nm, "
        f"{answer.height:.3g} nm over the surface: |E(laser)|^2 |E(Stokes)|^2"
        + (", mean over all orientations of the particle" if answer.averaged else ""),
        f"    mean           {best.mean:.4g} ± {answer.mean_error:.2g}",
        f"    maximum        {best.maximum:.4g} ± {answer.maximum_error:.2g} at {_at(best.place)}",
    ]
    doubtful = 1 - float(best.trusted.mean())
    if doubtful > _MANY:
        lines.append(f"    at {100 * doubtful:.0f} % of the points the error is not known")
    return "\n".join(lines)


def emitter_text(answer: EmitterAnswer) -> str:
    """Return the decay rates of an emitter in words."""
    emitter = answer.emitter
    turned = "averaged over its orientations"
    if emitter.orientation != "average":
        turned = "along " + "[" + ", ".join(f"{c:g}" for c in emitter.orientation) + "]"
    numbers = numbers_of_emitter(answer)
    width = max(len(number.quantity) for number in numbers)
    return "\n".join(
        [
            f"emitter {answer.number} at {_at(emitter.position)}, {turned}, "
            f"{answer.wavelength:g} nm, quantum yield {emitter.quantum_yield:g} in the host",
            *(f"    {n.quantity:<{width}}  {n.value:.4g} ± {n.error:.2g}" for n in numbers),
        ]
    )


def _heat_lines(numbers: list[Number]) -> list[str]:
    found = {n.quantity: n for n in numbers}
    lines = [f"  heat, at {found['incident intensity'].value:.4g} W/m^2"]
    for name in ("absorbed power", "absorbed power density, maximum"):
        if name in found:
            n = found[name]
            at = "" if math.isnan(n.x_nm) else f" at {_at((n.x_nm, n.y_nm, n.z_nm))}"
            unit = n.unit.replace("m3", "m^3")
            lines.append(f"    {name:<32} {n.value:.4g} ± {n.error:.2g} {unit}{at}")
    return lines


def _doubt(where: str, share: float) -> str:
    if share == 1:
        return (
            "all points lie too near a surface for their error to be known: do not rely on these "
            "numbers; use smaller cells or a larger height"
        )
    kept = "these numbers include them" if where == "surface" else "these numbers leave them out"
    return f"{100 * share:.0f} % of the points lie too near a surface to know their error; {kept}"


def _spot_lines(found: dict[str, Number]) -> list[str]:
    if "hot spots" not in found:
        return []
    level = found["threshold of |E|^2"].value
    extent = next(n for q, n in found.items() if q.endswith("above the threshold"))
    count = f"{found['hot spots'].value:.0f}"
    size = f"{extent.value:.4g} {extent.unit}"
    lines = [f"    hot spots      {count} with |E|^2 above {level:.4g} ({size})"]
    for n in range(1, 100):
        peak = found.get(f"hot spot {n}, maximum of |E|^2")
        if peak is None:
            break
        share = 100 * found[f"hot spot {n}, share of |E|^4"].value
        at = _at((peak.x_nm, peak.y_nm, peak.z_nm))
        lines.append(f"      {n}: {peak.value:.4g} at {at}, {share:.0f} % of |E|^4")
    return lines


def _value(number: Number) -> str:
    error = "error not known" if math.isnan(number.error) else f"± {number.error:.2g}"
    text = f"{number.value:.4g} {error}"
    if not math.isnan(number.x_nm):
        text += f" at {_at((number.x_nm, number.y_nm, number.z_nm))}"
    return text


def _percent(number: Number) -> str:
    return number.quantity.removeprefix("|E|^2, ").split(" ")[0]


def _at(place) -> str:
    # adding 0 turns -0 into 0
    x, y, z = (round(float(c), 2) + 0.0 for c in place)
    return f"({x:g}, {y:g}, {z:g}) nm"


def _warn(status: str, wavelength: float) -> bool:
    if status == "converged":
        return True
    print(
        f"dda: the solver did not converge for the near field at {wavelength:g} nm ({status}): "
        "do not rely on it",
        file=sys.stderr,
    )
    return False
