"""The catalogue: every shape by name, with its parameters, built from plain values.

A study file and the listing of shapes are made from the entries here; the same checks hold for
calls from Python. Builders join with the decorator `shape`.
"""

from __future__ import annotations

import difflib
import inspect
import math
import operator
import re
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from functools import wraps
from typing import Any, ParamSpec

from .body import Particle, ShapeError

P = ParamSpec("P")

KINDS = ("number", "count", "numbers", "choice", "particle", "names")
COMPARE = {">=": operator.ge, "<=": operator.le, ">": operator.gt, "<": operator.lt}


@dataclass(frozen=True)
class Parameter:
    """A parameter of a shape.

    Attributes
    ----------
    doc : str
        What it is.
    unit : str
        "nm", "deg" or "" for a pure number.
    check : str
        What must hold, comparisons joined by "and", such as "> 0 and <= edge/2". Names are other
        parameters of the shape; each number of a list must pass.
    kind : str
        "number", "count" (whole number), "numbers", "choice", "particle" (a nested shape) or
        "names" (of materials).
    example : object
        A value that draws well, where there is no default.
    choices : tuple of str
        For the kind "choice".
    name : str
        Set by the entry.
    required : bool
        Whether there is no default; set by the entry.
    default : object
        Set by the entry.
    """

    doc: str
    unit: str = ""
    check: str = ""
    kind: str = "number"
    example: Any = None
    choices: tuple[str, ...] = ()
    name: str = ""
    required: bool = False
    default: Any = None

    def __post_init__(self) -> None:
        assert self.kind in KINDS, self.kind


@dataclass(frozen=True)
class Entry:
    """A shape of the catalogue.

    Attributes
    ----------
    name, doc : str
    parameters : dict of str to Parameter
        In the order of the builder's arguments, the material left out.
    builder : callable
        Takes the parameters and `material` as keywords, returns a Particle.
    """

    name: str
    doc: str
    parameters: dict[str, Parameter]
    builder: Callable[..., Particle] = field(repr=False)

    @property
    def nested(self) -> bool:
        """Whether a parameter is itself a shape."""
        return any(p.kind == "particle" for p in self.parameters.values())

    @property
    def example(self) -> dict[str, Any]:
        """Values for `build` that draw a typical particle of this shape."""
        return {
            name: p.example if p.example is not None else p.default
            for name, p in self.parameters.items()
            if p.required or p.example is not None
        }


entries: dict[str, Entry] = {}


def length(doc: str, check: str = "> 0", example: Any = None) -> Parameter:
    """A length in nm."""
    return Parameter(doc, "nm", check, example=example)


def shape(**parameters: Parameter) -> Callable[[Callable[P, Particle]], Callable[P, Particle]]:
    """Enter a builder into the catalogue, and check its arguments at every call."""

    def enter(builder: Callable[P, Particle]) -> Callable[P, Particle]:
        name = builder.__name__
        signature = inspect.signature(builder)
        known = {}
        for key, argument in signature.parameters.items():
            if key == "material":
                continue
            required = argument.default is inspect.Parameter.empty
            known[key] = Parameter(
                **{
                    **parameters[key].__dict__,
                    "name": key,
                    "required": required,
                    "default": None if required else argument.default,
                }
            )
        assert set(known) == set(parameters), f"{name}: {set(known) ^ set(parameters)}"
        doc = inspect.getdoc(builder) or ""

        @wraps(builder)
        def checked(*args: P.args, **kwargs: P.kwargs) -> Particle:
            try:
                bound = signature.bind(*args, **kwargs)
            except TypeError as error:
                takes = ", ".join(known)
                raise ShapeError(f"{name}: {error}; it takes {takes}") from None
            bound.apply_defaults()
            values = {key: bound.arguments[key] for key in known}
            for key, parameter in known.items():
                values[key] = _typed(name, parameter, values[key])
            for parameter in known.values():
                _check(name, parameter, values)
            bound.arguments.update(values)
            return builder(*bound.args, **bound.kwargs)

        entries[name] = Entry(name, doc, known, checked)
        return checked

    return enter


def find(name: str) -> Entry:
    """The entry called `name`.

    Raises
    ------
    ShapeError
        For an unknown name; the message gives the nearest known ones.

    Examples
    --------
    >>> list(find("cube").parameters)
    ['edge', 'rounding']
    """
    key = str(name).strip().lower().replace("-", "_").replace(" ", "_")
    if key not in entries:
        near = difflib.get_close_matches(key, entries, n=3, cutoff=0.6)
        hint = f"did you mean {' or '.join(near)}?" if near else f"known are {', '.join(entries)}"
        raise ShapeError(f"unknown shape {name!r}; {hint}", ("shape",))
    return entries[key]


