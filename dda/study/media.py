"""The materials of a point: what its names stand for, checked where they are used."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

import dda.materials
from dda.errors import InputError
from dda.materials import Material
from dda.materials.anisotropic import AnisotropicMaterial
from dda.study.mistakes import Mistake
from dda.study.particle import material_key
from dda.study.points import Point

#: Keys of a material's table whose value may be the name of another material.
_REFERRING = ("host", "inclusion", "metal", "material")


@dataclass(frozen=True)
class Media:
    """The host and the particle's materials."""

    host: Material
    particle: Mapping[str, Material]

    def relative_index(self, wavelength: float) -> dict[str, complex]:
        """Return m = n_material / n_host of every material at a vacuum wavelength, nm.

        An anisotropic material has an entry for each axis, such as "calcite, axis 1".
        """
        at = np.array([wavelength])
        host = float(np.real(self.host.index(at)[0]))
        single: dict[str, Material] = {}
        for name, material in self.particle.items():
            if isinstance(material, AnisotropicMaterial):
                three = enumerate(material.principal, start=1)
                single |= {f"{name}, axis {number}": m for number, m in three}
            else:
                single[name] = material
        return {name: complex(m.index(at)[0]) / host for name, m in single.items()}


def media_of(point: Point, names: Iterable[str]) -> Media:
    """Return the materials that a point uses.

    Parameters
    ----------
    point : Point
    names : iterable of str
        The particle's materials.

    Raises
    ------
    Mistake
        A material is not known or its data are unusable.
    """
    particle = {name: _find(point, name, material_key(point.particle, name)) for name in names}
    if point.host.index is not None:
        return Media(dda.materials.find(point.host.index), particle)
    assert point.host.material is not None
    return Media(_find(point, point.host.material, ("host", "material")), particle)


def check_media(media: Media, wavelengths: Sequence[float]) -> None:
    """Refuse wavelengths at which a material is not known, and hosts that absorb.

    Raises
    ------
    Mistake
        With the key of the material at fault.
    """
    at = np.asarray(wavelengths, float)
    try:
        dda.materials.require_transparent(media.host, at)
    except InputError as error:
        raise Mistake(("host",), str(error)) from None
    for material in media.particle.values():
        try:
            material.index(at)
        except InputError as error:
            raise Mistake(("light", "wavelengths"), str(error)) from None


def _find(point: Point, name: str, key: tuple[str | int, ...]) -> Material:
    own = point.materials.get(name)
    if own is not None:
        key = ("materials", name)
    try:
        found = dda.materials.find(_spelled_out(name, point.materials), point.folder)
    except InputError as error:
        raise Mistake(key, str(error)) from None
    return found if own is None or "name" in own else replace(found, name=name)


def _spelled_out(
    specification: Any, own: Mapping[str, Mapping[str, Any]], within: tuple[str, ...] = ()
) -> Any:
    """Put the user's own materials in the place of their names, also inside mixtures."""
    if isinstance(specification, Mapping):
        spelled = {
            key: _spelled_out(value, own, within) if key in _REFERRING else value
            for key, value in specification.items()
        }
        if isinstance(axes := spelled.get("axes"), list):
            spelled["axes"] = [_spelled_out(one, own, within) for one in axes]
        if isinstance(base := spelled.get("material"), Mapping):
            # another name for an own material, perhaps with more keys such as extrapolate
            return {**base, **{key: v for key, v in spelled.items() if key != "material"}}
        return spelled
    if not isinstance(specification, str) or specification not in own:
        return specification
    if specification in within:
        # [materials.gold] material = "gold" means the gold that is known without the study
        return specification
    return _spelled_out(own[specification], own, (*within, specification))
