"""The voxelizer: cells per second for a solid and for a mesh of the same shape."""

from __future__ import annotations

import tempfile
from pathlib import Path

import shapes
from validation.measure import Figure, bench, medians


@bench("voxelizer")
def voxelizer(cells: int) -> list[Figure]:
    """Cells per second of a solid, a union of solids and a mesh."""
    import trimesh

    ball = trimesh.creation.icosphere(subdivisions=4, radius=30.0)
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "ball.stl"
        ball.export(path)
        bodies = {
            "sphere (solid)": shapes.sphere(60.0, "gold"),
            "rounded cube (solid)": shapes.cube(edge=60.0, rounding=8.0, material="gold"),
            f"sphere (mesh of {len(ball.faces)} faces)": shapes.from_mesh(path, material="gold"),
        }
    count = {name: shapes.voxelize(body, cells=cells).n for name, body in bodies.items()}
    actions = {
        name: lambda body=body: shapes.voxelize(body, cells=cells) for name, body in bodies.items()
    }
    seconds = medians(actions, repeats=3)
    return [
        Figure(f"{name}, {cells} across: voxelized", count[name] / seconds[name] / 1e6, "Mcell/s")
        for name in bodies
    ]
