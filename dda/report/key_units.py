"""Units of the keys of a study, for the axes of a sweep."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from typing import Any

# Keys beside the parameters of shapes, by the words at their end.
_KNOWN = {
    "accuracy.spacing": "nm",
    "accuracy.cells": "1",
    "accuracy.target": "1",
    "host.index": "1",
    "light.beam.waist_nm": "nm",
    "light.beam.focus": "nm",
    "light.beam.position": "nm",
    "light.beam.reference": "nm",
    "near_field.height": "nm",
    "near_field.size": "nm",
    "near_field.step": "nm",
    "near_field.centre": "nm",
    "particle.voxel": "nm",
    "particle.scale": "1",
    "solver.tolerance": "1",
}
_ENDINGS = {"position": "nm", "rotation.angle": "degree", "scale": "1"}


def unit_of(name: str, tables: Mapping[str, Any]) -> str | None:
    """Return the unit of a key of a study, as far as it has one.

    Parameters
    ----------
    name : str
        Dotted, as in ``[vary]``.
    tables : mapping
        The study as parsed.

    Returns
    -------
    str or None
        "1" for a pure number, None where nothing is known, as for names of materials.

    Examples
    --------
    >>> unit_of("particle.edge", {"particle": {"shape": "cube"}})
    'nm'
    >>> unit_of("particle.material", {"particle": {"shape": "cube"}}) is None
    True
    """
    words = [int(w) if w.isdigit() else w for w in re.findall(r"[^.\[\]]+", name)]
    plain = ".".join(str(w) for w in words)
    if plain in _KNOWN:
        return _KNOWN[plain]
    if words[0] != "particle":
        return None
    units = {unit for shape in _shapes(words, tables) if (unit := _unit(shape, str(words[-1])))}
    if len(units) == 1:
        return units.pop()
    return next((unit for end, unit in _ENDINGS.items() if plain.endswith(f".{end}")), None)


def _shapes(words: list[Any], tables: Mapping[str, Any]) -> Iterator[Any]:
    """Names of the shapes that the key may belong to: of its own table, or varied."""
    table: Any = tables
    for word in words[:-1]:
        try:
            table = table[word]
        except (KeyError, IndexError, TypeError):
            table = {}
    if isinstance(table, Mapping):
        yield table.get("shape")
    of_table = ".".join(str(w) for w in words[:-1])
    for name, values in _leaves(tables.get("vary", {}), ""):
        if name.replace("[", ".").replace("]", "") == f"{of_table}.shape":
            yield from values


def _leaves(table: Any, start: str) -> Iterator[tuple[str, Any]]:
    for key, value in table.items() if isinstance(table, Mapping) else ():
        name = f"{start}.{key}".removeprefix(".")
        if isinstance(value, Mapping):
            yield from _leaves(value, name)
        elif isinstance(value, list):
            yield name, value


def _unit(shape: Any, parameter: str) -> str | None:
    import shapes.catalogue

    entry = shapes.catalogue.entries.get(shape) if isinstance(shape, str) else None
    known = entry.parameters.get(parameter) if entry else None
    if known is None or known.kind not in ("number", "count", "numbers"):
        return None
    return {"nm": "nm", "deg": "degree", "": "1"}[known.unit]
