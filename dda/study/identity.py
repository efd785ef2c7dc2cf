"""What determines the answer of a point, as a fingerprint by which finished answers are found."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterator, Mapping, Sequence
from itertools import groupby
from pathlib import Path
from typing import Any

import numpy as np

from dda.errors import InputError
from dda.materials.anisotropic import AnisotropicMaterial
from dda.study.media import media_of
from dda.study.points import Point
from dda.study.reader import Study
from dda.study.rows import Row

#: Raised whenever the same study gives other numbers than before: answers of another revision are
#: computed again.
ANSWERS = 1
# Keys that do not change the answer of a point.
_ASIDE: Any = {
    "name": True,
    "vary": True,
    "limits": True,
    "near_field": True,
    "materials": True,  # their permittivities count, whatever they come from
    "light": {"wavelengths"},
    "solver": {"threads", "processes"},
    "accuracy": {"preview"},
}


def fingerprints(points: Sequence[Point]) -> list[str]:
    """Return the fingerprint of each point.

    Two points have the same one exactly if the same computation answers both: the tables, the
    contents of mesh and image files, and the permittivities at the wavelength are the same.

    Parameters
    ----------
    points : sequence of Point
        Points that share their tables are quickest side by side.

    Returns
    -------
    list of str
        Hexadecimal, 32 characters.

    Raises
    ------
    Mistake
        A material is not known at a wavelength, or a file is missing.
    """
    found = []
    digests: dict[Path, str] = {}
    media: dict[str, list[str]] = {}
    for _, group in groupby(points, key=lambda point: id(point.tables)):
        same = list(group)
        start = _of_tables(same[0], digests)
        names = sorted(set(_materials(same[0].particle.model_dump(exclude_none=True))))
        tables = same[0].host, same[0].materials, names, [point.wavelength for point in same]
        if (key := str(tables)) not in media:
            media[key] = _permittivities(same, names)
        for point, values in zip(same, media[key], strict=True):
            text = f"{start}\n{point.wavelength!r}\n{values}"
            found.append(hashlib.sha256(text.encode()).hexdigest()[:32])
    return found


def files_of(study: Study) -> dict[str, str]:
    """Return the files that a study names, and the fingerprints of their contents.

    Parameters
    ----------
    study : Study
    """
    names = sorted({text for text in _texts(study.data) if _is_file(study.folder / text)})
    return {name: _digest(study.folder / name) for name in names}


def near_fingerprint(point: Point, rows: Sequence[Row]) -> str:
    """Return the fingerprint of a combination's near field, which the spectrum's peak may decide.

    Parameters
    ----------
    point : Point
    rows : sequence of Row
        The spectrum of its combination.
    """
    start = _of_tables(point, {})
    near = point.tables.near_field
    assert near is not None
    text = near.model_dump_json()
    if near.points is not None:
        text += _digest(point.folder / near.points)
    spectrum = [(row.wavelength_nm, f"{row.c_ext_nm2:.9g}", row.spacing_nm) for row in rows]
    return hashlib.sha256(f"{start}\n{text}\n{spectrum}".encode()).hexdigest()[:32]


def _of_tables(point: Point, digests: dict[Path, str]) -> str:
    tables = point.tables.model_dump(exclude=_ASIDE, exclude_none=True, exclude_defaults=True)
    if not tables.get("solver", True):
        del tables["solver"]  # it held nothing but what is set aside
    files = {}
    for name in sorted(_files(tables["particle"])):
        path = point.folder / name
        if path not in digests:
            digests[path] = _digest(path)
        files[name] = digests[path]
    whole = {"answers": ANSWERS, "tables": _plain(tables, files)}
    return json.dumps(whole, sort_keys=True, default=str)


def _files(table: Any) -> Iterator[str]:
    """Mesh and image files named in a table of the particle."""
    if isinstance(table, dict):
        for key, value in table.items():
            if key in ("mesh", "voxels") and isinstance(value, str):
                yield value
            else:
                yield from _files(value)
    elif isinstance(table, list | tuple):
        for value in table:
            yield from _files(value)


def _plain(table: Any, files: Mapping[str, str]) -> Any:
    """Tables with the contents of files instead of their names, and 60 written as 60.0."""
    if isinstance(table, dict):
        return {
            key: files.get(value, value)
            if key in ("mesh", "voxels") and isinstance(value, str)
            else _plain(value, files)
            for key, value in table.items()
        }
    if isinstance(table, list | tuple):
        return [_plain(value, files) for value in table]
    if isinstance(table, int) and not isinstance(table, bool):
        return float(table)
    return table


def _texts(table: Any) -> Iterator[str]:
    """All texts of a table."""
    if isinstance(table, str):
        yield table
    elif isinstance(table, Mapping):
        for value in table.values():
            yield from _texts(value)
    elif isinstance(table, list | tuple):
        for value in table:
            yield from _texts(value)


def _is_file(path: Path) -> bool:
    try:
        return path.is_file()
    except (OSError, ValueError):  # a text that cannot be a name
        return False


def _digest(path: Path) -> str:
    try:
        with path.open("rb") as file:
            return hashlib.file_digest(file, "sha256").hexdigest()
    except OSError as error:
        raise InputError(f"{path}: cannot be read: {error.strerror}") from None


def _permittivities(points: Sequence[Point], names: Sequence[str]) -> list[str]:
    """Permittivities of all materials of the particle, and the host's, at each point in words."""
    media = media_of(points[0], names)
    at = np.array([point.wavelength for point in points])
    columns = [np.atleast_2d(media.host.permittivity(at)).T]
    for name in names:
        material = media.particle[name]
        if isinstance(material, AnisotropicMaterial):
            columns.append(material.tensor(at).reshape(len(at), 9))
        else:
            columns.append(np.atleast_2d(material.permittivity(at)).T)
    # Twelve digits: what is left is rounding of the tables' interpolation.
    return [
        " ".join(f"{value:.12g}" for value in row) + " " + " ".join(names)
        for row in np.hstack(columns)
    ]


def _materials(table: Any, named: bool = False) -> Iterator[str]:
    """Names of materials in a table of the particle."""
    if isinstance(table, str):
        if named:
            yield table
    elif isinstance(table, dict):
        for key, value in table.items():
            yield from _materials(value, named or key in ("material", "materials"))
    elif isinstance(table, list | tuple):
        for value in table:
            yield from _materials(value, named)
