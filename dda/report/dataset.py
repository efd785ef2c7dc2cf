"""A run as labelled arrays: the table of results over the varied keys and the wavelength."""

from __future__ import annotations

import json
import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from dda.errors import InputError
from dda.report.columns import CONVENTIONS, attributes_of, plain_name
from dda.report.key_units import unit_of
from dda.study.ledger import WAITING, Ledger
from dda.study.ledger_records import Entry
from dda.study.point_file import damaged
from dda.study.rows import COLUMNS, Row

if TYPE_CHECKING:
    import xarray

WAVELENGTH, POINT = "wavelength", "point"
# What an integer or a text is where there is no answer; numbers are NaN.
_MISSING: dict[type, Any] = {int: 0, str: "", float: math.nan}


def open_run(path: str | Path) -> xarray.Dataset:
    """Return the results of a run, finished or not, as an `xarray.Dataset`.

    Parameters
    ----------
    path : str or Path
        The run folder.

    Returns
    -------
    xarray.Dataset
        Variables ``c_ext``, ``c_abs``, ``c_sca`` (nm^2) with ``c_ext_error`` and its like, the
        efficiencies, ``status`` and ``message`` and every other column of ``spectrum.csv``
        without the unit in its name, which is the attribute ``units``. The dimensions are the
        varied keys of the study and ``wavelength`` (nm); where keys vary side by side, ``point``
        and ``wavelength``, the keys being coordinates along ``point``; where not all
        combinations are there, ``point`` alone. ``number`` is the point's number, from 0. What
        has no answer yet is NaN (integers 0) and has the status "waiting". Values of varied keys
        that are neither all numbers nor all texts are JSON texts.

    Raises
    ------
    InputError
        There is no run.

    Examples
    --------
    >>> import tempfile
    >>> from dda.study.ledger import Ledger
    >>> from dda.study.ledger_records import Answered, Entry
    >>> from dda.study.rows import Row
    >>> folder = tempfile.TemporaryDirectory()
    >>> with Ledger(Path(folder.name), write=True) as ledger:  # what `dda run` does
    ...     ledger.begin("", {"name": "sizes", "particle": {"shape": "cube"}}, {})
    ...     edges = {"a": 40.0, "b": 50.0}
    ...     ledger.set_points(
    ...         Entry(n, name, None, 550.0, {"particle.edge": edge}, 1.0)
    ...         for n, (name, edge) in enumerate(edges.items())
    ...     )
    ...     ledger.record("b", Answered(Row(550.0, c_ext_nm2=9000.0, status="converged")))
    >>> run = open_run(folder.name)
    >>> dict(run.sizes)
    {'particle.edge': 2, 'wavelength': 1}
    >>> float(run.c_ext.sel({"particle.edge": 50, "wavelength": 550})), run.c_ext.units
    (9000.0, 'nm^2')
    >>> run["particle.edge"].units, run.status.values[:, 0].tolist()
    ('nm', ['waiting', 'converged'])
    >>> folder.cleanup()
    """
    import xarray

    folder = Path(path)
    with Ledger(folder) as ledger:
        study = ledger.study()
        entries = list(ledger.entries())
        rows = dict(ledger.rows())
    if study is None or not entries:
        raise InputError(f"{folder}: no study has been run in it yet")
    text, tables, versions, _ = study
    layout = layout_of(entries)
    numbers = np.array([entry.number for entry in entries])
    variables: dict[str, tuple] = {
        "number": _variable(layout, numbers, {"long_name": "number of the point, from 0"})
    }
    for column in [*COLUMNS, *_more_columns(rows.values())]:
        if column != "wavelength_nm":
            values = _column(column, entries, rows)
            name = plain_name(column) if plain_name(column) not in variables else column
            variables[name] = _variable(layout, values, attributes_of(column))
    coordinates = {
        name: (dims, values, _key_attributes(name, tables))
        for name, (dims, values) in layout.coordinates.items()
    }
    about = {
        "title": str(tables.get("name") or folder.name),
        "finished_points": len(rows),
        "points": len(entries),
        "conventions": CONVENTIONS,
        "source": f"motelight {version('motelight')}",
        "versions": json.dumps(versions),
        "study": text,
    }
    return xarray.Dataset(variables, coordinates, about)


