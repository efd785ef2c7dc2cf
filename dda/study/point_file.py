"""The file of a point: its answers at every spacing and whatever arrays the study asked for."""

from __future__ import annotations

import hashlib
import io
import json
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from dda.accuracy import Level
from dda.errors import ComputationError, InputError, write_error
from dda.files import write_aside
from dda.study.more import Array

FOLDER = "points"
_LEVEL_COLUMNS = {
    "spacing": ("spacing_nm", lambda level: level.spacing),
    "cells": ("cells", lambda level: level.cells),
    "c_ext": ("c_ext_nm2", lambda level: level.sections[0]),
    "c_abs": ("c_abs_nm2", lambda level: level.sections[1]),
    "c_sca": ("c_sca_nm2", lambda level: level.sections[2]),
    "c_ext_solver_error": ("c_ext_solver_error_nm2", lambda level: level.solver_error[0]),
    "c_abs_solver_error": ("c_abs_solver_error_nm2", lambda level: level.solver_error[1]),
    "c_sca_solver_error": ("c_sca_solver_error_nm2", lambda level: level.solver_error[2]),
    "iterations": ("iterations", lambda level: level.iterations),
    "products": ("products", lambda level: level.products),
    "residual": ("residual", lambda level: level.residual),
    "seconds": ("seconds", lambda level: level.seconds),
}


def place_of(identity: str) -> str:
    """Return the name of a point's file, relative to the run folder.

    >>> place_of("0123abcd")
    'points/01/0123abcd.h5'
    """
    return f"{FOLDER}/{identity[:2]}/{identity}.h5"


def write_point(
    folder: Path,
    identity: str,
    about: Mapping[str, Any],
    levels: Sequence[Level],
    arrays: Sequence[Array],
) -> tuple[str, str]:
    """Write the file of a point, whole or not at all.

    Parameters
    ----------
    folder : Path
        The run folder.
    identity : str
    about : mapping
        What the file says of itself: wavelength, varied keys, the study's name.
    levels : sequence of Level
        Coarse to fine; they become the datasets of the group ``levels``, one value a spacing.
    arrays : sequence of Array

    Returns
    -------
    file, checksum : str
        The path relative to the folder, and the SHA-256 of the content.

    Raises
    ------
    ComputationError
        The file cannot be written.
    """
    content = _content(identity, about, levels, arrays)
    return _write(folder, identity, content), hashlib.sha256(content).hexdigest()


def copy_point(source: Path, folder: Path, identity: str) -> str:
    """Copy the file of a point from one run folder to another, whole or not at all.

    Returns
    -------
    str
        The path relative to the folder.

    Raises
    ------
    ComputationError
        The file cannot be written.
    """
    return _write(folder, identity, (source / place_of(identity)).read_bytes())


def _write(folder: Path, identity: str, content: bytes) -> str:
    name = place_of(identity)
    path = folder / name
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        write_aside(path, content)
    except (OSError, InputError) as error:
        said = str(write_error(path, error) if isinstance(error, OSError) else error)
        raise ComputationError(said) from error
    return name


def read_point(path: Path) -> dict[str, np.ndarray]:
    """Return the arrays of a point's file by name.

    Parameters
    ----------
    path : Path

    Returns
    -------
    dict of ndarray
        "levels/spacing" (nm) and its like, one value a spacing, and what the study asked for.
    """
    import h5py

    found: dict[str, np.ndarray] = {}

    def visit(name: str, item: Any) -> None:
        if isinstance(item, h5py.Dataset):
            found[name] = item[()]

    with h5py.File(path, "r") as file:
        file.visititems(visit)
    return found


def damaged(folder: Path, files: Sequence[tuple[str, str, str]]) -> list[tuple[str, str, str]]:
    """Return which files are not what they were when they were written.

    Parameters
    ----------
    folder : Path
        The run folder.
    files : sequence of (identity, file, checksum)

    Returns
    -------
    list of (identity, file, what is wrong)
    """
    found = []
    for identity, name, checksum in files:
        try:
            with (folder / name).open("rb") as file:
                now = hashlib.file_digest(file, "sha256").hexdigest()
        except FileNotFoundError:
            found.append((identity, name, "missing"))
        except OSError as error:
            found.append((identity, name, f"cannot be read ({error.strerror})"))
        else:
            if now != checksum:
                found.append((identity, name, "changed since it was written"))
    return found


def _content(
    identity: str, about: Mapping[str, Any], levels: Sequence[Level], arrays: Sequence[Array]
) -> bytes:
    import h5py

    buffer = io.BytesIO()
    with h5py.File(buffer, "w") as file:
        file.attrs["identity"] = identity
        file.attrs["conventions"] = (
            "lengths in nm, time dependence exp(-i w t), fields in units of the incident amplitude"
        )
        for key, value in about.items():
            plain = isinstance(value, str | int | float)
            file.attrs[key] = value if plain else json.dumps(value, default=str)
        group = file.create_group("levels")
        group.attrs["about"] = "the answers at each spacing, coarse to fine"
        for name, (label, read) in _LEVEL_COLUMNS.items():
            _put(group, name, np.array([read(level) for level in levels]), _unit(label), label)
        for array in arrays:
            _put(file, array.name, array.values, array.unit, array.about)
    return buffer.getvalue()


def _put(group: Any, name: str, values: np.ndarray, unit: str, about: str) -> None:
    squeezed = values.size > 1000
    data = group.create_dataset(
        name, data=values, **({"compression": "gzip", "shuffle": True} if squeezed else {})
    )
    data.attrs["unit"] = unit
    data.attrs["about"] = about


def _unit(label: str) -> str:
    for ending, unit in (("_nm2", "nm^2"), ("_nm", "nm"), ("seconds", "s")):
        if label.endswith(ending):
            return unit
    return ""
