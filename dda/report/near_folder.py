"""The near field's files in a run's folder, kept up to date wavelength by wavelength."""

from __future__ import annotations

import contextlib
import csv
import io
import os
import secrets
import shutil
from collections.abc import Iterator
from dataclasses import astuple, dataclass, field, fields
from pathlib import Path

import numpy as np

from dda.errors import InputError
from dda.report.field_map import draw_field_map
from dda.report.files import write_aside
from dda.report.near_hdf5 import vectors_of, wave_names, write_box, write_surface
from dda.study.near import NearAnswer, Sampled
from dda.study.near_numbers import Number
from shapes import Particle

TABLE, BOX, SURFACE = "near_field.csv", "near_field.h5", "near_field_surface.h5"
NUMBERS = "near_field_numbers.csv"
# Rows of the table that are made into text at a time.
_AT_ONCE = 50_000


@dataclass
class NearFolder:
    """Writes answers as they come; every file is whole whenever one looks.

    Attributes
    ----------
    path : Path
        The run's folder.
    particle : Particle
    title : str
        Of the pictures.
    numbers : list of Number
    files : list of str
        Names of what has been written.
    """

    path: Path
    particle: Particle
    title: str
    numbers: list[Number] = field(default_factory=list)
    files: list[str] = field(default_factory=list)

    def add(self, answer: NearAnswer, numbers: list[Number]) -> None:
        """Write one wavelength."""
        first = not self.files
        if answer.region.region.kind == "box":
            with self._growing(BOX, first) as part:
                write_box(part, answer, self.title)
        else:
            with self._growing(TABLE, first) as part:
                _append_rows(part, answer)
        with self._growing(SURFACE, first) as part:
            write_surface(part, answer, np.add(*self.particle.bounds) / 2, self.title)
        if answer.region.region.kind == "plane":
            self._draw(answer)
        self.add_numbers(numbers)

    def add_numbers(self, numbers: list[Number]) -> None:
        """Write the table of numbers again, with more of them."""
        self.numbers += numbers
        text = io.StringIO()
        writer = csv.writer(text, lineterminator="\n")
        writer.writerow([column.name for column in fields(Number)])
        for number in self.numbers:
            writer.writerow([_cell(value) for value in astuple(number)])
        write_aside(self.path / NUMBERS, text.getvalue().encode())
        self._note(NUMBERS)

    def _draw(self, answer: NearAnswer) -> None:
        name = f"near_field_{answer.wavelength:g}.png"
        draw_field_map(
            self.path / name,
            answer.region.region,
            answer.region.best.e2,
            particle=self.particle,
            trusted=answer.region.best.trusted,
            title=f"{self.title}, {answer.wavelength:g} nm",
        )
        self._note(name)

    @contextlib.contextmanager
    def _growing(self, name: str, first: bool) -> Iterator[Path]:
        """Give a copy of a file to be added to; it takes the file's place afterwards."""
        final = self.path / name
        part = final.with_name(f".{name}.{secrets.token_hex(4)}.part")
        try:
            if final.exists() and not first:
                shutil.copyfile(final, part)
            yield part
            os.replace(part, final)
        except OSError as error:
            raise InputError(f"{final}: cannot be written: {error.strerror or error}") from error
        finally:
            part.unlink(missing_ok=True)
        self._note(name)

    def _note(self, name: str) -> None:
        if name not in self.files:
            self.files.append(name)


def columns_of(sampled: Sampled) -> list[str]:
    """Return the columns of ``near_field.csv``.

    The components are those of the finer lattice: of the total field (``ex``, ``hx``) and of the
    scattered one (``ex_scattered``). For unpolarized light those of the first of the two
    incident waves start with ``first_``, those of the second with ``second_``.
    """
    names = ["wavelength_nm", "x_nm", "y_nm", "z_nm", "e2", "e2_error", "trusted", "material"]
    for wave in wave_names(sampled):
        for letter, _ in vectors_of(sampled, 0):
            kind, _, rest = letter.partition("_")
            for axis in "xyz":
                stem = "_".join(word for word in (wave, kind + axis, rest) if word)
                names += [f"{stem}_re", f"{stem}_im"]
    return names


def _append_rows(path: Path, answer: NearAnswer) -> None:
    sampled = answer.region
    columns = columns_of(sampled)
    best, points = sampled.best, sampled.region.points
    names = np.array([*answer.materials, "host"])[sampled.material]
    parts = [
        vector.view(float).reshape(len(points), 6)
        for wave in range(len(sampled.fields))
        for _, vector in ((n, np.ascontiguousarray(v)) for n, v in vectors_of(sampled, wave))
    ]
    line = ",".join(["%.9g"] * 6 + ["%s"] * 2 + ["%.7g"] * (len(columns) - 8)) + "\n"
    new = not path.exists()
    with path.open("a", encoding="utf-8", newline="") as file:
        if new:
            file.write(",".join(columns) + "\n")
        for start in range(0, len(points), _AT_ONCE):
            rows = slice(start, start + _AT_ONCE)
            values = zip(
                points[rows].tolist(),
                best.e2[rows].tolist(),
                best.e2_error[rows].tolist(),
                best.trusted[rows].tolist(),
                names[rows].tolist(),
                np.hstack([part[rows] for part in parts]).tolist(),
                strict=True,
            )
            file.writelines(
                line % (answer.wavelength, *at, e2, error, str(known).lower(), name, *rest)
                for at, e2, error, known, name, rest in values
            )


def _cell(value: object) -> str:
    if isinstance(value, float):
        return "" if np.isnan(value) else f"{value:.7g}"
    return str(value)
