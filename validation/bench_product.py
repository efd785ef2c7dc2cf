"""The product with the interaction matrix: against the whole padded grid, the bare transforms and
fewer threads, as the box grows, and what could be shared."""

from __future__ import annotations

from collections.abc import Callable
from importlib.util import find_spec

import numpy as np
import scipy.fft

from dda.lattice import System, relative_system
from dda.lattice.green import COMPONENTS, RadialTable, octant
from dda.lattice.workers import Workers, available_threads
from validation.measure import Figure, bench, full_box, medians, random_dipoles

#: Calls before the one that is timed: a solver multiplies some hundred times on end.
RUN = 2
LIBRARIES = ("scipy", "ducc0") if find_spec("ducc0") else ("scipy",)


@bench("product")
def product(cells: int) -> list[Figure]:
    """Our product against the whole-grid one and against the transforms it cannot do without."""
    threads = available_threads()
    ours = {library: box_system(cells, fft=library) for library in LIBRARIES}
    any_system = next(iter(ours.values()))
    whole = WholeGrid(any_system.cells.shape, any_system.table, threads)
    p = random_dipoles(any_system.n, complex)
    check(whole, any_system, p)

    actions = {"whole grid": lambda: whole(p)}
    for library, system in ours.items():
        actions[library] = multiplying(system, p)
        actions[f"floor {library}"] = bare_transforms(library, whole.padded, threads)
    seconds = medians(actions, run=RUN)
    targets = {"scipy": 2.3, "ducc0": 5.0}
    label = f"{cells}^3 cells, double, {threads} threads: "
    figures = []
    for library in LIBRARIES:
        faster = seconds["whole grid"] / seconds[library]
        name = f"{label}whole grid (scipy.fft) / ours ({library})"
        figures.append(Figure(name, faster, "x", least=targets[library]))
        floor = seconds[library] / seconds[f"floor {library}"]
        name = f"{label}ours / its FFT floor ({library})"
        figures.append(Figure(name, floor, "x", most=0.7))
        figures.append(Figure(f"{label}ours ({library})", 1e3 * seconds[library], "ms"))
    figures.append(Figure(f"{label}whole grid (scipy.fft)", 1e3 * seconds["whole grid"], "ms"))
    return figures


@bench("threads")
def threads(cells: int) -> list[Figure]:
    """One thread against two."""
    if available_threads() < 2:
        return []
    figures = []
    for library in LIBRARIES:
        one, two = (box_system(cells, fft=library, workers=Workers(n)) for n in (1, 2))
        p = random_dipoles(one.n, complex)
        seconds = medians({"one": multiplying(one, p), "two": multiplying(two, p)}, run=RUN)
        gain = seconds["one"] / seconds["two"]
        name = f"{cells}^3 cells, double, {library}: 1 thread / 2 threads"
        figures.append(Figure(name, gain, "x", least=1.7))
    return figures


@bench("shared")
def shared(cells: int) -> list[Figure]:
    """What two right-hand sides could save by sharing a product: no more than reading the kernel.

    A product for two vectors at once would do everything twice but read the kernel. Here all of
    the multiplication with it is left out, which bounds the gain from above.
    """
    figures = []
    for library in LIBRARIES:
        system = box_system(cells, fft=library)
        p = random_dipoles(system.n, complex)
        bare = box_system(cells, fft=library)
        bare.convolution.multiply = lambda *plane: None  # type: ignore[method-assign]
        seconds = medians({"all": multiplying(system, p), "bare": multiplying(bare, p)})
        gain = 2 * seconds["all"] / (seconds["all"] + seconds["bare"])
        name = f"{cells}^3 cells, {library}: two products / one for two vectors, at most"
        figures.append(Figure(name, gain, "x"))
    return figures


@bench("growth")
def growth(cells: int) -> list[Figure]:
    """Time of a product as the box grows, each size in turns with the box of `cells`."""
    sizes = [max(2, round(cells * ratio)) for ratio in (0.5, 0.75, 1, 1.25, 1.5, 2, 2.5)]
    standard = box_system(cells)
    p = random_dipoles(standard.n, complex)
    relative = []
    for size in sizes:
        system = box_system(size)
        q = random_dipoles(system.n, complex)
        repeats = 9 if size <= 1.5 * cells else 4
        seconds = medians({"n": multiplying(system, q), "1": multiplying(standard, p)}, repeats)
        relative.append(seconds["n"] / seconds["1"])
        del system, q
    work = np.array([size**3 * np.log2(size**3) for size in sizes], float)
    base = cells**3 * np.log2(cells**3)
    figures = [
        Figure(f"{size}^3: time / (n log n), relative to {cells}^3", r / (w / base), "x")
        for size, r, w in zip(sizes, relative, work, strict=True)
    ]
    power = np.polyfit(np.log(work), np.log(relative), 1)[0]
    name = f"{sizes[0]}^3 to {sizes[-1]}^3: power of n log n that the time follows"
    return [*figures, Figure(name, float(power), "", most=1.05)]


