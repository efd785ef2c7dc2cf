"""Distance from a particle's outer surface."""

from __future__ import annotations

import numpy as np

from shapes import Particle


def outer_distance(particle: Particle, points: np.ndarray) -> np.ndarray | None:
    """Signed distance of points from the surface between particle and host.

    Parameters
    ----------
    particle : shapes.Particle
    points : ndarray, shape (n, 3)
        nm.

    Returns
    -------
    ndarray, shape (n,), or None
        nm, positive inside; near the surface to the accuracy of the parts' own distances, far
        from it a bound. None if a part (a voxel image) has no distance.

    Examples
    --------
    >>> import shapes
    >>> outer_distance(shapes.sphere(diameter=20), np.array([[0.0, 0, 12], [4, 0, 0]])).tolist()
    [-2.0, 6.0]
    """
    total = np.full(len(points), -np.inf)
    for part in particle.parts:
        measure = getattr(part.body, "surface_distance", None)
        if measure is None:
            return None
        distance = measure(points)
        if part.material is None:
            total = np.minimum(total, -distance)
        else:
            total = np.maximum(total, distance)
    return total
