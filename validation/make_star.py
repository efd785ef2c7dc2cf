"""Makes the nanostar that ships as an example of a mesh: python -m validation.make_star

Invented, not measured: a round core with eight spikes of unequal length and rounded tips.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray

STAR = Path(__file__).parents[1] / "dda" / "study" / "examples" / "star.stl"

CORE_RADIUS = 17.0  # nm
BASE_RADIUS, TIP_RADIUS = 7.5, 2.2  # nm
FILLET = 3.0  # nm, how softly spikes grow out of the core
LENGTHS = (36.0, 33.5, 35.0, 31.0, 36.0, 32.0, 34.0, 35.0)  # nm from the centre to the tips
SPACING = 0.6  # nm, of the samples that the surface is drawn through
TRIANGLES = 4000


def make_star(path: Path = STAR) -> Path:
    """Write the nanostar as a binary STL file in nm, about 70 nm from tip to tip.

    Raises
    ------
    RuntimeError
        If the surface did not come out closed.
    """
    import pyvista
    import trimesh

    number = int(2 * (max(LENGTHS) + 3) / SPACING)
    axis = (np.arange(number) - (number - 1) / 2) * SPACING
    points = np.stack(np.meshgrid(axis, axis, axis, indexing="ij"), axis=-1)
    grid = pyvista.ImageData(
        dimensions=(number,) * 3, spacing=(SPACING,) * 3, origin=(axis[0],) * 3
    )
    grid["distance"] = _distance(points).ravel(order="F")
    surface = grid.contour([0.0], scalars="distance").triangulate().clean()
    surface = surface.decimate(1.0 - TRIANGLES / surface.n_cells).clean()
    faces = surface.regular_faces
    mesh = trimesh.Trimesh(surface.points.astype(np.float32), faces, process=True)
    trimesh.repair.fix_normals(mesh)
    if not mesh.is_watertight or mesh.volume <= 0:
        raise RuntimeError("the star's surface is not closed: change SPACING or TRIANGLES")
    path.parent.mkdir(parents=True, exist_ok=True)
    mesh.export(path)
    return path


def _distance(points: NDArray) -> NDArray:
    """Approximate distance from the star's surface, negative inside, nm; points (..., 3)."""
    distance = np.linalg.norm(points, axis=-1) - CORE_RADIUS
    for direction, length in zip(_directions(len(LENGTHS)), LENGTHS, strict=True):
        reach = length - TIP_RADIUS
        along = np.clip(points @ direction, 0.0, reach)
        radius = BASE_RADIUS + (TIP_RADIUS - BASE_RADIUS) * along / reach
        spike = np.linalg.norm(points - along[..., None] * direction, axis=-1) - radius
        # smooth minimum: a polynomial fillet where the two are within FILLET of each other
        overlap = np.maximum(FILLET - np.abs(distance - spike), 0.0)
        distance = np.minimum(distance, spike) - overlap**2 / (4.0 * FILLET)
    return distance


def _directions(number: int) -> NDArray:
    """Directions spread evenly over the sphere (a spiral by the golden angle), (number, 3)."""
    height = 1.0 - (2.0 * np.arange(number) + 1.0) / number
    angle = np.arange(number) * np.pi * (3.0 - np.sqrt(5.0)) + 0.3
    ring = np.sqrt(1.0 - height**2)
    return np.stack([ring * np.cos(angle), ring * np.sin(angle), height], axis=1)


if __name__ == "__main__":
    print(make_star())
