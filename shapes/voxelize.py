"""Particles to cells of a cubic lattice.

The particle is sampled finer than a cell, slab by slab along x; each cell gathers what fills it and
what fills the ball window around it, with the gradients that give the normal of the surface.
"""

from __future__ import annotations

from dataclasses import dataclass

import numba
import numpy as np
from numpy.typing import NDArray

from .body import FloatArray, Mirrors, Particle, SampleGrid, ShapeError
from .cells import Cells
from .window import Window, ball_window

OCCUPIED = 0.005  # a cell belongs to the particle when its window holds more than this
KEPT = 0.004  # what is carried until mirror images have been averaged
SLAB_SAMPLES = 12_000_000  # samples of one material held at once
BEND = 0.2  # cells: weight of second derivatives, which matter where a thin layer has no gradient
FAINT = 0.02  # 1/cell: gradients below this are noise of the sampling, not an interface
COLUMNS = 10  # fraction, 3 gradients, 6 second derivatives


def voxelize(
    particle: Particle,
    spacing: float | None = None,
    cells: int | None = None,
    window: float = 2.2,
    samples: int = 4,
) -> Cells:
    """Cells of a particle.

    The lattice is centred on the centre of the particle's bounds, so mirror planes of the particle
    are mirror planes of the cells, exactly.

    Parameters
    ----------
    particle : Particle
        What to sample.
    spacing : float, optional
        Edge of a cell, nm.
    cells : int, optional
        Number of cells across the largest extent, instead of `spacing`.
    window : float
        Diameter of the ball window in cells.
    samples : int
        Samples along a cell's edge.

    Raises
    ------
    ShapeError
        If spacing and cells are both given or both missing, or no cell is occupied.

    Examples
    --------
    >>> import shapes
    >>> cells = shapes.voxelize(shapes.sphere(diameter=20), cells=16)
    >>> cells.spacing, cells.mirrors
    (1.25, (True, True, True))
    """
    if not isinstance(particle, Particle):
        raise ShapeError(f"voxelize takes a Particle, not {type(particle).__name__}")
    step = _spacing(particle, spacing, cells)
    lattice = _Lattice.around(particle, step, samples, ball_window(float(window), samples))
    gathered = _gather_all(particle, lattice)
    mirrors = particle.mirrors()
    gathered = _folded(gathered, mirrors, lattice.shape)
    gathered = gathered.where(gathered.window.sum(axis=1) > OCCUPIED)
    if len(gathered.index) == 0:
        size = ", ".join(f"{edge:g}" for edge in particle.extent)
        raise ShapeError(
            f"no cell of {step:g} nm is filled by this particle of {size} nm; use a smaller spacing"
        )
    normal = _folded_normals(_normals(gathered), gathered.index, mirrors, lattice.shape)
    first = gathered.index.min(axis=0)
    shape = gathered.index.max(axis=0) - first + 1
    return Cells(
        spacing=step,
        origin=lattice.origin + step * first,
        shape=(int(shape[0]), int(shape[1]), int(shape[2])),
        index=(gathered.index - first).astype(np.int32),
        materials=particle.materials,
        fraction=gathered.fraction,
        window=gathered.window,
        normal=normal,
        centre_material=_centre_material(gathered.centre),
        window_width=float(window),
        volume=particle.volume(),
        gradient=gathered.derivatives[:, :, :3] / step,
        thinnest=particle.thinnest,
        gap=particle.gap,
    )


def _spacing(particle: Particle, spacing: float | None, cells: int | None) -> float:
    if (spacing is None) == (cells is None):
        raise ShapeError("give either spacing (nm) or cells (number across the largest extent)")
    if cells is not None:
        if not (np.isfinite(cells) and cells >= 1):
            raise ShapeError(f"cells = {cells} must be at least 1")
        return float(np.max(particle.extent)) / float(cells)
    assert spacing is not None
    if not (np.isfinite(spacing) and spacing > 0):
        raise ShapeError(f"spacing = {spacing} must be a number greater than 0 (nm)")
    return float(spacing)


