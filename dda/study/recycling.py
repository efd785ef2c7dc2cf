"""Solutions at neighbouring wavelengths, kept as first guesses for the next one."""

from __future__ import annotations

from collections.abc import Hashable
from dataclasses import dataclass, field

import numpy as np

# The next solution is sought in the span of this many nearest ones.
_SOUGHT = 5
# Columns are cheaper to solve than a plane wave, so that fewer guesses pay (measured: two).
_COLUMNS_SOUGHT = 2
#: All together take at most this many bytes.
MOST_BYTES = 256 * 2**20


@dataclass
class Recycled:
    """Solutions by lattice and light.

    Attributes
    ----------
    most_bytes : int
        The oldest make room when all together are larger.
    """

    most_bytes: int = MOST_BYTES
    _found: dict[Hashable, list[tuple[float, np.ndarray]]] = field(default_factory=dict)
    _of: Hashable = None

    def nearest(self, key: Hashable, wavelength: float) -> list[np.ndarray]:
        """Return the dipoles at the nearest wavelengths, nearest first, each (n, 3)."""
        near = sorted(self._found.get(key, []), key=lambda one: abs(one[0] - wavelength))
        return [p for _, p in near[:_SOUGHT]]

    def keep(self, key: Hashable, wavelength: float, p: np.ndarray) -> None:
        """Keep the dipoles (n, 3) at a wavelength, nm."""
        found = self._found.setdefault(key, [])
        found.append((wavelength, p))
        while self._bytes() > self.most_bytes:
            longest = max(self._found.values(), key=len)
            if len(longest) <= 1:
                self._found.clear()
                return
            del longest[0]

    def only_for(self, cells: Hashable) -> None:
        """Drop everything that belongs to other cells than these."""
        if cells != self._of:
            self._found.clear()
            self._of = cells

    def _bytes(self) -> int:
        return sum(p.nbytes for found in self._found.values() for _, p in found)


@dataclass(frozen=True)
class RecycledColumns:
    """The columns of T-matrices on one lattice, for `dda.response.tmatrix_solve.t_matrix`.

    Attributes
    ----------
    solutions : Recycled
    lattice : Hashable
    wavelength : float
        Of the T-matrix being solved, nm.
    """

    solutions: Recycled
    lattice: Hashable
    wavelength: float

    def nearest(self, column: Hashable) -> list[np.ndarray]:
        """Return dipoles of the column at the nearest wavelengths, nearest first."""
        found = self.solutions.nearest((self.lattice, column), self.wavelength)
        return found[:_COLUMNS_SOUGHT]

    def keep(self, column: Hashable, dipoles: np.ndarray) -> None:
        """Keep the dipoles of a column."""
        self.solutions.keep((self.lattice, column), self.wavelength, dipoles)
