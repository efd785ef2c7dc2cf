"""Materials written as a table in a study file: ``{model = "drude", plasma_eV = 9.0, ...}``.

Every form is checked strictly: an unknown key is refused with the nearest known one. Energies are
in eV, wavelengths in the formulas of Sellmeier and Cauchy in micrometres.
"""

import difflib
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any, Literal

from pydantic import BaseModel, ConfigDict, Field, ValidationError, field_validator

from dda.errors import InputError
from dda.materials import models
from dda.materials.anisotropic import anisotropic, require_isotropic, rotation_matrix
from dda.materials.damping import size_corrected
from dda.materials.material import Dispersion, Material
from dda.materials.mixtures import mixture


class _Strict(BaseModel):
    model_config = ConfigDict(extra="forbid", strict=True, allow_inf_nan=False)


class _Form(_Strict):
    """A form of the table; `name` is only a label."""

    name: str | None = None

    def material(self, base_dir: str | Path | None, extrapolate: bool) -> Material:
        raise NotImplementedError


_Pair = float | tuple[float, float]


def _as_tuple(value: Any) -> Any:
    return tuple(value) if isinstance(value, list) else value


def _complex(value: _Pair) -> complex:
    return complex(*value) if isinstance(value, tuple) else complex(value)


class _Index(_Form):
    index: _Pair = Field(description="n, or [n, k]")
    _list = field_validator("index", mode="before")(_as_tuple)

    def material(self, base_dir: str | Path | None, extrapolate: bool) -> Material:
        from dda.materials.resolve import constant_index

        return constant_index(_complex(self.index))


class _Eps(_Form):
    eps: _Pair = Field(description="Re eps, or [Re eps, Im eps]")
    _list = field_validator("eps", mode="before")(_as_tuple)

    def material(self, base_dir: str | Path | None, extrapolate: bool) -> Material:
        value = _complex(self.eps)
        if value == 0 or value.imag < 0:
            raise InputError(f"eps = {value:g} must not be 0, and Im eps must be 0 or more")
        shown = f"eps = {value.real:g} + {value.imag:g} i"
        return Material(shown, models.Constant(value), "a constant of the user")


class _Reference(_Form):
    """A form that points at data, which may be extrapolated."""

    extrapolate: bool = False

    def spec(self) -> str | Path:
        raise NotImplementedError

    def material(self, base_dir: str | Path | None, extrapolate: bool) -> Material:
        from dda.materials.resolve import find

        return find(self.spec(), base_dir, extrapolate or self.extrapolate)


class _Table(_Reference):
    table: str

    def spec(self) -> Path:
        return Path(self.table)


class _Page(_Reference):
    page: str

    def material(self, base_dir: str | Path | None, extrapolate: bool) -> Material:
        from dda.materials.database import from_page

        found = from_page(self.page)
        return found.extrapolated() if extrapolate or self.extrapolate else found


class _Named(_Reference):
    material_: str = Field(alias="material")

    def spec(self) -> str:
        return self.material_


class _Rotation(_Strict):
    angle: float
    axis: tuple[float, float, float] = (0.0, 0.0, 1.0)
    _list = field_validator("axis", mode="before")(_as_tuple)


class _Axes(_Form):
    """Principal materials of an anisotropic one; `angle` in degrees."""

    axes: list[Any]
    rotation: _Rotation | None = None

    def material(self, base_dir: str | Path | None, extrapolate: bool) -> Material:
        from dda.materials.resolve import find

        turn = None
        if self.rotation is not None:
            if not any(self.rotation.axis):
                raise InputError("material: rotation.axis has length zero; about z it is [0, 0, 1]")
            turn = rotation_matrix(self.rotation.axis, self.rotation.angle)
        return anisotropic([find(one, base_dir, extrapolate) for one in self.axes], turn)


class _Model(_Form):
    """An analytic model; `range_nm` says where it holds, if it was fitted."""

    model: str
    range_nm: tuple[float, float] | None = None
    _list = field_validator("range_nm", mode="before")(_as_tuple)

    def dispersion(self) -> Dispersion:
        raise NotImplementedError

    def material(self, base_dir: str | Path | None, extrapolate: bool) -> Material:
        if self.range_nm is not None and not 0 < self.range_nm[0] < self.range_nm[1]:
            raise InputError(f"range_nm = {list(self.range_nm)} must be [shortest, longest], in nm")
        return Material(self.model, self.dispersion(), f"{self.model} model", self.range_nm)


