"""Optical constants from the user's own CSV file.

The first line that is not a comment names the columns: one spectral column, which states its unit
(``wavelength_nm``, ``wavelength_um``, ``energy_eV``, ``frequency_THz`` or ``wavenumber_cm``), and
either ``n`` and ``k`` (or ``n`` alone: no absorption) or ``eps_re`` and ``eps_im``::

    # ellipsometry of our film, June
    wavelength_nm,n,k
    400,1.47,1.95
    450,1.38,1.91

Lines that start with # are comments; those above the header become the material's source.
"""

import csv
import difflib
import math
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

import numpy as np

from dda.errors import InputError
from dda.materials.database import NO_K
from dda.materials.interpolation import TabulatedPermittivity
from dda.materials.material import Material
from dda.materials.units import SPECTRAL_COLUMNS, to_wavelength

_OPTICAL = (("n", "k"), ("n",), ("eps_re", "eps_im"))
_RIGHT_HEADER = (
    f"the header names one of {', '.join(SPECTRAL_COLUMNS)}, and n,k or n or eps_re,eps_im"
)


@dataclass(frozen=True)
class _Row:
    line: int
    spectral: float
    optical: tuple[float, ...]


def from_table(path: str | Path, base_dir: str | Path | None = None) -> Material:
    """Material of a CSV file.

    Parameters
    ----------
    path : the file; a relative path starts at `base_dir` (default: the working directory).

    Raises
    ------
    InputError
        Naming the file and the line: missing file, wrong columns, a cell that is not a finite
        number, negative k or Im eps, rows out of order or repeated, fewer than 2 rows.
    """
    file = Path(base_dir or ".") / path
    lines = _read(file)
    comments = []
    while lines and (lines[0][1].startswith("#") or not lines[0][1]):
        comments.append(lines.pop(0)[1].lstrip("# "))
    if not lines:
        raise InputError(f"{file}: the table is empty; {_RIGHT_HEADER}")
    spectral, optical = _header(file, *lines[0])
    columns = [name.strip().lower() for name in _cells(lines[0][1])]
    order = [columns.index(name.lower()) for name in (spectral, *optical)]
    body = [(number, text) for number, text in lines[1:] if text and not text.startswith("#")]
    rows = [_row(file, number, text, columns, order) for number, text in body]
    if len(rows) < 2:
        raise InputError(f"{file}: {len(rows)} rows of data; a table needs at least 2")
    _require_order(file, rows, spectral)
    _require_passive(file, rows, optical)
    wavelength = to_wavelength([row.spectral for row in rows], spectral)
    values = np.array([row.optical for row in rows])
    if wavelength[0] > wavelength[-1]:
        wavelength, values = wavelength[::-1], values[::-1]
    notes: tuple[str, ...] = ()
    if optical == ("eps_re", "eps_im"):
        index = np.sqrt(values[:, 0] + 1j * values[:, 1])
        n, k = index.real, index.imag
    elif optical == ("n",):
        n, k, notes = values[:, 0], np.zeros(len(values)), (NO_K,)
    else:
        n, k = values.T
    model = TabulatedPermittivity(*(tuple(column.tolist()) for column in (wavelength, n, k)))
    source = " ".join(filter(None, comments)) or "a table of the user"
    range_nm = float(wavelength[0]), float(wavelength[-1])
    return Material(file.stem, model, f"{source} [{file}]", range_nm, notes)


def _read(file: Path) -> list[tuple[int, str]]:
    """Numbered, stripped lines."""
    try:
        text = file.read_text(encoding="utf-8-sig")
    except FileNotFoundError:
        raise InputError(f"there is no file '{file}'") from None
    except (OSError, UnicodeDecodeError) as error:
        raise InputError(f"cannot read '{file}' as a CSV file: {error}") from None
    return [(number, line.strip()) for number, line in enumerate(text.splitlines(), start=1)]


def _cells(line: str) -> list[str]:
    return next(csv.reader([line], skipinitialspace=True))


def _header(file: Path, number: int, line: str) -> tuple[str, tuple[str, ...]]:
    names = [name.strip() for name in _cells(line)]
    lower = [name.lower() for name in names]
    known = [*SPECTRAL_COLUMNS, "n", "k", "eps_re", "eps_im"]
    for name in names:
        if name.lower() not in [one.lower() for one in known]:
            near = difflib.get_close_matches(name, known, n=1, cutoff=0.4)
            hint = f" (nearest: '{near[0]}')" if near else ""
            raise InputError(f"{file}, line {number}: column '{name}'{hint}; {_RIGHT_HEADER}")
    if len(set(lower)) < len(lower):
        raise InputError(f"{file}, line {number}: a column is named twice; {_RIGHT_HEADER}")
    spectral = [name for name in SPECTRAL_COLUMNS if name.lower() in lower]
    optical = {name for name in ("n", "k", "eps_re", "eps_im") if name in lower}
    matching = [columns for columns in _OPTICAL if set(columns) == optical]
    if len(spectral) != 1 or not matching:
        raise InputError(f"{file}, line {number}: columns {', '.join(names)}; {_RIGHT_HEADER}")
    return spectral[0], matching[0]


def _row(file: Path, number: int, text: str, columns: list[str], order: list[int]) -> _Row:
    cells = _cells(text)
    if len(cells) != len(columns):
        raise InputError(
            f"{file}, line {number}: {len(cells)} cells, but the header names {len(columns)} "
            "columns (decimals take a point, cells are separated by commas)"
        )
    values = []
    for column, cell in zip(columns, cells, strict=True):
        try:
            value = float(cell)
        except ValueError:
            value = math.nan
        if not math.isfinite(value):
            raise InputError(
                f"{file}, line {number}: {column} is '{cell}', which is not a finite number"
            )
        values.append(value)
    picked = [values[i] for i in order]
    if picked[0] <= 0:
        raise InputError(
            f"{file}, line {number}: {columns[order[0]]} = {picked[0]:g} must be positive"
        )
    return _Row(number, picked[0], tuple(picked[1:]))


def _require_order(file: Path, rows: list[_Row], spectral: str) -> None:
    ascending = rows[1].spectral > rows[0].spectral
    for before, row in pairwise(rows):
        if before.spectral == row.spectral:
            raise InputError(f"{file}, line {row.line}: {spectral} = {row.spectral:g} again")
        if (row.spectral > before.spectral) != ascending:
            raise InputError(
                f"{file}, line {row.line}: {spectral} = {row.spectral:g} comes after "
                f"{before.spectral:g}; rows must all ascend or all descend"
            )


def _require_passive(file: Path, rows: list[_Row], optical: tuple[str, ...]) -> None:
    for row in rows:
        if optical[0] == "n" and row.optical[0] <= 0:
            raise InputError(f"{file}, line {row.line}: n = {row.optical[0]:g} must be positive")
        if len(optical) == 2 and row.optical[1] < 0:
            raise InputError(
                f"{file}, line {row.line}: {optical[1]} = {row.optical[1]:g}; it must be 0 or "
                "more. The convention is exp(-i w t), where absorption means k > 0 and Im eps > 0"
            )
