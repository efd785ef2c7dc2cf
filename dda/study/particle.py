"""From the study's ``[particle]`` to a particle."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import shapes
from dda.study.mistakes import Mistake
from dda.study.parts_table import PartTable
from dda.study.schema import ParticleTable
from shapes import catalogue


def build_particle(table: ParticleTable, folder: Path) -> shapes.Particle:
    """Return the particle that a table describes.

    Parameters
    ----------
    table : ParticleTable
    folder : Path
        Where relative paths start.

    Raises
    ------
    Mistake
        With the key at fault under ``particle``.

    Examples
    --------
    >>> table = ParticleTable(shape="sphere", diameter=20, material="gold")
    >>> build_particle(table, Path()).materials
    ('gold',)
    """
    build = {
        "shape": _from_catalogue,
        "mesh": _from_mesh,
        "voxels": _from_voxels,
        "parts": _from_parts,
    }[table.source]
    try:
        return build(table, folder)
    except shapes.ShapeError as error:
        key = error.where or (table.source,)
        raise Mistake(("particle", *key), str(error)) from None


def material_key(table: ParticleTable, name: str) -> tuple[str | int, ...]:
    """Return the key at which a material of the particle is named.

    >>> material_key(ParticleTable(parts=[{"shape": "cube", "material": "gold"}]), "gold")
    ('particle', 'parts', 0, 'material')
    """
    for number, part in enumerate(table.parts or ()):
        if part.material == name:
            return ("particle", "parts", number, "material")
    return ("particle", "material")


def notes_of(particle: shapes.Particle) -> tuple[str, ...]:
    """Return what the user should know of how a particle came about, such as a mended mesh."""
    notes = [note for part in particle.parts for note in getattr(part.body, "notes", ())]
    return tuple(dict.fromkeys(notes))


def _from_catalogue(table: ParticleTable, folder: Path) -> shapes.Particle:
    assert table.shape is not None
    entry = catalogue.find(table.shape)
    material = table.material or _inner_material(entry, table.parameters)
    # Built even without a material: another mistake may be why it is missing.
    particle = catalogue.build(table.shape, table.parameters, material or "")
    if material is None:
        raise Mistake(("particle", "material"), 'this key is missing, for example "gold"')
    return particle


def _inner_material(entry: catalogue.Entry, parameters: Mapping[str, Any]) -> str | None:
    """Return the material named deeper in the table, where the particle itself names none."""
    for name, parameter in entry.parameters.items():
        value = parameters.get(name)
        if parameter.kind == "particle" and isinstance(value, Mapping):
            inner = value.get("material")
            if isinstance(inner, str):
                return inner
        if parameter.kind == "names" and isinstance(value, list) and value:
            return str(value[0])
    return None


def _from_mesh(table: ParticleTable, folder: Path) -> shapes.Particle:
    assert table.mesh is not None
    return shapes.from_mesh(
        _file(folder, table.mesh, "mesh"),
        unit=table.unit or "nm",
        scale=table.scale or 1.0,
        material=_required(table.material, "material", 'the name of a material, such as "gold"'),
    )


def _from_voxels(table: ParticleTable, folder: Path) -> shapes.Particle:
    assert table.voxels is not None
    materials = table.materials
    if materials is None and table.material is not None:
        materials = {"1": table.material}
    return shapes.from_image(
        _file(folder, table.voxels, "voxels"),
        voxel=_required(table.voxel, "voxel", "the edge of a voxel in nm"),
        materials=_required(
            materials, "materials", 'the material of each label, such as {1 = "gold"}'
        ),
    )


def _from_parts(table: ParticleTable, folder: Path) -> shapes.Particle:
    assert table.parts is not None
    pieces = []
    for number, part in enumerate(table.parts):
        place = ("parts", number)
        try:
            pieces.append(_piece(part, part.material or table.material, folder))
        except Mistake as mistake:
            raise Mistake(("particle", *place, *mistake.key[1:]), mistake.message) from None
        except shapes.ShapeError as error:
            key = error.where or ("shape" if part.shape else "mesh",)
            raise Mistake(("particle", *place, *key), str(error)) from None
    if table.parts[0].subtract:
        raise Mistake(
            ("particle", "parts", 0, "subtract"),
            "the first part adds material; there is nothing to subtract from yet",
        )
    return shapes.assemble(pieces, [part.subtract for part in table.parts])


def _piece(part: PartTable, material: str | None, folder: Path) -> shapes.Particle:
    """One part in its place, as a particle of its own."""
    if part.subtract:
        material = "removed"
    one = ParticleTable(shape=part.shape, mesh=part.mesh, material=material, **part.parameters)
    piece = _from_catalogue(one, folder) if part.shape else _from_mesh(one, folder)
    return shapes.placed(
        piece, part.position, part.rotation.model_dump() if part.rotation else None
    )


def _required(value: Any, key: str, what: str) -> Any:
    if value is None:
        raise Mistake(("particle", key), f"this key is missing: {what}")
    return value


def _file(folder: Path, name: str, key: str) -> Path:
    path = folder / name
    if not path.is_file():
        raise Mistake(
            ("particle", key),
            f"there is no file {path}; relative paths start at the study's folder",
        )
    return path
