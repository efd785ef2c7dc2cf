"""In which order the points of a study are computed."""

from __future__ import annotations

from collections.abc import Sequence

from dda.study.points import Point

# Every so manieth wavelength comes first, then the middles between them, then the rest: a
# solution between known ones is found in fewer steps than one beyond them.
_STRIDE = 4


def chains(points: Sequence[Point], many: Sequence[bool] | None = None) -> list[list[int]]:
    """Return the points as chains: each a list of numbers to be computed in its order.

    Points of a chain share the particle, its cells and the light; chains that share the cells
    stand side by side. What the points of a chain leave behind helps the next ones.

    Parameters
    ----------
    points : sequence of Point
        Those of one combination of varied keys side by side, by wavelength.
    many : sequence of bool, optional
        Whether the solutions of a whole chain can be kept, for each point; if not, the
        wavelengths are taken one after the other. By default they can.
    """
    by_geometry: dict[str, list[list[int]]] = {}
    last = None
    for number, point in enumerate(points):
        same = by_geometry.setdefault(point.geometry_key, [])
        if point.tables is not last:
            same.append([])
            last = point.tables
        same[-1].append(number)
    return [
        [chain[i] for i in coarse_first(len(chain))] if many is None or many[chain[0]] else chain
        for same in by_geometry.values()
        for chain in same
    ]


def coarse_first(count: int) -> list[int]:
    """Return the numbers from 0 to count - 1, every fourth first.

    >>> coarse_first(9)
    [0, 4, 8, 2, 6, 1, 3, 5, 7]
    """
    order: dict[int, None] = {}
    stride = _STRIDE
    while stride:
        order |= dict.fromkeys([*range(0, count, stride), *([count - 1] if count else [])])
        stride //= 2
    return list(order)
