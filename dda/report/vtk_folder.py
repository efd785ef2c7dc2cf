"""A run as VTK files: the particle with its cells, and the near fields that were computed."""

from __future__ import annotations

import tomllib
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

import shapes
from dda.errors import InputError
from dda.report.near_folder import BOX, SURFACE, TABLE
from dda.report.status_text import place as place_text
from dda.study.geometry import WINDOW
from dda.study.ledger import Ledger
from dda.study.particle import build_particle
from dda.study.reader import study_from_tables
from dda.study.schema import StudyTables

# Columns of the table that say where and what, not a field.
_PLACE = ("wavelength_nm", "x_nm", "y_nm", "z_nm", "material")
_VOXEL = 11  # the cell type of that name: a box along the axes, its corners with x fastest


@dataclass(frozen=True, eq=False)
class Sheet:
    """A near field as it goes into a VTK file.

    Attributes
    ----------
    name : str
        Of the file, without the suffix.
    mesh : pyvista.DataSet
    about : dict
        Further texts: unit of every array by "unit of NAME".
    """

    name: str
    mesh: Any
    about: dict[str, str] = field(default_factory=dict)


def write_vtk(run: Path, path: Path, point: int | None = None) -> None:
    """Make a folder of VTK files from a run; origin is the centre of the particle's bounds.

    Parameters
    ----------
    run : Path
        The run folder.
    path : Path
        The folder, which must not exist.
    point : int, optional
        The number of the point whose particle is written; by default that of the first one that
        has an answer.

    Raises
    ------
    InputError
        No point is finished, or there is no such point.
    """
    name, cells, centre = _cells_of(run, point)
    path.mkdir()
    about = {"point": name, **_about_cells(cells)}
    _save(path, Sheet("particle", _voxels(cells, centre), about))
    for name in (BOX, TABLE, SURFACE):
        for file in sorted(run.rglob(name)):
            inner = file.parent.relative_to(run)
            if any(part.startswith("earlier-") for part in inner.parts):
                continue
            (path / inner).mkdir(parents=True, exist_ok=True)
            for sheet in _READERS[name](file):
                _save(path / inner, sheet)


def _cells_of(run: Path, number: int | None) -> tuple[str, shapes.Cells, np.ndarray]:
    """Which point it is, its cells as it was solved last, and the centre of its particle."""
    with Ledger(run) as ledger:
        study, about = ledger.study(), ledger.about()
        found = (
            (n, row)
            for n, row in ledger.rows()
            if np.isfinite(row.spacing_nm) and number in (None, n)
        )
        number, row = next(found, (None, None))
    if study is None or number is None or row is None:
        raise InputError(f"{run}: no such point is finished, so its cells are not known")
    place = Path(about.get("study file", run / "study.toml"))
    tables = study_from_tables(tomllib.loads(study[0]), place, study[0])
    values = [row.varied[axis.name] for axis in tables.vary.axes]
    own = StudyTables.model_validate(tables.vary.applied(tables.data, values))
    particle = build_particle(own.particle, place.parent)
    cells = shapes.voxelize(particle, spacing=row.spacing_nm, window=WINDOW)
    name = f"{number}: {place_text(row.varied, row.wavelength_nm)}"
    return name, cells, np.add(*particle.bounds) / 2


def _voxels(cells: shapes.Cells, centre: np.ndarray) -> Any:
    import pyvista

    shape = np.array(cells.shape) + 1
    steps = np.array([(x, y, z) for z in (0, 1) for y in (0, 1) for x in (0, 1)])
    corners = cells.index[:, None, :] + steps
    flat = np.ravel_multi_index(tuple(np.moveaxis(corners, -1, 0)), tuple(shape))
    used, numbers = np.unique(flat, return_inverse=True)
    places = np.stack(np.unravel_index(used, tuple(shape)), axis=1)
    points = cells.origin + (places - 0.5) * cells.spacing - centre
    eight = np.column_stack([np.full(cells.n, 8), numbers.reshape(cells.n, 8)])
    mesh = pyvista.UnstructuredGrid(eight.ravel(), np.full(cells.n, _VOXEL, np.uint8), points)
    mesh.cell_data["material"] = cells.window.argmax(axis=1).astype(np.int32)
    for number, name in enumerate(cells.materials):
        mesh.cell_data[f"fraction of {name}"] = cells.fraction[:, number]
        mesh.cell_data[f"fraction of {name} in the window"] = cells.window[:, number]
    return mesh


def _about_cells(cells: shapes.Cells) -> dict[str, str]:
    names = ", ".join(f"{number} {name}" for number, name in enumerate(cells.materials))
    return {
        "spacing": f"{cells.spacing:.9g} nm",
        "window": f"a ball {cells.window_width:g} cells wide around the cell's centre",
        "material": names,
        "unit of the fractions": "1",
    }


