"""From a dipole system to its T-matrix.

Regular vector spherical waves are the incident fields, and the induced dipoles radiate outgoing
ones with the amplitudes ``f = 4 pi i k^3 sum_j W(r_j).p_j`` (Mackowski 2002). In real waves
``T = 4 pi i k^3 W^T (alpha^-1 - G)^-1 W`` is symmetric and splits into the parity sectors of the
cells. Waves that symmetries of the cells turn into each other are solved once.
"""

from __future__ import annotations

from collections.abc import Hashable, Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from ..errors import InputError
from ..lattice.linear_system import System
from .averages import LEAST_ABSORPTION
from .columns import Column, Solved, solve_columns
from .symmetry import Sectors, cell_images, cosets, find_sectors
from .tmatrix import TMatrix
from .vector_waves import (
    fields_of,
    first_order,
    moments_of,
    real_to_complex,
    wave_count,
    wave_labels,
)
from .wave_rotations import real_rotation_matrix

LARGEST_ORDER = 24

# Part of the tolerance that one wave may take; three electric dipoles mostly make the average.
_SHARE = 0.15


def t_matrix(
    system: System,
    *,
    order: int | None = None,
    tolerance: float = 1e-3,
    residual: float | None = None,
    symmetry: bool = True,
    limit: int = 2000,
    memory: ColumnMemory | None = None,
    monitor=None,
) -> TMatrix:
    """T-matrix of a particle from its dipole system.

    Parameters
    ----------
    system : System
        With the polarizabilities "fcd" or "rr" (the lattice dispersion relation is made for one
        direction of light).
    order : int, optional
        Highest multipole order; by default chosen from the size parameter and raised until the
        multipoles left out do not matter.
    tolerance : float
        Relative error to allow in the orientation averages of C_ext and C_abs, for the order and
        the solver each.
    residual : float, optional
        Solve every column to this residual instead of by what it adds to the averages. Needed
        when single elements matter, as in closely spaced pairs.
    symmetry : bool
        Whether to use the symmetries of the cells.
    limit : int
        Most steps for a column.
    memory : ColumnMemory, optional
        Where columns of neighbouring wavelengths are found and these are left: they halve the
        products of a spectrum.
    monitor : callable, optional
        ``monitor(finished, columns)`` after every column.

    Returns
    -------
    TMatrix
        About the centre of the box of cells. When the order is chosen here, one order more is
        there than was solved for: how it answers to the others comes from their dipoles, how they
        answer to it from reciprocity, and how it answers to itself is left out.

    Raises
    ------
    InputError
        If the order is not from 1 to `LARGEST_ORDER`.

    References
    ----------
    Mackowski, D. W. (2002), J. Opt. Soc. Am. A 19, 881.

    Examples
    --------
    >>> import dda, shapes
    >>> cells = shapes.voxelize(shapes.sphere(diameter=30, material="gold"), cells=8)
    >>> t = t_matrix(dda.system(cells, wavelength=530))
    >>> t.order, t.reciprocity() < 1e-3
    (3, True)
    """
    if order is not None and not 1 <= order <= LARGEST_ORDER:
        raise InputError(f"multipole order {order} is not from 1 to {LARGEST_ORDER}")
    work = _Work(system, find_sectors(system, symmetry), tolerance, residual, limit, monitor)
    work.memory = memory
    present = order or work.first_order
    work.extend(present)
    while order is None and work.tail > tolerance * work.scale and present < LARGEST_ORDER:
        present += 1
        work.extend(present)
    return work.result(extended=order is None)


def expected_columns(system: System, order: int | None = None) -> int:
    """Number of waves that `t_matrix` solves, if no more orders turn out to be needed.

    Examples
    --------
    >>> import dda, shapes
    >>> cells = shapes.voxelize(shapes.cube(edge=20, rounding=2, material="gold"), cells=6)
    >>> expected_columns(dda.system(cells, wavelength=560))  # of 16 waves; the others look alike
    6
    """
    work = _Work(system, find_sectors(system), 0.0, None, 0, None)
    work.order = order or work.first_order
    return len(work.chosen(1))


