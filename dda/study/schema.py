"""The tables of a study file, as the user writes them.

One pydantic model a table; ``StudyTables`` is the whole file. The models check what can be told
from a table alone: types, signs, keys, which keys exclude one another. What needs the shape
catalogue, the material data or the lattice is checked by ``particle``, ``points`` and ``plan``.
"""

from __future__ import annotations

import math
from typing import Annotated, Any, Literal

from pydantic import (
    AfterValidator,
    BeforeValidator,
    ConfigDict,
    Discriminator,
    Field,
    Tag,
    model_validator,
)

from dda.study.beam_table import BeamTable
from dda.study.fields import Positive, Range, Table, Vector
from dda.study.near_table import NearFieldTable
from dda.study.parts_table import PartTable
from dda.study.scattering_table import ScatteringTable

#: Polarizations that have a name.
NAMED_POLARIZATIONS = ("left", "right", "unpolarized")
#: More wavelengths than this in one range are taken for a slip of the pen.
MOST_WAVELENGTHS = 20_000

# What may describe a particle; one of them does.
_SOURCES = ("shape", "mesh", "voxels", "parts")


def _voxel(value: Any) -> Any:
    edges = value if isinstance(value, list | tuple) else [value]
    numbers = [e for e in edges if isinstance(e, int | float) and not isinstance(e, bool)]
    if value is not None and (len(numbers) not in (1, 3) or len(numbers) != len(edges)):
        raise ValueError("should be the edge of a voxel in nm, or its three edges [x, y, z]")
    if any(not 0 < edge < math.inf for edge in numbers):
        raise ValueError("the edge of a voxel should be above zero")
    return value


class ParticleTable(Table):
    """``[particle]``: a shape of the catalogue, a mesh file, a voxel image or several parts.

    With ``shape``, every key that is not declared here is a parameter of that shape and lands in
    ``parameters``.
    """

    model_config = ConfigDict(extra="allow", frozen=True)

    shape: str | None = None
    mesh: str | None = None
    voxels: str | None = None
    parts: Annotated[tuple[PartTable, ...], Field(min_length=1)] | None = None
    material: str | None = None
    materials: dict[str, str] | None = None
    unit: str | None = None
    scale: Positive | None = None
    voxel: Annotated[Any, AfterValidator(_voxel)] = None

    @property
    def parameters(self) -> dict[str, Any]:
        """The keys beside the declared ones: parameters of the catalogue shape."""
        own = {k: getattr(self, k) for k in ("materials", "unit", "scale", "voxel")}
        return {k: v for k, v in own.items() if v is not None} | dict(self.__pydantic_extra__ or {})

    @property
    def source(self) -> str:
        """Which of "shape", "mesh", "voxels" and "parts" describes the particle."""
        return next(key for key in _SOURCES if getattr(self, key) is not None)

    @model_validator(mode="after")
    def _one_source(self) -> ParticleTable:
        given = [k for k in _SOURCES if getattr(self, k) is not None]
        if len(given) != 1:
            said = " and ".join(given) if given else "none of them"
            raise ValueError(
                f'exactly one of shape = "cube", mesh = "FILE.stl", voxels = "FILE.npy" or tables '
                f"[[particle.parts]] describes a particle; the table has {said}"
            )
        belongs = {"mesh": ("unit", "scale"), "voxels": ("voxel", "materials"), "parts": ()}
        for source, keys in belongs.items():
            for key in keys:
                if given[0] not in (source, "shape") and getattr(self, key) is not None:
                    raise ValueError(f"{key} belongs to a particle given by {source}")
        if given[0] != "shape" and self.__pydantic_extra__:
            raise ValueError(
                f"{', '.join(self.__pydantic_extra__)}: a particle given by {given[0]} takes "
                f"only the keys {', '.join((given[0], 'material', *belongs[given[0]]))}"
            )
        return self


class HostTable(Table):
    """``[host]``: the medium around the particle."""

    material: str | None = None
    index: Positive | None = None

    @model_validator(mode="after")
    def _one_of_two(self) -> HostTable:
        if (self.material is None) == (self.index is None):
            raise ValueError('give either material = "water" or index = 1.33, one of the two')
        return self


class WavelengthRange(Range):
    """``{from = 450, to = 850, step = 10}``, vacuum wavelengths in nm, both ends included."""

    most = MOST_WAVELENGTHS
    things = "wavelengths"

    start: Positive = Field(alias="from")
    stop: Positive = Field(alias="to")


def _listed(values: tuple[float, ...]) -> tuple[float, ...]:
    if not values:
        raise ValueError("the list of wavelengths is empty")
    if len(set(values)) != len(values):
        twice = next(v for v in values if values.count(v) > 1)
        raise ValueError(f"the wavelength {twice:g} is listed twice")
    return values


def _kind(value: Any) -> str:
    return "range" if isinstance(value, dict | WavelengthRange) else "list"


def _as_list(value: Any) -> Any:
    if isinstance(value, int | float) and not isinstance(value, bool):
        return (value,)
    if not isinstance(value, list | tuple):
        raise ValueError("should be a list of numbers or {from = 450, to = 850, step = 10}")
    return value


WavelengthList = Annotated[tuple[Positive, ...], BeforeValidator(_as_list), AfterValidator(_listed)]
Wavelengths = Annotated[
    Annotated[WavelengthRange, Tag("range")] | Annotated[WavelengthList, Tag("list")],
    Discriminator(_kind),
]


def _nonzero(vector: Vector) -> Vector:
    if not any(vector):
        raise ValueError("the direction has length zero")
    return vector


