"""Near fields in numbers: maxima, means, percentiles, hot spots; rows of a table."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from dda.response.hot_spots import field_numbers, find_hot_spots
from dda.study.near import NearAnswer, Sampled
from dda.study.near_emitters import EmitterAnswer
from dda.study.near_sers import SersAnswer

#: Hot spots that are listed one by one.
LISTED = 6
#: More points than this above the threshold are not sorted into hot spots.
_MOST_CONNECTED = 1_000_000
_UNITS = {"line": "nm", "plane": "nm2", "surface": "nm2", "box": "nm3"}
_EXTENTS = {"line": "length", "plane": "area", "surface": "area", "box": "volume"}
_NOWHERE = (math.nan, math.nan, math.nan)


@dataclass(frozen=True)
class Number:
    """A row of ``near_field_numbers.csv``.

    Attributes
    ----------
    wavelength_nm : float
    where : str
        "surface", "plane", "box", "line", "points", "particle" or "emitter 1"
    quantity : str
    value, error : float
        The error bar is NaN where none is known.
    unit : str
        Empty for ratios to the incident wave's.
    x_nm, y_nm, z_nm : float
        Place, from the particle's centre; NaN where there is none.
    """

    wavelength_nm: float
    where: str
    quantity: str
    value: float
    error: float = math.nan
    unit: str = ""
    x_nm: float = math.nan
    y_nm: float = math.nan
    z_nm: float = math.nan


def numbers_of(answer: NearAnswer, threshold: float | None) -> list[Number]:
    """Return the numbers of the surface and of the region.

    Parameters
    ----------
    answer : NearAnswer
    threshold : float or None
        ``|E|^2`` that a hot spot exceeds; half of the largest where None.
    """
    numbers = _describe(answer.wavelength, answer.surface, answer.cover.areas, threshold)
    if answer.region is not answer.surface:
        numbers += _describe(answer.wavelength, answer.region, None, threshold)
    return numbers + _heat(answer)


def numbers_of_sers(answer: SersAnswer) -> list[Number]:
    """Return mean and maximum of SERS factors."""
    place = tuple(float(c) for c in answer.best.place)
    at = (answer.laser, "surface")
    name = "SERS factor of all orientations" if answer.averaged else "SERS factor"
    doubtful = 1 - float(np.mean(answer.best.trusted))
    return [
        Number(*at, f"{name}, mean", answer.best.mean, answer.mean_error),
        Number(*at, f"{name}, maximum", answer.best.maximum, answer.maximum_error, "", *place),
        Number(*at, "SERS, Stokes wavelength", answer.stokes, unit="nm"),
        Number(*at, "SERS, height", answer.height, unit="nm"),
        Number(*at, "SERS, share of points with unknown error", doubtful),
    ]


def numbers_of_emitter(answer: EmitterAnswer) -> list[Number]:
    """Return the decay rates of an emitter."""
    place = tuple(float(c) for c in answer.emitter.position)
    rates, error = answer.rates, answer.error

    def number(quantity: str, value: float, wrong: float) -> Number:
        where = f"emitter {answer.number}"
        return Number(answer.wavelength, where, quantity, value, wrong, "", *place)

    return [
        number("radiative decay rate over that in the host", rates.radiative, error.radiative),
        number("decay rate by absorption over the radiative one in the host", rates.absorbed,
               error.absorbed),
        number("total decay rate over that in the host", answer.total_change,
               answer.total_change_error),
        number("quantum yield", answer.quantum_yield, answer.yield_error),
    ]  # fmt: skip


def _heat(answer: NearAnswer) -> list[Number]:
    heat, body = answer.heat, answer.body
    if heat is None or body is None:
        return []
    inside = body.material >= 0
    per_e2 = heat.density[body.material][inside]
    e2, error = (per_e2 * values[inside] for values in (body.best.e2, body.best.e2_error))
    at = (answer.wavelength, "particle")
    out = [
        Number(*at, "incident intensity", heat.intensity, unit="W/m2"),
        Number(*at, "absorbed power", heat.total, heat.total_error, "W"),
    ]
    if len(e2):
        top = int(e2.argmax())
        place = tuple(float(c) for c in body.region.points[inside][top])
        doubtful = 1 - float(np.mean(body.best.trusted[inside]))
        name = "absorbed power density"
        out += [
            Number(*at, f"{name}, maximum", float(e2[top]), float(error[top]), "W/m3", *place),
            Number(*at, f"{name}, mean", float(e2.mean()), float(error.mean()), "W/m3"),
            Number(*at, f"{name}, share of points with unknown error", doubtful),
        ]
    return out


def chosen_points(sampled: Sampled) -> np.ndarray:
    """Return the points that the numbers are of, (n,) bool.

    All of a surface, or its edges, where the field is strongest, would be missing. Elsewhere those
    in the host whose error is known: molecules are in the host. Where there are none, those of
    known error; else all. Those beside a dipole that lights the particle are left out.
    """
    trusted, outside = sampled.best.trusted, sampled.material < 0
    lit = ~sampled.by_source if not sampled.by_source.all() else np.ones(len(trusted), bool)
    if sampled.region.kind == "surface":
        return lit
    for chosen in (trusted & outside & lit, trusted & lit):
        if chosen.any():
            return chosen
    return lit


def _describe(
    wavelength: float, sampled: Sampled, weights: np.ndarray | None, threshold: float | None
) -> list[Number]:
    region, best, chosen = sampled.region, sampled.best, chosen_points(sampled)
    kind = region.kind
    points, e2, error = region.points[chosen], best.e2[chosen], best.e2_error[chosen]
    one = 1.0 if kind == "points" else region.cell
    share = np.full(len(e2), one) if weights is None else weights[chosen]
    found = field_numbers(points, e2, share, e2_error=error)
    top_error = found.error if best.trusted[chosen][e2.argmax()] else math.nan
    raised = field_numbers(points, e2 + error, share)

    def number(quantity: str, value: float, wrong: float = math.nan, unit: str = "", at=_NOWHERE):
        return Number(wavelength, kind, quantity, value, wrong, unit, *(float(c) for c in at))

    out = [
        number("points", len(best.e2)),
        number("share of points with unknown error", 1 - float(np.mean(best.trusted))),
        number("|E|^2, maximum", found.maximum, top_error, "", found.place),
        number("|E|^2, mean", found.mean_e2, raised.mean_e2 - found.mean_e2),
        number("|E|^4, mean", found.mean_e4, raised.mean_e4 - found.mean_e4),
    ]
    for name, low, high in (
        ("|E|^2", found.e2_percentiles, raised.e2_percentiles),
        ("|E|^4", found.e4_percentiles, raised.e4_percentiles),
    ):
        for percent, a, b in zip(found.percentages, low, high, strict=True):
            out.append(number(f"{name}, {percent:g} % are below", float(a), float(b - a)))
    if kind != "points":
        out += _spots(number, kind, points, e2, share, region.step, threshold)
    return out


def _spots(number, kind, points, e2, share, step, threshold) -> list[Number]:
    level = float(e2.max()) / 2 if threshold is None else threshold
    above = float(share[e2 > level].sum())
    out = [
        number("threshold of |E|^2", level),
        number(f"{_EXTENTS[kind]} above the threshold", above, unit=_UNITS[kind]),
    ]
    if np.count_nonzero(e2 > level) > _MOST_CONNECTED:
        return out
    found = find_hot_spots(points, e2, share, step, level)
    out.append(number("hot spots", found.count))
    for n, spot in enumerate(found.spots[:LISTED], start=1):
        name = f"hot spot {n}"
        out += [
            number(f"{name}, maximum of |E|^2", spot.peak, at=spot.place),
            number(f"{name}, {_EXTENTS[kind]}", spot.extent, unit=_UNITS[kind], at=spot.place),
            number(f"{name}, share of |E|^2", spot.share_e2, at=spot.place),
            number(f"{name}, share of |E|^4", spot.share_e4, at=spot.place),
        ]
    return out
