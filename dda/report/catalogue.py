"""The catalogue of shapes as text, and a picture of one of them."""

from __future__ import annotations

import textwrap
from pathlib import Path

import shapes
from shapes import catalogue

#: Cells across the largest extent in the picture of a shape.
DRAWN_CELLS = 28
LINE = 100


def catalogue_text() -> str:
    """Return every shape with its parameters, their defaults and units."""
    lines = ["Lengths are full lengths in nm. `dda shapes NAME` describes and draws one.", ""]
    width = max(len(name) for name in catalogue.entries) + 2
    for name, entry in catalogue.entries.items():
        listed = ", ".join(_listed(p) for p in entry.parameters.values())
        wrapped = textwrap.wrap(listed, LINE - width) or [""]
        lines.append(f"{name:<{width}}{wrapped[0]}")
        lines.extend(" " * width + line for line in wrapped[1:])
    return "\n".join(lines)


def shape_text(name: str) -> str:
    """Return one shape with what its parameters mean, and an example for a study.

    Raises
    ------
    shapes.ShapeError
        The shape is not known; the message names the nearest one.
    """
    entry = catalogue.find(name)
    rows = [
        (p.name, _default(p), p.unit, f"{p.doc.rstrip('.')}{f'; {p.check}' if p.check else ''}")
        for p in entry.parameters.values()
    ]
    widths = [max(len(row[i]) for row in rows) + 2 for i in range(3)]
    lines = [f"{entry.name}: {entry.doc}", ""]
    for row in rows:
        start = "  " + "".join(f"{cell:<{w}}" for cell, w in zip(row[:3], widths, strict=True))
        wrapped = textwrap.wrap(row[3], LINE - len(start)) or [""]
        lines.append(start + wrapped[0])
        lines.extend(" " * len(start) + line for line in wrapped[1:])
    return "\n".join([*lines, "", "[particle]", *_study_lines(entry)])


def draw_shape(name: str, path: Path) -> None:
    """Draw a typical particle of a shape, surface and cells, into a PNG file."""
    from dda.report.scene import draw_particle

    entry = catalogue.find(name)
    particle = catalogue.example(entry.name)
    draw_particle(path, particle, shapes.voxelize(particle, cells=DRAWN_CELLS), entry.name)


def _listed(parameter: catalogue.Parameter) -> str:
    unit = f" {parameter.unit}" if parameter.unit else ""
    if parameter.required:
        kind = {"particle": "a shape", "names": "names", "numbers": "numbers"}
        return f"{parameter.name} ({kind.get(parameter.kind, 'required')}{unit})"
    return f"{parameter.name} = {_toml(parameter.default)}{unit}"


def _default(parameter: catalogue.Parameter) -> str:
    return "required" if parameter.required else _toml(parameter.default)


def _study_lines(entry: catalogue.Entry) -> list[str]:
    """Return the example of a shape as it is written in a study."""
    lines = [f'shape = "{entry.name}"']
    tables = []
    for key, value in entry.example.items():
        if isinstance(value, dict):
            tables += [f"[particle.{key}]", *(f"{k} = {_toml(v)}" for k, v in value.items())]
        else:
            lines.append(f"{key} = {_toml(value)}")
    return [*lines, 'material = "gold"', *tables]


def _toml(value: object) -> str:
    if isinstance(value, str):
        return f'"{value}"'
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, tuple | list):
        return f"[{', '.join(_toml(v) for v in value)}]"
    return f"{value:g}" if isinstance(value, float) else str(value)