def _boxes(path: Path) -> Iterator[Sheet]:
    import h5py
    import pyvista

    with h5py.File(path, "r") as file:
        for group in file.values():
            axes = [group[f"{axis}_nm"][()] for axis in "xyz"]
            mesh = pyvista.RectilinearGrid(*axes)
            about = {}
            for name, data in group.items():
                if name[1:] == "_nm":
                    continue
                about[f"unit of {name}"] = str(data.attrs.get("unit", "1"))
                values = np.moveaxis(data[()], (0, 1, 2), (2, 1, 0))  # VTK has x fastest
                _add(mesh.point_data, name, values.reshape(-1, *values.shape[3:]))
            about["material"] = _numbered(group.attrs["materials"])
            yield Sheet(f"box_{group.attrs['wavelength_nm']:.10g}_nm", mesh, about)


def _surfaces(path: Path) -> Iterator[Sheet]:
    import h5py
    import pyvista

    with h5py.File(path, "r") as file:
        for group in file.values():
            corners = group["corners_nm"][()]
            count = len(corners)
            four = np.column_stack([np.full(count, 4), np.arange(4 * count).reshape(count, 4)])
            mesh = pyvista.PolyData(corners.reshape(-1, 3), four.ravel())
            about = {"height over the surface": f"{group.attrs['height_nm']:.9g} nm"}
            for name in ("e2", "e2_error", "trusted"):
                about[f"unit of {name}"] = str(group[name].attrs.get("unit", "1"))
                _add(mesh.cell_data, name, group[name][()])
            yield Sheet(f"surface_{group.attrs['wavelength_nm']:.10g}_nm", mesh, about)


def _tables(path: Path) -> Iterator[Sheet]:
    """Planes, lines and lists of points: a grid where the points make one along the axes."""
    import pandas

    table = pandas.read_csv(path)
    for wavelength, rows in table.groupby("wavelength_nm"):
        points = rows[["x_nm", "y_nm", "z_nm"]].to_numpy(float)
        mesh, order = _grid_or_points(points)
        about = {"unit of e2": "incident |E|^2", "unit of e2_error": "incident |E|^2"}
        about["unit of other arrays"] = "incident amplitude"
        names, numbers = np.unique(rows["material"].to_numpy(str), return_inverse=True)
        mesh.point_data["material"] = numbers[order].astype(np.int32)
        about["material"] = _numbered(names)
        for name, values in _vectors(rows).items():
            mesh.point_data[name] = values[order]
        yield Sheet(f"points_{float(str(wavelength)):.10g}_nm", mesh, about)


def _grid_or_points(points: np.ndarray) -> tuple[Any, np.ndarray]:
    """A mesh through points, and which of them stands at each place of it."""
    import pyvista

    axes = [np.unique(points[:, axis], return_inverse=True) for axis in range(3)]
    shape = tuple(len(values) for values, _ in axes)
    if np.prod(shape) == len(points):
        places = np.ravel_multi_index(tuple(index for _, index in axes), shape, order="F")
        if len(np.unique(places)) == len(points):
            return pyvista.RectilinearGrid(*(values for values, _ in axes)), np.argsort(places)
    return pyvista.PolyData(points), np.arange(len(points))


def _vectors(rows: Any) -> dict[str, np.ndarray]:
    """The columns of a table, components x, y, z put together: ex_re, ey_re, ez_re -> e_re."""
    found = {}
    for column in rows.columns:
        if column in _PLACE:
            continue
        words = column.split("_")
        place = next((n for n, w in enumerate(words) if w in ("ex", "hx")), None)
        if place is None:
            if not any(word in ("ey", "ez", "hy", "hz") for word in words):
                values = rows[column].to_numpy()
                found[column] = values.astype(np.uint8 if values.dtype == bool else float)
            continue
        three = [[*words[:place], words[place][0] + axis, *words[place + 1 :]] for axis in "xyz"]
        name = "_".join([*words[:place], words[place][0], *words[place + 1 :]])
        found[name] = np.stack([rows["_".join(one)].to_numpy(float) for one in three], axis=1)
    return found


def _add(data: Any, name: str, values: np.ndarray) -> None:
    if np.iscomplexobj(values):
        data[f"{name}_re"], data[f"{name}_im"] = values.real.copy(), values.imag.copy()
    else:
        data[name] = np.ascontiguousarray(values)


def _numbered(names: Iterable[Any]) -> str:
    return ", ".join(f"{number} {name}" for number, name in enumerate(names))


def _save(folder: Path, sheet: Sheet) -> None:
    import pyvista

    about: Mapping[str, str] = {
        "unit of the points": "nm, from the centre of the particle's bounding box",
        "time dependence": "exp(-i w t)",
        **sheet.about,
    }
    sheet.mesh.field_data["about"] = [f"{key}: {value}" for key, value in about.items()]
    kinds = {pyvista.UnstructuredGrid: "vtu", pyvista.PolyData: "vtp"}
    suffix = kinds.get(type(sheet.mesh), "vtr")
    sheet.mesh.save(folder / f"{sheet.name}.{suffix}")


_READERS = {BOX: _boxes, TABLE: _tables, SURFACE: _surfaces}
