"""``[[particle.parts]]``: the tables of a particle that is put together from several parts."""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import AfterValidator, ConfigDict, Field, model_validator

from dda.study.fields import Finite, Positive, Table, Vector


def _turns(axis: Vector) -> Vector:
    if not any(axis):
        raise ValueError("the axis has length zero; about z it is [0, 0, 1]")
    return axis


class RotationTable(Table):
    """``{angle = 90, axis = [0, 0, 1]}``: a turn by an angle in degrees, about z by default."""

    angle: Finite
    axis: Annotated[Vector, AfterValidator(_turns)] = (0.0, 0.0, 1.0)


class PartTable(Table):
    """One part: a shape of the catalogue or a mesh file, where it is, and what it does there.

    A part replaces what earlier ones put in its place; with ``subtract`` it leaves host there. It
    is turned about its own origin first and moved to ``position`` (nm) then.
    """

    model_config = ConfigDict(extra="allow", frozen=True)

    shape: str | None = None
    mesh: str | None = None
    unit: str | None = None
    scale: Positive | None = None
    material: str | None = None
    position: Vector = (0.0, 0.0, 0.0)
    rotation: RotationTable | None = None
    subtract: Annotated[bool, Field(strict=True)] = False

    @property
    def parameters(self) -> dict[str, Any]:
        """The keys beside the declared ones: parameters of the catalogue shape."""
        own = {k: getattr(self, k) for k in ("unit", "scale")}
        return {k: v for k, v in own.items() if v is not None} | dict(self.__pydantic_extra__ or {})

    @model_validator(mode="after")
    def _one_source(self) -> PartTable:
        if (self.shape is None) == (self.mesh is None):
            raise ValueError('a part is either shape = "cube" or mesh = "FILE.stl", one of the two')
        if self.mesh is not None and self.__pydantic_extra__:
            raise ValueError(
                f"{', '.join(self.__pydantic_extra__)}: a part given by mesh takes only the keys "
                "unit, scale, material, position, rotation, subtract"
            )
        if self.subtract and self.material is not None:
            raise ValueError("a part that is subtracted has no material; leave out one of the two")
        return self