class _Drude(_Model):
    model: Literal["drude"]
    eps_inf: float = 1.0
    plasma_eV: float = Field(ge=0)
    damping_eV: float = Field(ge=0)

    def dispersion(self) -> Dispersion:
        return models.Drude(self.eps_inf, self.plasma_eV, self.damping_eV)


class _Oscillator(_Strict):
    strength: float = Field(ge=0)
    resonance_eV: float = Field(gt=0)
    damping_eV: float = Field(ge=0)


class _DrudeLorentz(_Model):
    model: Literal["drude-lorentz"]
    eps_inf: float = 1.0
    plasma_eV: float = Field(default=0.0, ge=0)
    damping_eV: float = Field(default=0.0, ge=0)
    oscillators: list[_Oscillator]

    def dispersion(self) -> Dispersion:
        oscillators = tuple(models.Oscillator(**dict(one)) for one in self.oscillators)
        return models.DrudeLorentz(self.eps_inf, self.plasma_eV, self.damping_eV, oscillators)


class _CriticalPoint(_Strict):
    amplitude: float
    energy_eV: float = Field(gt=0)
    damping_eV: float = Field(ge=0)
    phase_deg: float = -45.0


class _DrudeCriticalPoints(_Model):
    model: Literal["drude-critical-points"]
    eps_inf: float = 1.0
    plasma_eV: float = Field(default=0.0, ge=0)
    damping_eV: float = Field(default=0.0, ge=0)
    critical_points: list[_CriticalPoint]

    def dispersion(self) -> Dispersion:
        points = tuple(models.CriticalPoint(**dict(one)) for one in self.critical_points)
        return models.DrudeCriticalPoints(self.eps_inf, self.plasma_eV, self.damping_eV, points)


class _Sellmeier(_Model):
    model: Literal["sellmeier"]
    B: list[float] = Field(min_length=1)
    C_um2: list[float] = Field(min_length=1)
    A: float = 1.0

    def dispersion(self) -> Dispersion:
        if len(self.B) != len(self.C_um2):
            raise InputError(
                f"B has {len(self.B)} numbers and C_um2 has {len(self.C_um2)}; every B_j "
                "needs its C_j"
            )
        return models.Sellmeier(tuple(self.B), tuple(self.C_um2), self.A)


class _Cauchy(_Model):
    model: Literal["cauchy"]
    coefficients: list[float] = Field(min_length=1)

    def dispersion(self) -> Dispersion:
        return models.Cauchy(tuple(self.coefficients))


class _Mixture(_Form):
    model: Literal["maxwell-garnett", "bruggeman", "looyenga", "lorentz-lorenz"]
    host: Any
    inclusion: Any
    fraction: float = Field(ge=0, le=1)

    def material(self, base_dir: str | Path | None, extrapolate: bool) -> Material:
        from dda.materials.resolve import find

        host = require_isotropic(find(self.host, base_dir, extrapolate), "a mixed material")
        inclusion = require_isotropic(
            find(self.inclusion, base_dir, extrapolate), "a mixed material"
        )
        return mixture(self.model, host, inclusion, self.fraction)


class _SizeCorrected(_Form):
    model: Literal["size-corrected"]
    metal: Any
    length_nm: float = Field(gt=0)
    A: float = Field(default=1.0, ge=0)
    fermi_energy_eV: float | None = Field(default=None, gt=0)
    v_F: float | None = Field(default=None, gt=0)
    plasma_eV: float | None = Field(default=None, gt=0)
    damping_eV: float | None = Field(default=None, ge=0)

    def material(self, base_dir: str | Path | None, extrapolate: bool) -> Material:
        from dda.materials.resolve import find

        return size_corrected(
            require_isotropic(find(self.metal, base_dir, extrapolate), "a size-corrected metal"),
            self.length_nm,
            A=self.A,
            fermi_energy_eV=self.fermi_energy_eV,
            v_F=self.v_F,
            plasma_eV=self.plasma_eV,
            damping_eV=self.damping_eV,
        )