class ColumnMemory(Protocol):
    """Keeps columns from one wavelength to the next; those of other cells are not its own."""

    def nearest(self, column: Hashable) -> Sequence[np.ndarray]:
        """Dipoles of that column at other wavelengths, the best first; few, as each costs."""

    def keep(self, column: Hashable, dipoles: np.ndarray) -> None:
        """Take the dipoles of a column."""


@dataclass(frozen=True, eq=False)
class _Wave:
    """A wave that is solved and stands for its images under the symmetries."""

    coefficients: np.ndarray  # in real waves up to the order at which it was chosen
    sector: int
    order: int
    count: int  # of independent waves it stands for


class _Work:
    """Columns solved so far and what follows from them."""

    def __init__(self, system: System, sectors: Sectors, tolerance, residual, limit, monitor):
        self.system, self.sectors = system, sectors
        self.tolerance, self.residual = tolerance, residual
        self.limit, self.monitor = limit, monitor
        self.positions = (system.positions - sectors.centre)[sectors.cells]
        self.radius = _radius(system, sectors.centre)
        self.factor = 4j * np.pi * system.k**3
        self.waves: list[_Wave] = []
        self.solved: list[Solved] = []
        self.products = 0.0
        self.order = 0
        self.values: dict[int, complex] = {}
        self.turns = cosets(sectors.group)
        self.memory: ColumnMemory | None = None

    def extend(self, order: int) -> None:
        """Solve the columns of all orders up to this one that are not there yet."""
        first, self.order = self.order + 1, order
        before = len(self.waves)
        self.waves += self.chosen(first)
        self._balance(before)
        new = self.waves[before:]
        coefficients = np.stack([self._padded(w.coefficients) for w in new])
        fields = fields_of(coefficients, self.positions, self.system.k) * self.sectors.scale
        columns = [Column(w.sector, e) for w, e in zip(new, fields, strict=True)]

        def finished(count: int) -> None:
            if self.monitor is not None:
                self.monitor(before + count, len(self.waves))

        solved, products = solve_columns(
            self.system,
            self.sectors,
            columns,
            tolerance=1e-6 if self.residual is None else self.residual,
            enough=None if self.residual is not None else self._enough(before),
            limit=self.limit,
            known=self.solved,
            guesses=[self.memory.nearest(self._name(w)) for w in new] if self.memory else (),
            monitor=finished,
        )
        if self.memory is not None:
            for wave, column in zip(new, solved, strict=True):
                self.memory.keep(self._name(wave), column.dipoles)
        self.solved += solved
        self.products += products
        for j, column in enumerate(self.solved):
            self.values[j] = column.value
        self.matrix = self._assemble()
        self.tail = self._tail()

    @property
    def first_order(self) -> int:
        """The order to begin with."""
        return min(LARGEST_ORDER, max(first_order(self.system.k * self.radius), 2))

    def chosen(self, first: int) -> list[_Wave]:
        """The waves to solve of the orders from `first` to the present one."""
        self.signs = _wave_sectors(self.order + 1, self.sectors)
        self.rotations = [real_rotation_matrix(self.order, g) for g in self.turns]
        return [wave for n in range(first, self.order + 1) for wave in self._choose(n)]

    def result(self, extended: bool) -> TMatrix:
        system = self.system
        solved = wave_labels(self.order + 1)[:, 1] <= self.order
        if extended:
            real = np.zeros((len(solved),) * 2, complex)
            real[:, solved] = self.matrix
            real[np.ix_(solved, ~solved)] = self.matrix[~solved].T
        else:
            real = self.matrix[solved]
        u = real_to_complex(self.order + extended)
        matrix = (u.conj() @ real) @ u.T
        drift = sum(w.count * s.drift for w, s in zip(self.waves, self.solved, strict=True))
        worst = [s.status for s in self.solved if s.status != "converged"]
        return TMatrix(
            matrix,
            system.wavelength,
            system.n_host,
            self.sectors.centre,
            self.radius,
            system.r_eff,
            order_error=self.tail,
            solver_error=2 * np.pi / system.k**2 * abs(self.factor) * drift,
            products=self.products,
            status=worst[0] if worst else "converged",
        )

    @property
    def scale(self) -> float:
        """The cross section that the tolerance is relative to, nm^2."""
        return 2 * np.pi / self.system.k**2 * self._strength()

    def _strength(self) -> float:
        """Sum over waves of the absorption, or a part of extinction if that is larger."""
        extinction = absorption = 0.0
        for j, value in self.values.items():
            t = self.factor * value
            extinction -= self.waves[j].count * t.real
            absorption -= self.waves[j].count * (t.real + abs(t) ** 2)
        return max(absorption, LEAST_ABSORPTION * extinction, 0.0)

    def _enough(self, before: int):
        """Stop a column when what it may still change is a small part of the averages."""

        def rule(number: int, value: complex, drift: float) -> bool:
            j = before + number
            self.values[j] = value
            change = abs(self.factor) * drift
            return change < _SHARE * self.tolerance * self._strength()

        return rule

    # -- which waves to solve ------------------------------------------------------------------

    def _choose(self, n: int) -> list[_Wave]:
        """Fewest real waves of order n whose images span all of that order and kind."""
        chosen = []
        labels = wave_labels(self.order)
        for kind in (1, 0):  # electric first: it is the stronger
            rows = np.flatnonzero((labels[:, 0] == kind) & (labels[:, 1] == n))
            rows = rows[np.argsort(abs(labels[rows, 2]), kind="stable")]
            blocks = np.stack([d[np.ix_(rows, rows)] for d in self.rotations])
            span = np.zeros((len(rows), 0))
            while span.shape[1] < len(rows):
                grown = [_span(span, blocks[:, :, i]) for i in range(len(rows))]
                best = max(range(len(rows)), key=lambda i: grown[i].shape[1])
                unit = np.zeros(len(labels))
                unit[rows[best]] = 1
                gain = grown[best].shape[1] - span.shape[1]
                chosen.append(_Wave(unit, self._sector_of(unit), n, gain))
                span = grown[best]
        return chosen

    def _balance(self, before: int) -> None:
        """Turn waves into the sectors that have the fewest, so that products are shared best."""
        load = np.zeros(self.sectors.count, int)
        for j in range(before, len(self.waves)):
            wave = self.waves[j]
            images = [d @ self._padded(wave.coefficients) for d in self.rotations]
            options = [(load[self._sector_of(v)], i) for i, v in enumerate(images)]
            best = images[min(options)[1]]
            sector = self._sector_of(best)
            load[sector] += 1
            self.waves[j] = _Wave(best, sector, wave.order, wave.count)

    def _name(self, wave: _Wave) -> Hashable:
        """The same for the same wave at another wavelength."""
        own = wave_labels(self.order)[:, 1] == wave.order
        parts = np.round(self._padded(wave.coefficients)[own], 6) + 0.0
        return wave.order, wave.sector, parts.tobytes()

    def _sector_of(self, coefficients: np.ndarray) -> int:
        """Sector of a wave, or -1 if it has parts in several."""
        known = wave_labels(self.order + 1)[:, 1] <= self.order
        present = np.unique(self.signs[known][abs(self._padded(coefficients)) > 1e-9])
        return int(present[0]) if len(present) == 1 else -1

    def _padded(self, coefficients: np.ndarray) -> np.ndarray:
        """Coefficients in the waves of the present order."""
        out = np.zeros(wave_count(self.order))
        old = len(coefficients) // 2
        half = len(out) // 2
        out[:old], out[half : half + old] = coefficients[:old], coefficients[old:]
        return out

    # -- what they give ------------------------------------------------------------------------

    def _assemble(self) -> np.ndarray:
        """T in real waves, rows up to one order more than the columns."""
        rows = self.order + 1
        dipoles = np.stack([s.dipoles * self.sectors.scale for s in self.solved])
        columns = moments_of(dipoles, self.positions, self.system.k, rows).T
        columns[self.signs[:, None] != np.array([w.sector for w in self.waves])] = 0
        turned = [d @ self._coefficients for d in self.rotations]
        inverse = np.linalg.pinv(np.concatenate(turned, axis=1))
        correction = self._second_order(inverse)
        known = wave_labels(rows)[:, 1] <= self.order
        columns[known] += correction
        wide = [real_rotation_matrix(rows, g) for g in self.turns]
        return self.factor * np.concatenate([d @ columns for d in wide], axis=1) @ inverse

    @property
    def _coefficients(self) -> np.ndarray:
        return np.stack([self._padded(w.coefficients) for w in self.waves], axis=1)

    def _second_order(self, inverse: np.ndarray) -> np.ndarray:
        """``x_i^T r_j`` of the solutions x and remainders r, which makes T stationary.

        The error of W^T x is of first order in what the solver left; that of W^T x + x^T r is of
        second order, because A is symmetric.
        """
        sectors, system = self.sectors, self.system
        count = len(self.solved)
        rests = np.stack([s.remainder for s in self.solved])
        homes = np.array([w.sector for w in self.waves])
        products = np.zeros((len(self.turns), count, count), complex)
        whole = np.empty((system.n, 3), system.dtype)
        for g, (turn, rotation) in enumerate(zip(self.turns, self.rotations, strict=True)):
            image = cell_images(system, turn)
            for i, wave in enumerate(self.waves):
                sector = self._sector_of(rotation @ self._padded(wave.coefficients))
                same = np.flatnonzero(homes == sector)
                if len(same) == 0:
                    continue
                sectors.spread(self.solved[i].dipoles[None], homes[i : i + 1], whole)
                turned = np.empty_like(whole)
                turned[image] = whole @ turn.T
                part = turned[sectors.cells] * sectors.scale
                products[g, i, same] = np.tensordot(rests[same], part, 2)
        return inverse.T @ products.reshape(-1, count)

    def _tail(self) -> float:
        """What the next orders would add to the average cross sections, nm^2.

        The larger of a geometric continuation of the orders' shares of extinction and of what a
        single resonance behind all of T would put there: T_ll = T_lj T_jl / T_jj.
        """
        labels = wave_labels(self.order + 1)
        column = labels[labels[:, 1] <= self.order]
        below = labels[:, 1] <= self.order
        diagonal = np.diag(self.matrix[below])
        shares = [abs(diagonal[column[:, 1] == n].real.sum()) for n in range(1, self.order + 1)]
        x, n = self.system.k * self.radius, self.order
        ratio = x**2 / ((n + 1) * (2 * n + 1))
        if n > 1:
            ratio = max(ratio, min(shares[-1] / shares[-2], 1.0))
        beyond = self.matrix[~below]
        shared = abs(beyond) ** 2 / np.maximum(abs(diagonal), 1e-300)
        total = max(shares[-1] * ratio, float(shared.max(axis=1).sum()))
        return 2 * np.pi / self.system.k**2 * total


def _span(span: np.ndarray, vectors: np.ndarray) -> np.ndarray:
    """Orthonormal basis of a span with more vectors (rows) added."""
    rest = vectors.T - span @ (span.T @ vectors.T)
    u, s, _ = np.linalg.svd(rest, full_matrices=False)
    return np.concatenate([span, u[:, s > 1e-8]], axis=1)


def _wave_sectors(order: int, sectors: Sectors) -> np.ndarray:
    """Sector of every real wave."""
    signs = np.stack(
        [np.diag(real_rotation_matrix(order, np.diag(f))) for f in sectors.flips], axis=1
    )
    same = np.round(signs)[:, None, :] == sectors.characters
    return np.argmax(same.all(axis=2), axis=1)


def _radius(system: System, centre: np.ndarray) -> float:
    """Of a sphere around the particle: its outermost cell centres and half a cell."""
    cells = system.cells
    inside = cells.centre_material >= 0
    positions = cells.positions[inside] if inside.any() else system.positions
    distance = np.linalg.norm(positions - centre, axis=1).max()
    return float(distance + cells.spacing / 2)