def _polarization(value: Any) -> Any:
    """Read a name, or three components that are numbers or [re, im] pairs."""
    names = ", ".join(f'"{name}"' for name in NAMED_POLARIZATIONS)
    if isinstance(value, str):
        if value not in NAMED_POLARIZATIONS:
            raise ValueError(f'"{value}" is no polarization; it is one of {names} or a vector')
        return value
    if not isinstance(value, list | tuple) or len(value) != 3:
        raise ValueError(f"the polarization is a vector of three components, or one of {names}")
    vector = tuple(_component(c) for c in value)
    if not any(vector):
        raise ValueError("the polarization has length zero")
    return vector


def _component(value: Any) -> complex:
    pair = value if isinstance(value, list | tuple) else (value, 0.0)
    if isinstance(value, complex):
        return value
    numbers = [c for c in pair if isinstance(c, int | float) and not isinstance(c, bool)]
    if len(pair) != 2 or len(numbers) != 2 or not all(map(math.isfinite, numbers)):
        raise ValueError(
            f"{value!r} is no component of a polarization: it is a number, or a complex number "
            "as the pair [re, im]"
        )
    return complex(*pair)


Polarization = Annotated[str | tuple[complex, complex, complex], BeforeValidator(_polarization)]


class LightTable(Table):
    """``[light]``: the incident plane waves, or another ``beam``.

    ``orientation = "average"`` is for particles that tumble: unpolarized light from everywhere.
    """

    wavelengths: Wavelengths
    orientation: Literal["fixed", "average"] = "fixed"
    direction: Annotated[Vector, AfterValidator(_nonzero)] = (0.0, 0.0, 1.0)
    polarization: Polarization = (1 + 0j, 0j, 0j)
    beam: BeamTable | None = None

    @model_validator(mode="after")
    def _transverse(self) -> LightTable:
        given = self.model_fields_set & {"direction", "polarization"}
        if self.orientation == "average" and given:
            raise ValueError(
                f'orientation = "average" leaves no meaning to {" and ".join(sorted(given))}: '
                "leave it out, or leave out orientation"
            )
        if self.beam is not None:
            self._check_beam(given)
        if isinstance(self.polarization, str):
            return self
        size = math.sqrt(sum(abs(c) ** 2 for c in self.polarization))
        along = sum(c * d for c, d in zip(self.polarization, self.direction, strict=True))
        if abs(along) > 1e-6 * size * math.sqrt(sum(d * d for d in self.direction)):
            raise ValueError(
                f"the polarization is not at right angles to the direction "
                f"{list(self.direction)}; a plane wave has no field along its direction"
            )
        return self

    def _check_beam(self, given: set[str]) -> None:
        assert self.beam is not None
        if self.orientation == "average":
            raise ValueError('orientation = "average" is for plane waves; leave out the beam')
        if not self.beam.gaussian and given:
            raise ValueError(
                f"a dipole has its moment, so {' and '.join(sorted(given))} would mean nothing: "
                "leave it out"
            )

    def values(self) -> tuple[float, ...]:
        """Return the vacuum wavelengths, nm."""
        if isinstance(self.wavelengths, WavelengthRange):
            return self.wavelengths.values()
        return self.wavelengths


class AccuracyTable(Table):
    """``[accuracy]``: the error to reach, or how fine the cells are.

    ``target`` is relative, on C_ext and C_abs at each wavelength. With ``preview``, coarse
    answers of all points come first.
    """

    target: Annotated[float, Field(strict=True, ge=1e-4, le=0.5, allow_inf_nan=False)] | None = None
    cells: Annotated[int, Field(strict=True, ge=1, le=10_000)] | None = None
    spacing: Positive | None = None
    preview: Annotated[bool, Field(strict=True)] = False

    @model_validator(mode="after")
    def _one_of_three(self) -> AccuracyTable:
        given = [v for v in (self.target, self.cells, self.spacing) if v is not None]
        if len(given) != 1:
            raise ValueError(
                "give either target = 0.02 (relative error of C_ext and C_abs), cells = 32 (across "
                "the largest extent) or spacing = 2.0 (nm), one of the three"
            )
        return self


class LimitsTable(Table):
    """``[limits]``: what refinement may take; the error that was reached is stated."""

    memory_gib: Positive | None = None
    minutes: Positive | None = None


class SolverTable(Table):
    """``[solver]``: how the linear system is solved; every key has a default.

    ``tolerance`` is the largest relative error that the solver may leave in C_ext and C_abs.
    """

    tolerance: Annotated[float, Field(strict=True, gt=0, lt=1, allow_inf_nan=False)] = 1e-3
    method: Literal["cocg", "cocr", "bicgstab", "gmres", "idr"] = "cocg"
    precision: Literal["double", "mixed", "single"] = "double"
    threads: Annotated[int, Field(strict=True, ge=1, le=4096)] | None = None
    processes: Annotated[int, Field(strict=True, ge=1, le=4096)] | None = None


class StudyTables(Table):
    """The whole study file."""

    name: Annotated[str, Field(min_length=1, max_length=200)]
    particle: ParticleTable
    host: HostTable
    light: LightTable
    accuracy: AccuracyTable
    solver: SolverTable = SolverTable()
    limits: LimitsTable = LimitsTable()
    near_field: NearFieldTable | None = None
    scattering: ScatteringTable | None = None
    materials: dict[str, dict[str, Any]] = Field(default_factory=dict)
    vary: dict[str, Any] = Field(default_factory=dict)
