"""Near fields in HDF5: boxes, and surfaces in pieces; plain names, units as attributes."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from dda.errors import InputError
from dda.study.near import NearAnswer, Sampled

_CONVENTIONS = {
    "time_dependence": "exp(-i w t): absorbing materials have Im eps > 0",
    "origin": "the centre of the particle's bounding box",
    "unit_of_e": "amplitude of the incident electric field",
    "unit_of_h": "amplitude of the incident magnetic field",
    "e2": "|E|^2 in units of the incident wave's; best value of two lattices, e2_error its error",
    "components": "x, y, z on the last axis; of the finer lattice",
    "material": "index into the attribute materials; -1 is the host",
    "trusted": "0 where the error is not known",
    "heat": "absorbed power density; zero in the host",
}


@dataclass(frozen=True, eq=False)
class StoredSurface:
    """|E|^2 on a surface, read from a file.

    Attributes
    ----------
    wavelength, height : float
        nm.
    corners : ndarray, shape (n, 4, 3)
        nm, from the particle's centre.
    e2 : ndarray, shape (n,)
    title : str
        Of the study.
    """

    wavelength: float
    height: float
    corners: np.ndarray
    e2: np.ndarray
    title: str


def write_box(path: Path, answer: NearAnswer, title: str) -> None:
    """Add a group for the wavelength with axes, |E|^2 and complex fields on the box."""
    import h5py

    sampled = answer.region
    shape = sampled.region.shape
    with h5py.File(path, "a") as file:
        group = _group(file, answer, title)
        for name, axis in zip(sampled.region.names, sampled.region.axes, strict=True):
            _put(group, f"{name}_nm", axis, "nm")
        _put_e2(group, sampled, shape)
        group["material"] = sampled.material.reshape(shape)
        _put_heat(group, answer, sampled, shape)
        for wave, label in enumerate(wave_names(sampled)):
            for name, vector in vectors_of(sampled, wave):
                stem = f"{label}_{name}" if label else name
                _put(group, stem, vector.reshape(*shape, 3), "incident amplitude")


def write_surface(path: Path, answer: NearAnswer, centre: np.ndarray, title: str) -> None:
    """Add a group for the wavelength with the pieces of the surface and |E|^2 on them."""
    import h5py

    with h5py.File(path, "a") as file:
        group = _group(file, answer, title)
        group.attrs["height_nm"] = answer.cover.height
        _put(group, "corners_nm", answer.cover.corners - centre, "nm")
        _put(group, "points_nm", answer.surface.region.points, "nm")
        _put(group, "areas_nm2", answer.cover.areas, "nm^2")
        _put_e2(group, answer.surface, (-1,))


def write_body(path: Path, answer: NearAnswer, title: str) -> None:
    """Add a group for the wavelength with |E|^2 and heat at the middles of the cells."""
    import h5py

    assert answer.body is not None
    assert answer.heat is not None
    with h5py.File(path, "a") as file:
        group = _group(file, answer, title)
        group.attrs["intensity_W_per_m2"] = answer.heat.intensity
        group.attrs["absorbed_power_W"] = answer.heat.total
        group.attrs["absorbed_power_error_W"] = answer.heat.total_error
        _put(group, "points_nm", answer.body.region.points, "nm")
        _put_e2(group, answer.body, (-1,))
        group["material"] = answer.body.material
        _put_heat(group, answer, answer.body, (-1,))


def heat_of(answer: NearAnswer, sampled: Sampled) -> tuple[np.ndarray, np.ndarray] | None:
    """Return the absorbed power density at points and its error bar, W/m^3; None if not asked."""
    if answer.heat is None:
        return None
    per_e2 = answer.heat.density[sampled.material]
    return per_e2 * sampled.best.e2, per_e2 * sampled.best.e2_error


def read_surfaces(path: Path) -> list[StoredSurface]:
    """Read the surfaces that `write_surface` wrote, in order of the wavelength.

    Raises
    ------
    InputError
        The file cannot be read.
    """
    import h5py

    try:
        with h5py.File(path, "r") as file:
            found = [
                StoredSurface(
                    float(group.attrs["wavelength_nm"]),
                    float(group.attrs["height_nm"]),
                    group["corners_nm"][()],
                    group["e2"][()],
                    str(file.attrs["study"]),
                )
                for group in file.values()
            ]
    except (OSError, KeyError) as error:
        raise InputError(f"{path}: no surface of a near field can be read: {error}") from None
    return sorted(found, key=lambda surface: surface.wavelength)


def wave_names(sampled: Sampled) -> tuple[str, ...]:
    """Return the names of the incident waves: none where there is one."""
    return ("",) if len(sampled.fields) == 1 else ("first", "second")


def vectors_of(sampled: Sampled, wave: int) -> list[tuple[str, np.ndarray]]:
    """Return the complex fields of an incident wave with their names, each (n, 3)."""
    found = sampled.fields[wave]
    vectors = [("e", found.e), ("e_scattered", found.e_scattered)]
    if found.h is not None and found.h_scattered is not None:
        vectors += [("h", found.h), ("h_scattered", found.h_scattered)]
    return vectors


def _group(file: Any, answer: NearAnswer, title: str) -> Any:
    file.attrs["study"] = title
    for name, text in _CONVENTIONS.items():
        file.attrs[name] = text
    group = file.create_group(f"{answer.wavelength:.10g}_nm")
    group.attrs["wavelength_nm"] = answer.wavelength
    group.attrs["spacing_nm"] = answer.spacing
    group.attrs["coarser_spacing_nm"] = answer.coarser
    group.attrs["solver"] = answer.status
    group.attrs["materials"] = list(answer.materials)
    return group


def _put_e2(group: Any, sampled: Sampled, shape: tuple[int, ...]) -> None:
    best = sampled.best
    _put(group, "e2", best.e2.reshape(shape), "incident |E|^2")
    _put(group, "e2_error", best.e2_error.reshape(shape), "incident |E|^2")
    group["trusted"] = best.trusted.astype(np.uint8).reshape(shape)


def _put_heat(group: Any, answer: NearAnswer, sampled: Sampled, shape: tuple[int, ...]) -> None:
    heat = heat_of(answer, sampled)
    if heat is not None:
        _put(group, "heat", heat[0].reshape(shape), "W/m^3")
        _put(group, "heat_error", heat[1].reshape(shape), "W/m^3")


def _put(group: Any, name: str, values: np.ndarray, unit: str) -> None:
    group[name] = values
    group[name].attrs["unit"] = unit
