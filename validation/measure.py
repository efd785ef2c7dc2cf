"""What a benchmark is made of: figures with targets, and timing that survives a busy machine.

A benchmark is a function of the number of cells along a box's edge that returns figures; it joins
with the decorator `bench` from any module of this package called bench_*.py.
"""

from __future__ import annotations

import importlib
import pkgutil
import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from statistics import median

import numpy as np

from shapes import Cells


@dataclass(frozen=True)
class Figure:
    """A measured number.

    Attributes
    ----------
    name : str
        What was measured, against what.
    value : float
    unit : str
    least, most : float or None
        Target; None where there is none.
    """

    name: str
    value: float
    unit: str = ""
    least: float | None = None
    most: float | None = None

    @property
    def met(self) -> bool:
        """Whether the target is met; true where there is none."""
        return (self.least is None or self.value >= self.least) and (
            self.most is None or self.value <= self.most
        )

    def __str__(self) -> str:
        text = f"{self.name:72} {self.value:10.4g} {self.unit:8}"
        if self.least is None and self.most is None:
            return text.rstrip()
        bound = f"at least {self.least:g}" if self.least is not None else f"at most {self.most:g}"
        return f"{text} {bound:14} {'ok' if self.met else 'MISSED'}"


Bench = Callable[[int], list[Figure]]
_benches: dict[str, Bench] = {}


def bench(name: str) -> Callable[[Bench], Bench]:
    """Register a benchmark."""

    def register(function: Bench) -> Bench:
        if name in _benches:
            raise ValueError(f"there is a benchmark {name!r} already")
        _benches[name] = function
        return function

    return register


def all_benches() -> dict[str, Bench]:
    """The benchmarks of all modules bench_*.py, by name."""
    for module in pkgutil.iter_modules([str(Path(__file__).parent)]):
        if module.name.startswith("bench_"):
            importlib.import_module(f"validation.{module.name}")
    return dict(_benches)


def medians(
    actions: Mapping[str, Callable[[], object]], repeats: int = 9, run: int = 0
) -> dict[str, float]:
    """Median time of each action in seconds, the actions taking turns.

    Taking turns exposes all of them to the same neighbours on the machine, so that ratios hold even
    when the times do not. One round before the first is not counted.

    Parameters
    ----------
    actions : mapping of callable
    repeats : int
        Turns of each.
    run : int
        How often an action is called in its turn before the call that is timed: an action that
        is done many times on end, such as a product, has its data in the caches and its threads
        awake.
    """
    times: dict[str, list[float]] = {name: [] for name in actions}
    for turn in range(repeats + 1):
        for name, action in actions.items():
            for _ in range(run):
                action()
            begin = time.perf_counter()
            action()
            if turn:
                times[name].append(time.perf_counter() - begin)
    return {name: median(values) for name, values in times.items()}


def full_box(cells: int, spacing: float = 1.0) -> Cells:
    """A cube of bulk cells without surface: the densest system on a box."""
    shape = (cells, cells, cells)
    n = cells**3
    return Cells(
        spacing=spacing,
        origin=np.full(3, -spacing * (cells - 1) / 2),
        shape=shape,
        index=np.indices(shape, np.int32).reshape(3, n).T.copy(),
        materials=("1.5",),
        fraction=np.ones((n, 1)),
        window=np.ones((n, 1)),
        normal=np.full((n, 3), 0.0),  # written, as voxelizing does: zeros would take no memory
        centre_material=np.zeros(n, np.int16),
        window_width=2.2,
        volume=n * spacing**3,
    )


def random_dipoles(n: int, dtype, seed: int = 0) -> np.ndarray:
    """Vectors to multiply with, (n, 3)."""
    return (np.random.default_rng(seed).normal(size=(n, 3, 2)) @ [1, 1j]).astype(dtype)
