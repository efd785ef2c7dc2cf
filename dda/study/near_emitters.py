"""Emitters beside the particle: their decay rates from two spacings."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from dda.design.emitter import DecayRates, averaged_rates, emitter_rates, refined_rates
from dda.study.near_levels import NearLevels
from dda.study.near_table import EmitterTable, NearFieldTable


@dataclass(frozen=True)
class EmitterAnswer:
    """Decay rates of an emitter over those in the host.

    Attributes
    ----------
    number : int
        Of the emitter in the study, from 1.
    emitter : EmitterTable
    wavelength : float
        Of its light, nm in vacuum.
    rates, error : DecayRates
        Over its radiative rate in the host.
    quantum_yield, yield_error : float
        With the particle, and its error bar.
    total_change, total_change_error : float
        Total decay rate over the total one in the host, its own losses included.
    """

    number: int
    emitter: EmitterTable
    wavelength: float
    rates: DecayRates
    error: DecayRates
    quantum_yield: float
    yield_error: float
    total_change: float
    total_change_error: float


def emitter_answers(table: NearFieldTable, levels: NearLevels) -> Iterator[EmitterAnswer]:
    """Yield the answer for each emitter at each of its wavelengths."""
    for number, emitter in enumerate(table.emitters, start=1):
        wanted = table.wavelengths if emitter.wavelength_nm is None else (emitter.wavelength_nm,)
        for wavelength in dict.fromkeys(map(levels.wavelength, wanted)):
            yield _answer(number, emitter, wavelength, levels)


def _answer(
    number: int, emitter: EmitterTable, wavelength: float, levels: NearLevels
) -> EmitterAnswer:
    place = levels.centre + np.asarray(emitter.position, float)
    pair, found = levels.at(wavelength), []
    for level in pair:
        system = levels.system(wavelength, level)
        levels.doing, levels.part = f"emitter {number} at {wavelength:g} nm", 0.5
        if emitter.orientation == "average":
            found.append(averaged_rates(system, place, solver=levels.solve))
        else:
            found.append(emitter_rates(system, place, emitter.orientation, solver=levels.solve))
        levels.advance()
    rates, error = refined_rates(found, [level.spacing for level in pair])
    own = emitter.quantum_yield
    quantum_yield = rates.quantum_yield(own)
    # Corners of the error box: more of one loss, less of the light, and the other way round.
    worse, better = (
        (rates.radiative - s * error.radiative)
        / (rates.total - s * error.radiative + s * error.absorbed + 1 / own - 1)
        for s in (1, -1)
    )
    return EmitterAnswer(
        number,
        emitter,
        wavelength,
        rates,
        error,
        quantum_yield,
        min(1.0, max(abs(worse - quantum_yield), abs(better - quantum_yield))),
        own * rates.total + 1 - own,
        own * error.total,
    )
