"""How one axis of the box is transformed: whole, or folded at a mirror plane."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from .fft import FFT


@dataclass(frozen=True)
class Axis:
    """One axis of a convolution.

    Attributes
    ----------
    number : {0, 1, 2}
    cells : int
        Cells stored along the axis: all of them, or those from the mirror plane outwards.
    length : int
        Even length L of the periodic transform of the unfolded axis.
    sign : {0, 1, -1}
        0 for a whole axis; else how the field answers to the mirror: the components along the
        plane are even for +1 and odd for -1, the one across it the other way round.
    centred : bool
        Whether the mirror plane runs through the first cell (an odd number of cells) or along
        its face.

    Notes
    -----
    A folded axis holds N + 1 = L/2 + 1 frequencies. With the plane along a face the sequences
    are half-sample symmetric, with transforms DCT-II and DST-II; with the plane through a cell,
    whole-sample symmetric, with DCT-I and DST-I. An odd sequence begins at frequency 1, so its
    data sit one place further on when the transform keeps places.

    References
    ----------
    Martucci, S. A. (1994), IEEE Trans. Signal Process. 42, 1038.
    """

    number: int
    cells: int
    length: int
    sign: int = 0
    centred: bool = False

    @property
    def folded(self) -> bool:
        """Whether the axis is folded at a mirror plane."""
        return self.sign != 0

    @property
    def places(self) -> int:
        """Frequencies along the axis."""
        return self.length // 2 + 1 if self.folded else self.length

    @property
    def stored(self) -> int:
        """Places that may hold data before the transform."""
        return self.cells + (1 if self.folded and not self.centred else 0)

    def odd(self, component: int) -> bool:
        """Whether a component is odd under the mirror."""
        return self.folded and (self.sign < 0) != (component == self.number)

    def shift(self, component: int) -> int:
        """Place of the first cell's data."""
        return 1 if self.odd(component) and not self.centred else 0

    def transform(self, fft: FFT, block: np.ndarray, axis: int, components: int, forward: bool):
        """Transform `block` in place along `axis`; its axis `components` holds the three."""
        if not self.folded:
            fft.complex_transform(block, axis, forward)
            return
        n = self.length // 2
        for part, odd in self._parities():
            index: list = [slice(None)] * block.ndim
            index[components] = part
            if self.centred:
                kind = 1
                index[axis] = slice(1, n) if odd else slice(0, n + 1)
            else:
                kind = 2 if forward else 3
                index[axis] = slice(1, n + 1) if odd else slice(0, n)
            view = block[tuple(index)]
            if view.shape[axis]:  # a single layer of cells has no odd part
                fft.real_transform(view, axis, "dst" if odd else "dct", kind)
            if forward:
                # frequencies that such a sequence does not have
                for place in self._empty(odd):
                    index[axis] = place
                    block[tuple(index)] = 0

    def _parities(self) -> Iterator[tuple[slice, bool]]:
        a = self.number
        across = slice(a, a + 1)
        along = (slice(1, 3), slice(0, 3, 2), slice(0, 2))[a]
        yield across, self.odd(a)
        yield along, self.odd((a + 1) % 3)

    def _empty(self, odd: bool) -> tuple[int, ...]:
        n = self.length // 2
        if self.centred:
            return (0, n) if odd else ()
        return (0,) if odd else (n,)


def factors(axes: tuple[Axis, Axis, Axis]) -> np.ndarray:
    """What multiplies the stored spectrum between two components.

    Returns
    -------
    ndarray, shape (3, 3)
        Row: component of the field; column: component of the dipoles. Real unless some axes are
        folded and others not.

    Notes
    -----
    An odd kernel takes an even sequence to an odd one with factor +1, an odd one to an even one
    with -1; unfolded it has the factor -i. The stored spectrum holds (-i)^2 already.
    """
    out = np.ones((3, 3), complex)
    for a in range(3):
        for b in range(3):
            if a == b:
                continue
            product = complex(-1)
            for axis in (axes[a], axes[b]):
                if axis.folded:
                    product *= -1 if axis.odd(b) else 1
                else:
                    product *= -1j
            out[a, b] = product
    return out if np.any(out.imag) else out.real.copy()