@dataclass(frozen=True, eq=False)
class _Lattice:
    """Box of candidate cells and its samples."""

    origin: FloatArray  # centre of cell (0, 0, 0)
    spacing: float
    shape: tuple[int, int, int]
    samples: int
    window: Window

    @classmethod
    def around(cls, particle: Particle, spacing: float, samples: int, window: Window) -> _Lattice:
        low, high = particle.bounds
        across = np.maximum(np.round((high - low) / spacing - 1e-9), 1).astype(int)
        shape = across + 2 * (
            window.halo + 1
        )  # keeps the parity, reaches past all that the window sees
        origin = (low + high) / 2 - spacing * (shape - 1) / 2
        nx, ny, nz = (int(n) for n in shape)
        return cls(origin, spacing, (nx, ny, nz), samples, window)

    def slab(self, start: int, stop: int) -> SampleGrid:
        """Samples of the cells start..stop along x, with the halo on all six sides."""
        halo, s = self.window.halo, self.samples
        step = self.spacing / s
        first = self.origin + self.spacing * (np.array([start, 0, 0]) - halo) - step * (s - 1) / 2
        nx, ny, nz = stop - start, self.shape[1], self.shape[2]
        return SampleGrid(first, step, tuple((n + 2 * halo) * s for n in (nx, ny, nz)))


@dataclass(frozen=True, eq=False)
class _Gathered:
    """What was gathered for the kept cells; derivatives (n, m, 9) per cell and cell^2."""

    index: NDArray[np.int64]
    fraction: FloatArray
    centre: FloatArray
    window: FloatArray
    derivatives: FloatArray

    def where(self, kept: NDArray) -> _Gathered:
        return _Gathered(
            self.index[kept],
            self.fraction[kept],
            self.centre[kept],
            self.window[kept],
            self.derivatives[kept],
        )


