"""Particles put together from several parts, each placed, turned, and added or taken away."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from . import catalogue
from .body import Part, Particle, ShapeError

PLACING = ("shape", "material", "position", "rotation", "subtract")


def assemble(
    pieces: Sequence[Particle], subtract: Sequence[bool] = (), name: str = "assembly"
) -> Particle:
    """Particles laid over each other in order; those to subtract remove what is there before.

    Parameters
    ----------
    pieces : sequence of Particle
    subtract : sequence of bool
        Whether each piece is taken away; none is by default.
    name : str

    Raises
    ------
    ShapeError
        If there is no piece, or the first one is to be subtracted.

    Examples
    --------
    >>> import shapes
    >>> dish = assemble([shapes.disk(40, 10), shapes.sphere(20)], subtract=[False, True])
    >>> [part.material for part in dish.parts]
    ['gold', None]
    """
    removed = list(subtract) or [False] * len(pieces)
    if len(removed) != len(pieces):
        raise ShapeError(f"subtract lists {len(removed)} choices for {len(pieces)} pieces")
    if not pieces or removed[0]:
        raise ShapeError("the first part must add material; there is nothing to subtract from yet")
    parts = [
        Part(part.body, None if gone else part.material)
        for piece, gone in zip(pieces, removed, strict=True)
        for part in piece.parts
    ]
    gaps = [piece.gap for piece in pieces if piece.gap is not None]
    thin = [piece.thinnest for piece in pieces if piece.thinnest is not None]
    whole = pieces[0].outline if len(pieces) == 1 else None
    return Particle(
        tuple(parts), name, whole, min(thin) if thin else None, min(gaps) if gaps else None
    )


def placed(particle: Particle, position: Any = (0, 0, 0), rotation: Any = None) -> Particle:
    """The particle turned, then moved.

    Parameters
    ----------
    particle : Particle
    position : 3 numbers
        Where its origin goes, nm.
    rotation : mapping, optional
        With "angle" in degrees and "axis", 3 numbers (z by default).

    Raises
    ------
    ShapeError

    Examples
    --------
    >>> import shapes
    >>> rod = placed(shapes.rod(60, 20), (0, 0, 50), {"angle": 90, "axis": [0, 1, 0]})
    >>> rod.bounds
    (array([-10., -10.,  20.]), array([10., 10., 80.]))
    """
    if rotation is not None:
        known = isinstance(rotation, Mapping) and set(rotation) <= {"angle", "axis"}
        if not known or "angle" not in rotation:
            raise ShapeError(
                f"rotation = {rotation!r} must be a table with 'angle' (degrees) and 'axis', such "
                "as {angle = 90, axis = [0, 0, 1]}",
                ("rotation",),
            )
        angle = _numbers(rotation["angle"], 0, "rotation.angle", ("rotation", "angle"))
        axis = _numbers(rotation.get("axis", (0, 0, 1)), 3, "rotation.axis", ("rotation", "axis"))
        particle = particle.rotated(float(angle), axis)
    offset = _numbers(position, 3, "position", ("position",))
    return particle.moved(offset) if np.any(offset) else particle


def build_parts(tables: Sequence[Mapping[str, Any]], material: str | None = None) -> Particle:
    """A particle from a list of tables, each a shape of the catalogue and its place.

    Parameters
    ----------
    tables : sequence of mapping
        Each has "shape" and that shape's parameters; "material" unless the one given here holds or
        it is subtracted; "position", "rotation" (see `placed`) and "subtract" as needed.
    material : str, optional
        For the parts that name none.

    Raises
    ------
    ShapeError
        With the number of the part and the parameter's name.

    Examples
    --------
    >>> two = [{"shape": "cube", "edge": 40}, {"shape": "sphere", "diameter": 20, "subtract": True}]
    >>> build_parts(two, "gold").materials
    ('gold',)
    """
    pieces, removed = [], []
    for number, table in enumerate(tables, start=1):
        gone = table.get("subtract", False)
        named = table.get("material", material)
        try:
            if "shape" not in table:
                raise ShapeError("the key 'shape' is missing", ("shape",))
            if not isinstance(gone, bool):
                raise ShapeError(f"subtract = {gone!r} must be true or false", ("subtract",))
            if named is None and not gone:
                raise ShapeError("the key 'material' is missing", ("material",))
            own = {key: value for key, value in table.items() if key not in PLACING}
            piece = catalogue.build(table["shape"], own, named or "removed")
            pieces.append(placed(piece, table.get("position", (0, 0, 0)), table.get("rotation")))
        except ShapeError as error:
            raise ShapeError(f"part {number}: {error}", (str(number - 1), *error.where)) from None
        removed.append(gone)
    return assemble(pieces, removed)


def _numbers(value: Any, count: int, name: str, where: tuple[str, ...]) -> np.ndarray:
    """A finite number (count 0) or a list of `count` numbers."""
    try:
        numbers = np.asarray(value, dtype=float)
    except (TypeError, ValueError):
        numbers = np.array(np.nan)
    if numbers.shape != ((count,) if count else ()) or not np.all(np.isfinite(numbers)):
        wanted = f"{count} numbers" if count else "a number"
        raise ShapeError(f"{name} = {value!r} must be {wanted}", where)
    return numbers
