"""A run in the formats of other programs: CSV, NetCDF, VTK."""

from __future__ import annotations

import os
import secrets
import shutil
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from dda.errors import InputError
from dda.study.ledger import Ledger

#: A folder of VTK files has this one.
PARTICLE = "particle.vtu"


@dataclass(frozen=True)
class Format:
    """A format: the ending of its file, and what writes a run (or a point of it) into it.

    A format without a suffix is a folder of files.
    """

    suffix: str
    write: Callable[[Path, Path, int | None], None]


def export(
    folder: Path,
    name: str,
    out: Path | None = None,
    replace: bool = False,
    point: int | None = None,
) -> Path:
    """Write a run into a file of another format.

    Parameters
    ----------
    folder : Path
        The run folder; the run need not have ended.
    name : str
        "csv", the whole table; "netcdf", the arrays of `dda.open_run`; "vtk", a folder with the
        near fields and the particle with its cells.
    out : Path, optional
        By default named after the run, in the working directory. A missing suffix is added.
    replace : bool
        Replace what is there.
    point : int, optional
        For "vtk", the number of the point whose particle is written; by default the first one
        that has an answer.

    Returns
    -------
    Path
        What has been written.

    Raises
    ------
    InputError
        There is no such format, nothing is finished, or something is in the way.
    """
    if name not in FORMATS:
        raise InputError(f'"{name}" is no format; it is one of {", ".join(FORMATS)}')
    if point is not None and name != "vtk":
        raise InputError(f"a point is chosen for --to vtk; --to {name} has all of them")
    wanted = FORMATS[name]
    with Ledger(folder) as ledger:
        if next(ledger.rows(), None) is None:
            raise InputError(f"{folder}: no point is finished yet, so there is nothing to export")
    path = _named(out or _default(folder, name), name)
    _check_place(path, wanted, replace)
    aside = path.with_name(f".{path.stem}.{secrets.token_hex(4)}{wanted.suffix}")
    old = aside.with_name(f"{aside.name}.old")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        wanted.write(folder, aside, point)
        if path.is_dir():
            os.replace(path, old)
        os.replace(aside, path)
    except OSError as error:
        raise InputError(f"{path}: cannot be written: {error.strerror or error}") from error
    finally:
        for rest in (aside, old):
            if rest.is_dir():
                shutil.rmtree(rest)
            elif rest.exists():
                rest.unlink()
    return path


def _check_place(path: Path, wanted: Format, replace: bool) -> None:
    """Refuse a place where something is that may not be replaced."""
    if not path.exists():
        return
    if not replace:
        raise InputError(f"{path}: is there already; give another --out, or --replace")
    if path.is_dir() != (not wanted.suffix):
        kind = "a folder" if path.is_dir() else "a file"
        raise InputError(f"{path}: {kind} of that name is in the way; give another --out")
    if path.is_dir() and not (path / PARTICLE).is_file():
        raise InputError(
            f"{path}: is no folder that an export has made, so it is not replaced; give another "
            "--out"
        )


def _default(folder: Path, name: str) -> Path:
    stem = folder.resolve().name
    return Path(stem if FORMATS[name].suffix else f"{stem}_{name}")


def _named(path: Path, name: str) -> Path:
    """Give a path the suffix of its format, unless it has one; not that of another format."""
    suffix = FORMATS[name].suffix
    for other, known in FORMATS.items():
        if other != name and known.suffix and path.suffix == known.suffix:
            has = f"has {suffix}" if suffix else "makes a folder"
            raise InputError(
                f"{path}: {known.suffix} is the ending of --to {other}; --to {name} {has}"
            )
    return path if path.suffix == suffix or not suffix else path.with_name(path.name + suffix)


def _write_csv(folder: Path, path: Path, _: int | None) -> None:
    from dda.report.table import write_csv

    with Ledger(folder) as ledger:
        write_csv(path, [row for _, row in ledger.rows()])


def _write_netcdf(folder: Path, path: Path, _: int | None) -> None:
    from dda.report.dataset import open_run

    open_run(folder).to_netcdf(path, engine="h5netcdf")


def _write_vtk(folder: Path, path: Path, point: int | None) -> None:
    from dda.report.vtk_folder import write_vtk

    write_vtk(folder, path, point)


FORMATS = {
    "csv": Format(".csv", _write_csv),
    "netcdf": Format(".nc", _write_netcdf),
    "vtk": Format("", _write_vtk),
}