def open_point(run: str | Path, point: int | str) -> xarray.Dataset:
    """Return the arrays of one point: its answers at each spacing, and what the study asked for.

    Parameters
    ----------
    run : str or Path
        The run folder.
    point : int or str
        Its number (``open_run(run).number``), or the fingerprint that names its file.

    Returns
    -------
    xarray.Dataset
        The datasets of the point's file; a ``/`` in a name is a dot: ``levels.c_ext`` is the
        extinction cross section at each spacing, along the dimension ``level``. ``units`` and
        ``long_name`` are attributes, and so is what is known of the point.

    Raises
    ------
    InputError
        There is no such point, it has no file, or the file is not what was written.
    """
    import h5py
    import xarray

    folder = Path(run)
    with Ledger(folder) as ledger:
        entry = _entry_of(ledger, folder, point)
        answered = ledger.answer(entry.identity)
    if answered is None:
        raise InputError(f"{folder}: point {entry.number} has no answer yet")
    if answered.file is None:
        reason = answered.row.message or "no arrays were kept"
        raise InputError(f"{folder}: point {entry.number} has no file: {reason}")
    known = [(entry.identity, answered.file, answered.checksum or "")]
    for _, name, wrong in damaged(folder, known):
        raise InputError(f"{folder / name}: {wrong}; `dda run` computes it again")
    variables: dict[str, tuple] = {}

    def visit(name: str, item: Any) -> None:
        if isinstance(item, h5py.Dataset):
            plain = name.replace("/", ".")
            dims = [f"{plain}.{axis}" for axis in range(item.ndim)]
            if name.startswith("levels/"):
                dims[0] = "level"
            attributes = {"units": str(item.attrs.get("unit", "")) or "1"}
            attributes["long_name"] = str(item.attrs.get("about", plain))
            variables[plain] = (dims, item[()], attributes)

    with h5py.File(folder / answered.file, "r") as file:
        file.visititems(visit)
        about = {key: _plain(value) for key, value in file.attrs.items()}
    about |= {"number": entry.number, "wavelength_nm": entry.wavelength_nm}
    about |= {"status": answered.row.status, "message": answered.row.message}
    about |= {key: _scalar(value) for key, value in entry.varied.items()}
    return xarray.Dataset(variables, attrs=about)


@dataclass(frozen=True)
class Layout:
    """How points in a row become an array.

    Attributes
    ----------
    dims : tuple of str
    shape : tuple of int
    order : ndarray of int
        For each place of the array, in C order, the point that stands there.
    coordinates : dict
        Name -> dimensions and values.
    """

    dims: tuple[str, ...]
    shape: tuple[int, ...]
    order: np.ndarray
    coordinates: Mapping[str, tuple[tuple[str, ...], np.ndarray]]