def build(name: str, parameters: Mapping[str, Any], material: str) -> Particle:
    """A particle of the catalogue from plain values.

    Parameters
    ----------
    name : str
        Name of the shape.
    parameters : mapping
        Its parameters. A nested shape is a mapping with the key "shape", its own parameters, and
        "material" if it differs from the outer one.
    material : str
        Name of the material.

    Raises
    ------
    ShapeError
        With the parameter's name and what would be right; `where` gives its place.

    Examples
    --------
    >>> pair = build("dimer", {"gap": 2, "of": {"shape": "sphere", "diameter": 20}}, "gold")
    >>> pair.bounds[1] - pair.bounds[0]
    array([42., 20., 20.])
    """
    entry = find(name)
    given = {}
    for key, value in parameters.items():
        if key not in entry.parameters:
            raise ShapeError(_unknown(entry, key), (key,))
        if entry.parameters[key].kind == "particle" and not isinstance(value, Particle):
            value = _nested(entry, key, value, material)
        given[key] = value
    missing = [p.name for p in entry.parameters.values() if p.required and p.name not in given]
    if missing:
        wanted = entry.parameters[missing[0]]
        unit = f" ({wanted.unit})" if wanted.unit else ""
        raise ShapeError(
            f"{entry.name} needs {' and '.join(missing)}; {missing[0]}{unit}: {wanted.doc}",
            (missing[0],),
        )
    return entry.builder(**given, material=material)


def example(name: str, material: str = "gold") -> Particle:
    """A typical particle of the shape called `name`, for a picture.

    >>> example("sphere").extent
    array([60., 60., 60.])
    """
    return build(name, find(name).example, material)


def _nested(entry: Entry, key: str, value: Any, material: str) -> Particle:
    if not isinstance(value, Mapping) or "shape" not in value:
        raise ShapeError(
            f"{entry.name}: {key} must be a table that describes a shape, with the key 'shape'",
            (key,),
        )
    inner = {k: v for k, v in value.items() if k not in ("shape", "material")}
    try:
        return build(value["shape"], inner, value.get("material", material))
    except ShapeError as error:
        raise ShapeError(f"{entry.name}.{key}: {error}", (key, *error.where)) from None


def _unknown(entry: Entry, key: str) -> str:
    near = difflib.get_close_matches(key, entry.parameters, n=1, cutoff=0.5)
    hint = f"did you mean {near[0]!r}? " if near else ""
    return f"{entry.name} has no parameter {key!r}; {hint}it takes {', '.join(entry.parameters)}"


def _typed(shape_name: str, parameter: Parameter, value: Any) -> Any:
    """The value as its kind, or ShapeError."""
    name, kind = parameter.name, parameter.kind

    def wrong(wanted: str) -> ShapeError:
        return ShapeError(f"{shape_name}: {name} = {value!r} must be {wanted}", (name,))

    unit = f" ({parameter.unit})" if parameter.unit else ""
    if kind == "number":
        if not _is_number(value):
            raise wrong(f"a number{unit}")
        return float(value)
    if kind == "count":
        if not _is_number(value) or value != int(value):
            raise wrong("a whole number")
        return int(value)
    if kind == "numbers":
        listed = _is_list(value)
        if not listed or not all(_is_number(v) for v in value):
            raise wrong(f"a list of numbers{unit}")
        return tuple(float(v) for v in value)
    if kind == "choice":
        if value not in parameter.choices:
            near = difflib.get_close_matches(str(value).lower(), parameter.choices, n=1)
            hint = f"; did you mean {near[0]!r}?" if near else ""
            raise wrong(f"one of {', '.join(parameter.choices)}{hint}")
        return value
    if kind == "names":
        if not _is_list(value) or not all(isinstance(v, str) for v in value):
            raise wrong("a list of material names")
        return tuple(value)
    if not isinstance(value, Particle):
        raise wrong("a particle")
    return value


def _is_number(value: Any) -> bool:
    try:
        return not isinstance(value, bool | str) and math.isfinite(float(value))
    except (TypeError, ValueError):
        return False


def _is_list(value: Any) -> bool:
    return not isinstance(value, str | Mapping) and (
        isinstance(value, Sequence) or getattr(value, "ndim", 0) == 1
    )


def _check(shape_name: str, parameter: Parameter, values: Mapping[str, Any]) -> None:
    """Raise ShapeError unless the parameter's value passes its check."""
    if not parameter.check:
        return
    names = {k: v for k, v in values.items() if isinstance(v, int | float | tuple)}
    value = values[parameter.name]
    for condition in parameter.check.split(" and "):
        symbol, expression = condition.split(maxsplit=1)
        # the expression comes from the catalogue itself, never from a user
        limit = eval(expression, {"__builtins__": {}}, {**names, "min": min, "pi": math.pi})
        for number in value if isinstance(value, tuple) else (value,):
            if not COMPARE[symbol](number, limit):
                used = [k for k in names if re.search(rf"\b{k}\b", expression)]
                what = f"{symbol} {expression}"
                if used:
                    what += f", here {limit:g}"
                unit = f" {parameter.unit}" if parameter.unit else ""
                raise ShapeError(
                    f"{shape_name}: {parameter.name} = {number:g}{unit} must be {what}",
                    (parameter.name,),
                )
