"""The near field's files in a run's folder: written aside, put in place when all are there."""

from __future__ import annotations

import csv
import io
import os
import secrets
import shutil
from dataclasses import astuple, dataclass, field, fields
from pathlib import Path

import numpy as np

from dda.errors import InputError
from dda.report.field_map import draw_field_map
from dda.report.near_hdf5 import (
    heat_of,
    vectors_of,
    wave_names,
    write_body,
    write_box,
    write_surface,
)
from dda.study.near import NearAnswer, Sampled
from dda.study.near_numbers import Number
from shapes import Particle

TABLE, BOX, SURFACE = "near_field.csv", "near_field.h5", "near_field_surface.h5"
HEAT, NUMBERS = "near_field_heat.h5", "near_field_numbers.csv"
# Rows of the table that are made into text at a time.
_AT_ONCE = 50_000


@dataclass
class NearFolder:
    """Collects the files of a near field in a folder aside; `finish` puts them in their place.

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
    _aside: Path | None = None

    def add(self, answer: NearAnswer, numbers: list[Number]) -> None:
        """Write one wavelength."""
        if answer.region.region.kind == "box":
            write_box(self._file(BOX), answer, self.title)
        else:
            _append_rows(self._file(TABLE), answer)
        centre = np.add(*self.particle.bounds) / 2
        write_surface(self._file(SURFACE), answer, centre, self.title)
        if answer.heat is not None:
            write_body(self._file(HEAT), answer, self.title)
        if answer.region.region.kind == "plane":
            self._draw(answer)
        self.numbers += numbers

    def finish(self) -> None:
        """Put all files in their place, the table of numbers last: with it they are complete.

        Raises
        ------
        InputError
            A file cannot be written.
        """
        text = io.StringIO()
        writer = csv.writer(text, lineterminator="\n")
        writer.writerow([column.name for column in fields(Number)])
        for number in self.numbers:
            writer.writerow([_cell(value) for value in astuple(number)])
        self._file(NUMBERS).write_text(text.getvalue(), encoding="utf-8")
        assert self._aside is not None
        try:
            (self.path / NUMBERS).unlink(missing_ok=True)
            for name in self.files:
                os.replace(self._aside / name, self.path / name)
        except OSError as error:
            raise InputError(f"{self.path}: cannot be written: {error.strerror}") from error
        finally:
            self.discard()

    def discard(self) -> None:
        """Remove what is aside."""
        if self._aside is not None:
            shutil.rmtree(self._aside, ignore_errors=True)
        self._aside = None

    def _draw(self, answer: NearAnswer) -> None:
        region, stem = answer.region, f"{answer.wavelength:g}.png"
        title = f"{self.title}, {answer.wavelength:g} nm"
        e2, beside = region.best.e2, region.by_source
        if beside.any() and not beside.all():
            # the source itself would take all of the colours
            e2 = np.where(beside, np.minimum(e2, e2[~beside].max()), e2)
        draw_field_map(
            self._file(f"near_field_{stem}"),
            region.region,
            e2,
            particle=self.particle,
            trusted=region.best.trusted,
            title=title,
        )
        heat = heat_of(answer, region)
        if heat is not None and heat[0].max() > 0:
            draw_field_map(
                self._file(f"near_field_heat_{stem}"),
                region.region,
                heat[0],
                particle=self.particle,
                trusted=region.best.trusted | (region.material < 0),
                label="absorbed power density (W/m³)",
                title=title,
                logarithmic=False,
            )

    def _file(self, name: str) -> Path:
        """Return where a file is written first."""
        try:
            if self._aside is None:
                self.path.mkdir(parents=True, exist_ok=True)
                aside = self.path / f".near_field.{secrets.token_hex(4)}.part"
                aside.mkdir()
                self._aside = aside
        except OSError as error:
            raise InputError(f"{self.path}: cannot be written: {error.strerror}") from error
        if name not in self.files:
            self.files.append(name)
        return self._aside / name


def columns_of(sampled: Sampled, heat: bool = False) -> list[str]:
    """Return the columns of ``near_field.csv``; those of heat, in W/m^3, where it is asked for.

    The components are those of the finer lattice: of the total field (``ex``, ``hx``) and of the
    scattered one (``ex_scattered``). For unpolarized light those of the first of the two
    incident waves start with ``first_``, those of the second with ``second_``.
    """
    names = ["wavelength_nm", "x_nm", "y_nm", "z_nm", "e2", "e2_error", "trusted", "material"]
    if heat:
        names += ["heat_w_per_m3", "heat_error_w_per_m3"]
    for wave in wave_names(sampled):
        for letter, _ in vectors_of(sampled, 0):
            kind, _, rest = letter.partition("_")
            for axis in "xyz":
                stem = "_".join(word for word in (wave, kind + axis, rest) if word)
                names += [f"{stem}_re", f"{stem}_im"]
    return names


def _append_rows(path: Path, answer: NearAnswer) -> None:
    sampled = answer.region
    heat = heat_of(answer, sampled)
    columns = columns_of(sampled, heat is not None)
    best, points = sampled.best, sampled.region.points
    names = np.array([*answer.materials, "host"])[sampled.material]
    parts = [] if heat is None else [np.stack(heat, axis=1)]
    parts += [
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
