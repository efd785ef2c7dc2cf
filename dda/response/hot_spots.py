"""Numbers that describe where and how strongly a field is concentrated."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.sparse import coo_matrix
from scipy.sparse.csgraph import connected_components
from scipy.spatial import cKDTree

from ..errors import InputError

PERCENTILES = (50.0, 90.0, 95.0, 99.0)


@dataclass(frozen=True, eq=False)
class FieldNumbers:
    """Statistics of ``|E|^2`` over a surface or a volume.

    Attributes
    ----------
    maximum : float
        Largest ``|E|^2``.
    place : ndarray, shape (3,)
        Where it is, nm.
    mean_e2, mean_e4 : float
        Means of ``|E|^2`` and ``|E|^4``, weighted with the area or volume of each point.
    percentages : tuple of float
        Per cent of the area or volume.
    e2_percentiles, e4_percentiles : ndarray
        ``|E|^2`` and ``|E|^4`` that those per cent do not exceed.
    extent : float
        Area (nm^2) or volume (nm^3) of all points.
    error : float
        Error bar of `maximum`; NaN if none was given.
    """

    maximum: float
    place: np.ndarray
    mean_e2: float
    mean_e4: float
    percentages: tuple[float, ...]
    e2_percentiles: np.ndarray
    e4_percentiles: np.ndarray
    extent: float
    error: float = float("nan")


def field_numbers(
    points: np.ndarray,
    e2: np.ndarray,
    weights: np.ndarray,
    *,
    percentages: Sequence[float] = PERCENTILES,
    e2_error: np.ndarray | None = None,
) -> FieldNumbers:
    """Describe ``|E|^2`` over points.

    Parameters
    ----------
    points : ndarray, shape (n, 3)
        nm.
    e2 : ndarray, shape (n,)
        ``|E|^2`` over that of the incident wave.
    weights : ndarray, shape (n,)
        Area (nm^2) or volume (nm^3) of each point.
    percentages : sequence of float
    e2_error : ndarray, shape (n,), optional

    Returns
    -------
    FieldNumbers

    Examples
    --------
    >>> found = field_numbers(np.zeros((4, 3)), np.array([1.0, 2, 3, 10]), np.ones(4))
    >>> found.maximum, found.mean_e2, found.mean_e4, found.e2_percentiles[0].item()
    (10.0, 4.0, 28.5, 2.0)
    """
    weights = _checked(points, e2, weights)
    top = int(np.argmax(e2))
    order = np.argsort(e2)
    below = np.cumsum(weights[order])
    share = np.asarray(percentages, float) / 100 * below[-1]
    rank = np.minimum(np.searchsorted(below, share * (1 - 1e-12)), len(e2) - 1)
    percentiles = e2[order][rank]
    return FieldNumbers(
        float(e2[top]),
        np.array(points[top]),
        float(np.average(e2, weights=weights)),
        float(np.average(e2**2, weights=weights)),
        tuple(percentages),
        percentiles,
        percentiles**2,
        float(below[-1]),
        float("nan") if e2_error is None else float(e2_error[top]),
    )


@dataclass(frozen=True, eq=False)
class HotSpot:
    """A connected set of points where ``|E|^2`` exceeds the threshold.

    Attributes
    ----------
    place : ndarray, shape (3,)
        Of the largest field, nm.
    peak : float
        ``|E|^2`` there.
    extent : float
        Area (nm^2) or volume (nm^3).
    share_e2, share_e4 : float
        Its part of the integral of ``|E|^2`` and of ``|E|^4`` over all points.
    points : int
    """

    place: np.ndarray
    peak: float
    extent: float
    share_e2: float
    share_e4: float
    points: int


@dataclass(frozen=True, eq=False)
class HotSpots:
    """All hot spots, the one with the largest share of ``|E|^4`` first.

    Attributes
    ----------
    threshold : float
        ``|E|^2`` that a hot spot exceeds.
    spots : tuple of HotSpot
    extent : float
        Area or volume above the threshold, all spots together.
    """

    threshold: float
    spots: tuple[HotSpot, ...]
    extent: float

    @property
    def count(self) -> int:
        """Number of hot spots."""
        return len(self.spots)


def find_hot_spots(
    points: np.ndarray,
    e2: np.ndarray,
    weights: np.ndarray,
    step: float,
    threshold: float | None = None,
) -> HotSpots:
    """Find connected regions of strong field, on a surface or in a volume.

    Parameters
    ----------
    points : ndarray, shape (n, 3)
        nm.
    e2 : ndarray, shape (n,)
        ``|E|^2`` over that of the incident wave.
    weights : ndarray, shape (n,)
        Area (nm^2) or volume (nm^3) of each point.
    step : float
        Distance between neighbouring points, nm; points up to 1.5 steps apart are connected.
    threshold : float, optional
        Of ``|E|^2``; half the largest by default.

    Returns
    -------
    HotSpots

    Examples
    --------
    >>> x = np.arange(10.0)
    >>> points = np.stack([x, 0 * x, 0 * x], axis=1)
    >>> e2 = np.array([9.0, 8, 1, 1, 1, 1, 1, 10, 1, 1])
    >>> found = find_hot_spots(points, e2, np.ones(10), step=1.0)
    >>> found.count, found.extent, found.spots[0].place.tolist()
    (2, 3.0, [0.0, 0.0, 0.0])
    """
    weights = _checked(points, e2, weights)
    if not step > 0:
        raise InputError(f"step = {step} must be a length greater than 0 (nm)")
    level = float(e2.max()) / 2 if threshold is None else float(threshold)
    above = np.flatnonzero(e2 > level)
    label, count = _connected(points[above], 1.5 * step)
    all_e2, all_e4 = float(e2 @ weights), float(e2**2 @ weights)
    spots = []
    for number in range(count):
        rows = above[label == number]
        top = rows[np.argmax(e2[rows])]
        spots.append(
            HotSpot(
                np.array(points[top]),
                float(e2[top]),
                float(weights[rows].sum()),
                float(e2[rows] @ weights[rows]) / all_e2,
                float(e2[rows] ** 2 @ weights[rows]) / all_e4,
                len(rows),
            )
        )
    spots.sort(key=lambda spot: -spot.share_e4)
    return HotSpots(level, tuple(spots), float(weights[above].sum()))


def extent_above(e2: np.ndarray, weights: np.ndarray, thresholds: Sequence[float]) -> np.ndarray:
    """Area or volume where ``|E|^2`` exceeds each threshold.

    >>> extent_above(np.array([1.0, 5, 9]), np.array([2.0, 2, 1]), [0, 4]).tolist()
    [5.0, 3.0]
    """
    return np.array([float(weights[e2 > level].sum()) for level in thresholds])


def _connected(points: np.ndarray, reach: float) -> tuple[np.ndarray, int]:
    if len(points) == 0:
        return np.empty(0, int), 0
    pairs = cKDTree(points).query_pairs(reach, output_type="ndarray")
    size = len(points)
    graph = coo_matrix((np.ones(len(pairs), bool), (pairs[:, 0], pairs[:, 1])), (size, size))
    count, label = connected_components(graph, directed=False)
    return label, int(count)


def _checked(points: np.ndarray, e2: np.ndarray, weights: np.ndarray) -> np.ndarray:
    weights = np.broadcast_to(np.asarray(weights, float), np.shape(e2))
    if len(e2) == 0 or len(points) != len(e2):
        raise InputError("hot spots need at least one point, and one |E|^2 for each point")
    if not np.isfinite(e2).all() or not weights.sum() > 0:
        raise InputError("|E|^2 must be finite and the weights positive")
    return weights
