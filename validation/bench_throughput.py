"""Many small points: processes side by side against one core, and how well the time is foretold."""

from __future__ import annotations

import tempfile
import time
from pathlib import Path

import numpy as np

from dda.study.crew import Crew
from dda.study.engines import Engine, Here, Task
from dda.study.geometry import Geometries
from dda.study.prepare import Prepared, prepare
from dda.study.reader import study_from_text
from validation.measure import Figure, bench

STUDY = """
name = "small cubes"
[particle]
shape = "cube"
edge = 40.0
rounding = 6.0
material = "gold"
[host]
material = "water"
[light]
wavelengths = {from = 520, to = 610, step = 10}
[accuracy]
cells = 12
[solver]
threads = 1
[vary]
particle.edge = {from = 30, to = 58, step = 2}
"""
#: How many times the points a minute two processes must compute of what one does.
LEAST = 1.7
#: How far the time left may be off, either way, after a tenth of the run.
MOST_OFF = 1.5


@bench("throughput")
def throughput(_: int) -> list[Figure]:
    """Points a minute of a sweep of small points, and the time left foretold on the way."""
    with tempfile.TemporaryDirectory() as name:
        prepared = prepare(study_from_text(STUDY, Path(name) / "study.toml"))
    # in turns, so that whatever else the machine does falls on both
    rates: dict[str, list[float]] = {"one": [], "two": []}
    off = []
    for _ in range(2):
        rate, times = _rate(Here(Geometries()), prepared)
        rates["one"].append(rate)
        off.append(_foretold(times, prepared))
        rate, _ = _rate(Crew(2, 1), prepared)
        rates["two"].append(rate)
    one, two = (float(np.median(found)) for found in rates.values())
    return [
        Figure("points a minute on one core", 60 * one, ""),
        Figure("points a minute with two processes", 60 * two, ""),
        Figure("two processes / one core", two / one, "x", least=LEAST),
        Figure("time left after a tenth, foretold / true", max(off), "x", most=MOST_OFF),
    ]


def _rate(engine: Engine, prepared: Prepared) -> tuple[float, list[tuple[int, float]]]:
    """Points a second from the first that is done on, and when each was done."""
    chains = [
        [Task(n, prepared.identities[n], prepared.points[n]) for n in chain]
        for chain in prepared.chains
    ]
    times = []
    for done in engine.run(chains, lambda task, worker: None, lambda message, part: None):
        assert done.outcome.row.converged
        times.append((done.task.number, time.perf_counter()))
    # the first points of every worker wait for it to start
    skipped = 2 * engine.workers
    return (len(times) - skipped) / (times[-1][1] - times[skipped - 1][1]), times


def _foretold(times: list[tuple[int, float]], prepared: Prepared) -> float:
    """How far the time left, told by the weights, is off after a tenth of the points."""
    weights = np.cumsum([prepared.weights[number] for number, _ in times])
    moments = np.array([moment for _, moment in times])
    tenth = len(times) // 10
    pace = (moments[tenth] - moments[0]) / (weights[tenth] - weights[0])
    ratio = pace * (weights[-1] - weights[tenth]) / (moments[-1] - moments[tenth])
    return float(max(ratio, 1 / ratio))