def box_system(cells: int, **options) -> System:
    """Glass that fills a box; the product does not depend on the material."""
    return relative_system(full_box(cells), 1e3 * cells, 1.0, np.array([2.25]), **options)


def multiplying(system: System, p: np.ndarray) -> Callable[[], np.ndarray]:
    """Our product, from dipoles (n, 3) to fields (n, 3)."""
    out = np.empty_like(p)
    return lambda: system.convolution(system.index, p, out)


def bare_transforms(library: str, padded: tuple[int, ...], threads: int) -> Callable[[], object]:
    """Forward and back of three components of the padded grid, and nothing else."""
    # Forward and back leave the grid as it was, so it can be transformed in place for ever.
    grid = random_dipoles(int(np.prod(padded)), complex).T.reshape(3, *padded).copy()
    if library == "scipy":
        options = {"axes": (1, 2, 3), "workers": threads, "overwrite_x": True}
        return lambda: scipy.fft.ifftn(scipy.fft.fftn(grid, **options), **options)
    from ducc0.fft import c2c

    options = {"axes": (1, 2, 3), "nthreads": threads, "out": grid}
    return lambda: c2c(c2c(grid, **options), forward=False, inorm=2, **options)


class WholeGrid:
    """The product the direct way: pad all, transform all, multiply, transform back, cut out.

    The transform of the kernel is computed beforehand, the arrays are kept, all threads are used.

    Parameters
    ----------
    shape : (nx, ny, nz)
    table : RadialTable
    threads : int
    """

    def __init__(self, shape: tuple[int, int, int], table: RadialTable, threads: int):
        self.shape, self.threads = shape, threads
        self.padded = tuple(scipy.fft.next_fast_len(2 * n) for n in shape)
        self._kernel = np.stack([self._transformed(table, c) for c in range(6)])
        self._grid = np.empty((3, *self.padded), complex)
        self._field = np.empty_like(self._grid)
        self._scratch = np.empty(self.padded, complex)

    def __call__(self, p: np.ndarray) -> np.ndarray:
        """Fields (n, 3) of dipoles (n, 3) that fill the box in C order."""
        nx, ny, nz = self.shape
        options = {"axes": (1, 2, 3), "workers": self.threads, "overwrite_x": True}
        grid, field, scratch = self._grid, self._field, self._scratch
        grid[...] = 0
        grid[:, :nx, :ny, :nz] = np.moveaxis(p.reshape(nx, ny, nz, 3), 3, 0)
        spectrum = scipy.fft.fftn(grid, **options)
        for row, parts in enumerate(((0, 3, 4), (3, 1, 5), (4, 5, 2))):
            np.multiply(self._kernel[parts[0]], spectrum[0], out=field[row])
            for column in (1, 2):
                np.multiply(self._kernel[parts[column]], spectrum[column], out=scratch)
                field[row] += scratch
        fields = scipy.fft.ifftn(field, **options)
        return np.moveaxis(fields[:, :nx, :ny, :nz], 0, 3).reshape(-1, 3)

    def _transformed(self, table: RadialTable, component: int) -> np.ndarray:
        """Transform of one component over all displacements, positive and negative."""
        values = octant(table, component, self.shape)
        a, b = COMPONENTS[component]
        for axis in range(3):
            n, length = self.shape[axis], self.padded[axis]
            sign = -1 if a != b and axis in (a, b) else 1
            mirrored = sign * np.flip(np.take(values, range(1, n), axis=axis), axis=axis)
            gap = list(values.shape)
            gap[axis] = length - 2 * n + 1
            values = np.concatenate([values, np.zeros(gap), mirrored], axis=axis)
        return scipy.fft.fftn(values, workers=self.threads)


def check(whole: WholeGrid, system: System, p: np.ndarray) -> None:
    """Both products must agree, or their times mean nothing."""
    ours = system.convolution(system.index, p, np.empty_like(p))
    difference = np.linalg.norm(whole(p) - ours) / np.linalg.norm(ours)
    if difference > 1e-11:
        raise ArithmeticError(f"the two products differ by {difference:.1e}")