def layout_of(entries: Sequence[Entry]) -> Layout:
    """Return the tightest array that holds all points with no place empty."""
    keys = list(entries[0].varied)
    columns = {key: _axis([entry.varied.get(key) for entry in entries]) for key in keys}
    wavelengths = np.array([entry.wavelength_nm for entry in entries])
    axes = [np.unique(column, return_inverse=True) for column in columns.values()]
    waves = np.unique(wavelengths, return_inverse=True)
    # Varied keys keep the order in which the study lists them.
    axes = [_in_order_of_appearance(*axis) for axis in axes]
    if (grid := _grid([*axes, waves], len(entries))) is not None:
        names = (*keys, WAVELENGTH)
        values = [axis[0] for axis in [*axes, waves]]
        coordinates = {n: ((n,), v) for n, v in zip(names, values, strict=True)}
        return Layout(names, tuple(map(len, values)), grid, coordinates)
    together = [json.dumps(dict(entry.varied)) for entry in entries]
    sets = _in_order_of_appearance(*np.unique(np.array(together), return_inverse=True))
    if (grid := _grid([sets, waves], len(entries))) is not None:
        shape = len(sets[0]), len(waves[0])
        firsts = grid.reshape(shape)[:, 0]
        coordinates = {key: ((POINT,), column[firsts]) for key, column in columns.items()}
        coordinates[WAVELENGTH] = ((WAVELENGTH,), waves[0])
        return Layout((POINT, WAVELENGTH), shape, grid, coordinates)
    coordinates = {key: ((POINT,), column) for key, column in columns.items()}
    coordinates[WAVELENGTH] = ((POINT,), wavelengths)
    return Layout((POINT,), (len(entries),), np.arange(len(entries)), coordinates)


def _grid(axes: Sequence[tuple[np.ndarray, np.ndarray]], count: int) -> np.ndarray | None:
    """Return the point at each place of the grid of all axes; None if it does not fit."""
    shape = tuple(len(values) for values, _ in axes)
    if math.prod(shape) != count:
        return None
    places = np.ravel_multi_index(tuple(index for _, index in axes), shape)
    order = np.full(count, -1)
    order[places] = np.arange(count)
    return None if (order < 0).any() else order


def _in_order_of_appearance(values: np.ndarray, index: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    first = np.full(len(values), len(index))
    np.minimum.at(first, index, np.arange(len(index)))
    order = np.argsort(first)
    rank = np.empty(len(values), int)
    rank[order] = np.arange(len(values))
    return values[order], rank[index]


def _axis(values: Sequence[Any]) -> np.ndarray:
    """Values of a varied key as an array: numbers, truth values or texts."""
    kinds = {type(value) for value in values}
    if kinds == {bool} or kinds == {str}:
        return np.array(values)
    if kinds <= {int, float}:
        return np.array(values, int if kinds == {int} else float)
    return np.array([json.dumps(value) for value in values])


def _column(column: str, entries: Sequence[Entry], rows: Mapping[int, Row]) -> np.ndarray:
    if column == "status":
        return np.array([rows[e.number].status if e.number in rows else WAITING for e in entries])
    if column not in COLUMNS:
        return np.array(
            [
                rows[e.number].more.get(column, math.nan) if e.number in rows else math.nan
                for e in entries
            ],
            float,
        )
    kind = type(getattr(Row(0.0), column))
    missing = _MISSING[kind]
    return np.array(
        [getattr(rows[e.number], column) if e.number in rows else missing for e in entries], kind
    )


def _more_columns(rows: Iterable[Row]) -> list[str]:
    return list(dict.fromkeys(key for row in rows for key in row.more))


def _variable(layout: Layout, values: np.ndarray, attributes: Mapping[str, str]) -> tuple:
    return layout.dims, values[layout.order].reshape(layout.shape), dict(attributes)


def _key_attributes(name: str, tables: Mapping[str, Any]) -> dict[str, str]:
    if name == WAVELENGTH:
        return {"units": "nm", "long_name": "vacuum wavelength"}
    unit = unit_of(name, tables)
    return {"long_name": name} | ({"units": unit} if unit is not None else {})


def _entry_of(ledger: Ledger, folder: Path, point: int | str) -> Entry:
    entry = ledger.entry(point)
    if entry is None:
        known = f"numbers go from 0 to {sum(ledger.counts().values()) - 1}"
        raise InputError(f"{folder}: there is no point {point!r}; {known}")
    return entry


def _plain(value: Any) -> Any:
    return value.item() if isinstance(value, np.generic) else value


def _scalar(value: Any) -> Any:
    return value if isinstance(value, str | int | float) else json.dumps(value)