def _gather_all(particle: Particle, lattice: _Lattice) -> _Gathered:
    nx, ny, nz = lattice.shape
    per_layer = (ny + 2 * lattice.window.halo) * (nz + 2 * lattice.window.halo) * lattice.samples**3
    thick = max(2, SLAB_SAMPLES // per_layer - 2 * lattice.window.halo)
    slabs = []
    for start in range(0, nx, thick):
        stop = min(nx, start + thick)
        filled = _composed(particle, lattice.slab(start, stop))
        slabs.append(_gather(filled, lattice, start))
    return _Gathered(
        *(
            np.concatenate([getattr(slab, name) for slab in slabs])
            for name in ("index", "fraction", "centre", "window", "derivatives")
        )
    )


def _composed(particle: Particle, grid: SampleGrid) -> NDArray[np.float32]:
    """Fraction of each material, (m, *grid.shape): later parts cover earlier ones."""
    materials = particle.materials
    filled = np.zeros((len(materials), *grid.shape), dtype=np.float32)
    laid: set[int] = set()  # materials that earlier parts have put down
    for part in particle.parts:
        cut = grid.window(part.body.bounds)
        if cut is None:
            continue
        new = part.body.fill(grid.cut(cut))
        for k in laid:
            filled[k][cut] *= 1 - new
        if part.material is not None:
            k = materials.index(part.material)
            laid.add(k)
            filled[k][cut] += new
    return filled


def _gather(filled: NDArray[np.float32], lattice: _Lattice, start: int) -> _Gathered:
    """Cells of a slab whose window is not empty."""
    halo, s = lattice.window.halo, lattice.samples
    mean, low, high, centre = _cell_statistics(filled, s)
    spread_low, spread_high = _neighbourhood(low, high, halo)
    inner = (slice(None), *(slice(halo, n - halo) for n in mean.shape[1:]))
    uniform = np.all(spread_high == spread_low, axis=0)
    index = np.stack(np.nonzero(np.any(spread_high > 0, axis=0)), axis=1)
    at = tuple(index.T)
    m = len(filled)
    values = np.zeros((len(index), m, COLUMNS))
    values[:, :, 0] = mean[inner][(slice(None), *at)].T
    mixed = np.nonzero(~uniform[at])[0]
    first = (index[mixed] + halo) * s
    values[mixed] = _ball_sums(filled, first, lattice.window.offsets, lattice.window.weights)
    gathered = _Gathered(
        index + np.array([start, 0, 0]),
        mean[inner][(slice(None), *at)].T,
        centre[inner][(slice(None), *at)].T,
        values[:, :, 0],
        values[:, :, 1:],
    )
    return gathered.where(gathered.window.sum(axis=1) > KEPT)


@numba.njit(cache=True, nogil=True, parallel=True)
def _cell_statistics(filled, s):  # type: ignore[no-untyped-def]
    """Mean, least and greatest sample of every cell, and the mean of the samples at its centre."""
    m, sx, sy, sz = filled.shape
    shape = (m, sx // s, sy // s, sz // s)
    mean, low, high, centre = np.zeros(shape), np.zeros(shape), np.zeros(shape), np.zeros(shape)
    first = (s - 1) // 2
    last = s // 2
    middle = (last - first + 1) ** 3
    for task in numba.prange(m * shape[1]):
        k, i = task // shape[1], task % shape[1]
        for j in range(shape[2]):
            for l in range(shape[3]):
                total, inner = 0.0, 0.0
                least = greatest = filled[k, i * s, j * s, l * s]
                for a in range(s):
                    for b in range(s):
                        for c in range(s):
                            value = filled[k, i * s + a, j * s + b, l * s + c]
                            total += value
                            least = min(least, value)
                            greatest = max(greatest, value)
                            if first <= a <= last and first <= b <= last and first <= c <= last:
                                inner += value
                mean[k, i, j, l] = total / s**3
                low[k, i, j, l], high[k, i, j, l] = least, greatest
                centre[k, i, j, l] = inner / middle
    return mean, low, high, centre


def _neighbourhood(low: FloatArray, high: FloatArray, halo: int) -> tuple[FloatArray, FloatArray]:
    """Least and greatest sample within `halo` cells, for all but the outer cells."""
    for axis in (1, 2, 3):
        count = low.shape[axis] - 2 * halo
        cuts = [
            tuple(slice(k, k + count) if a == axis else slice(None) for a in range(4))
            for k in range(2 * halo + 1)
        ]
        low = np.minimum.reduce([low[cut] for cut in cuts])
        high = np.maximum.reduce([high[cut] for cut in cuts])
    return low, high


@numba.njit(cache=True, nogil=True, parallel=True)
def _ball_sums(filled, first, offsets, weights):  # type: ignore[no-untyped-def]
    """Weighted sums over the window of every cell, (n, m, 10)."""
    m = filled.shape[0]
    out = np.zeros((first.shape[0], m, weights.shape[0]))
    for n in numba.prange(first.shape[0]):
        x, y, z = first[n, 0], first[n, 1], first[n, 2]
        sums = np.zeros(weights.shape[0])
        for k in range(m):
            sums[:] = 0.0
            for q in range(offsets.shape[0]):
                value = filled[k, x + offsets[q, 0], y + offsets[q, 1], z + offsets[q, 2]]
                if value != 0.0:
                    for w in range(weights.shape[0]):
                        sums[w] += weights[w, q] * value
            out[n, k, :] = sums
            out[n, k, 0] = min(max(sums[0], 0.0), 1.0)
    return out


def _centre_material(centre: FloatArray) -> NDArray[np.int16]:
    """Material with the largest share at the cell's centre, -1 where that is the host."""
    host = 1 - centre.sum(axis=1)
    best = centre.argmax(axis=1)
    largest = centre[np.arange(len(best)), best]
    return np.where(largest >= host - 1e-6, best, -1).astype(np.int16)


def _normals(gathered: _Gathered) -> FloatArray:
    """Unit normal of the dominant interface: the main axis of sum g g^T over all phases.

    Second derivatives join with a small weight: they point along the normal too, and in the middle
    of a thin layer, where the gradients cancel, they alone do. The sign is that of the way out of
    the particle.
    """
    first, second = gathered.derivatives[:, :, :3], gathered.derivatives[:, :, 3:]
    normal = np.zeros((len(gathered.index), 3))
    mixed = np.nonzero(np.any(gathered.derivatives != 0, axis=(1, 2)))[0]
    if len(mixed) == 0:
        return normal
    g, h = first[mixed], second[mixed]
    g = np.concatenate([g, -g.sum(axis=1, keepdims=True)], axis=1)  # the host is a phase as well
    h = np.concatenate([h, -h.sum(axis=1, keepdims=True)], axis=1)
    bend = np.empty((*h.shape[:2], 3, 3))
    for row, (i, j) in enumerate(((0, 0), (1, 1), (2, 2), (0, 1), (0, 2), (1, 2))):
        bend[..., i, j] = bend[..., j, i] = h[..., row]
    tensor = np.einsum("nki,nkj->nij", g, g)
    tensor += BEND**2 * np.einsum("nkil,nklj->nij", bend, bend)
    values, vectors = np.linalg.eigh(tensor)
    axis = vectors[:, :, 2]
    # out of the particle: up the host's gradient, else from the materials named first to the later
    # ones
    rank = np.arange(g.shape[1]) / g.shape[1]
    out = g[:, -1] + 1e-3 * np.einsum("k,nki->ni", rank, g)
    axis = axis * np.where(np.einsum("ni,ni->n", axis, out) < 0, -1.0, 1.0)[:, None]
    normal[mixed] = np.where(values[:, 2:] > FAINT**2, axis, 0.0)
    return normal


def _partners(index: NDArray, shape: tuple[int, int, int], axis: int) -> NDArray[np.int64]:
    """Row of every cell's mirror image, -1 where it is missing."""
    row = np.full(shape, -1, dtype=np.int64)
    row[tuple(index.T)] = np.arange(len(index))
    image = index.copy()
    image[:, axis] = shape[axis] - 1 - image[:, axis]
    return row[tuple(image.T)]


def _folded(gathered: _Gathered, mirrors: Mirrors, shape: tuple[int, int, int]) -> _Gathered:
    """Averages with the mirror images, so that symmetric data are equal to the last bit."""
    for axis in range(3):
        if not mirrors[axis]:
            continue
        both = _partners(gathered.index, shape, axis) >= 0
        gathered = gathered.where(both)
        other = _partners(gathered.index, shape, axis)
        signs = np.ones(9)
        signs[axis] = -1
        for row, pair in ((6, (0, 1)), (7, (0, 2)), (8, (1, 2))):
            signs[row] = -1 if axis in pair else 1
        gathered = _Gathered(
            gathered.index,
            (gathered.fraction + gathered.fraction[other]) / 2,
            (gathered.centre + gathered.centre[other]) / 2,
            (gathered.window + gathered.window[other]) / 2,
            (gathered.derivatives + gathered.derivatives[other] * signs) / 2,
        )
    return gathered


def _folded_normals(
    normal: FloatArray, index: NDArray, mirrors: Mirrors, shape: tuple[int, int, int]
) -> FloatArray:
    """Normals made exactly symmetric; where the sign is arbitrary the axis alone is."""
    for axis in range(3):
        if not mirrors[axis]:
            continue
        image = normal[_partners(index, shape, axis)].copy()
        image[:, axis] *= -1
        image *= np.where(np.einsum("ni,ni->n", normal, image) < 0, -1.0, 1.0)[:, None]
        total = normal + image
        length = np.linalg.norm(total, axis=1, keepdims=True)
        normal = np.divide(total, length, out=np.zeros_like(total), where=length > 0)
    return normal