_BY_KEY: dict[str, type[_Form]] = {
    "index": _Index,
    "eps": _Eps,
    "table": _Table,
    "page": _Page,
    "material": _Named,
    "axes": _Axes,
}
_BY_MODEL: dict[str, type[_Form]] = {
    "drude": _Drude,
    "drude-lorentz": _DrudeLorentz,
    "drude-critical-points": _DrudeCriticalPoints,
    "sellmeier": _Sellmeier,
    "cauchy": _Cauchy,
    "maxwell-garnett": _Mixture,
    "bruggeman": _Mixture,
    "looyenga": _Mixture,
    "lorentz-lorenz": _Mixture,
    "size-corrected": _SizeCorrected,
}
MODELS = tuple(_BY_MODEL)
"""Names that the key `model` may have."""


def from_study_table(
    table: Mapping[str, Any], base_dir: str | Path | None = None, extrapolate: bool = False
) -> Material:
    """Material of a table of a study file.

    Parameters
    ----------
    table : one of the forms ``{index = n or [n, k]}``, ``{eps = re or [re, im]}``,
        ``{table = "file.csv"}``, ``{page = "shelf/book/page"}``, ``{material = "gold"}`` (these
        three take ``extrapolate = true``), ``{axes = ["a", "b", 1.76], rotation = {angle = 90,
        axis = [0, 0, 1]}}`` (principal materials, turned by degrees), or ``{model = name, ...}``
        with a name of `MODELS`. Each may have ``name``, a label.

    Raises
    ------
    InputError
        Naming the key that is wrong, and the nearest right one.

    Examples
    --------
    >>> gas = from_study_table({"model": "drude", "plasma_eV": 9.0, "damping_eV": 0.1})
    >>> bool(gas.permittivity(600.0).real < 0)
    True
    """
    form = _form(table)
    try:
        parsed = form.model_validate(dict(table))
    except ValidationError as error:
        raise InputError(_explained(error, form, table)) from None
    material = parsed.material(base_dir, extrapolate)
    return material if parsed.name is None else replace(material, name=parsed.name)


def _form(table: Mapping[str, Any]) -> type[_Form]:
    if "model" in table:
        name = table["model"]
        if isinstance(name, str) and name in _BY_MODEL:
            return _BY_MODEL[name]
        raise InputError(f"material: model = {name!r} {_nearest(str(name), MODELS)}")
    keys = [key for key in _BY_KEY if key in table]
    if len(keys) == 1:
        return _BY_KEY[keys[0]]
    known = (*_BY_KEY, "model")
    if keys:
        raise InputError(f"material: give one of {', '.join(keys)}, not several")
    wrong = ", ".join(f"'{key}' {_nearest(key, known)}" for key in table) or "the table is empty"
    raise InputError(f"material: {wrong}; the table needs one of {', '.join(known)}")


def _explained(error: ValidationError, form: type[_Form], table: Mapping[str, Any]) -> str:
    """One sentence for the first thing wrong, preferring a misspelt key to what it left missing."""
    problems = sorted(error.errors(), key=lambda problem: problem["type"] != "extra_forbidden")
    problem = problems[0]
    place = [part for part in problem["loc"] if not str(part).startswith(("float", "tuple"))]
    where = "material " + str(table.get("model", "")).strip()
    path = ".".join(str(part) for part in place)
    if problem["type"] == "extra_forbidden":
        known = _keys_at(form, place[:-1])
        return f"{where.strip()}: key '{path}' {_nearest(str(place[-1]), known)}"
    if problem["type"] == "missing":
        return f"{where.strip()}: key '{path}' is missing"
    field = form.model_fields.get(path)
    if field is not None and field.description:
        value = table[path]
        return f"{where.strip()}: {path} = {value!r}; it must be {field.description}, as numbers"
    return f"{where.strip()}: {path} = {problem['input']!r}: {problem['msg']}"


def _keys_at(form: type[BaseModel], place: list[Any]) -> tuple[str, ...]:
    inner: dict[str, type[BaseModel]] = {
        "oscillators": _Oscillator,
        "critical_points": _CriticalPoint,
        "rotation": _Rotation,
    }
    target = inner.get(place[0], form) if place else form
    return tuple(field.alias or name for name, field in target.model_fields.items())


def _nearest(text: str, known: tuple[str, ...]) -> str:
    near = difflib.get_close_matches(text, known, n=1, cutoff=0.4)
    hint = f"did you mean '{near[0]}'? " if near else ""
    return f"is unknown; {hint}Known are {', '.join(known)}"
