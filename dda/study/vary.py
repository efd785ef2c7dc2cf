"""``[vary]``: keys of the study that take several values, and the combinations of them."""

from __future__ import annotations

import itertools
import math
import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from dda.study.mistakes import Mistake, dotted

#: More points than this are taken for a slip of the pen.
MOST_POINTS = 1_000_000
_RANGE = {"from", "to", "step"}
_OPTIONS = ("zip",)
# Keys that cannot be varied, and why.
_FIXED = {
    "name": "it names the whole study",
    "vary": "it is the table of the varied keys",
    "limits": "limits hold for the whole study",
    "near_field.points": "one list of points holds for the whole study",
    "light.wavelengths": "[light] takes a list or a range of wavelengths as it is",
    "solver.threads": "it changes no answer",
    "solver.processes": "it holds for the whole study",
    "accuracy.preview": "it holds for the whole study",
}

Key = tuple[str | int, ...]


@dataclass(frozen=True)
class Axis:
    """A varied key.

    Attributes
    ----------
    key : tuple of str or int
        Where it stands in the study.
    values : tuple
        What it takes, one after the other.
    written : tuple of str
        Where its values stand in the study.
    """

    key: Key
    values: tuple[Any, ...]
    written: tuple[str, ...]

    @property
    def name(self) -> str:
        """The dotted name, which is that of its column."""
        return dotted(self.key)


@dataclass(frozen=True)
class Vary:
    """The varied keys of a study.

    Attributes
    ----------
    axes : tuple of Axis
    zipped : bool
        Whether the values go side by side instead of forming a grid.
    """

    axes: tuple[Axis, ...] = ()
    zipped: bool = False

    def __len__(self) -> int:
        """Number of combinations; one if nothing varies."""
        if self.zipped:
            return len(self.axes[0].values)
        return math.prod(len(axis.values) for axis in self.axes)

    def combinations(self) -> Iterator[tuple[Any, ...]]:
        """Yield the values of all keys, the last key changing fastest."""
        values = [axis.values for axis in self.axes]
        return zip(*values, strict=True) if self.zipped else itertools.product(*values)

    def applied(self, data: Mapping[str, Any], values: Sequence[Any]) -> dict[str, Any]:
        """Return the tables of a study with the keys at some values."""
        tables: Any = dict(data)
        for axis, value in zip(self.axes, values, strict=True):
            tables = _put(tables, axis.key, value, axis)
        return tables

    def named(self, values: Sequence[Any]) -> dict[str, Any]:
        """Return values by the dotted names of their keys."""
        return {axis.name: value for axis, value in zip(self.axes, values, strict=True)}


def read_vary(table: Mapping[str, Any]) -> Vary:
    """Return what a table ``[vary]`` asks for.

    Parameters
    ----------
    table : mapping
        As parsed: keys dotted, quoted or not; each with a list of values or a range
        ``{from, to, step}``.

    Raises
    ------
    Mistake
        With the key at fault.

    Examples
    --------
    >>> vary = read_vary({"particle": {"edge": [40, 50]}, "host.index": [1.33, 1.5]})
    >>> len(vary), vary.named(next(iter(vary.combinations())))
    (4, {'particle.edge': 40, 'host.index': 1.33})
    """
    zipped = table.get("zip", False)
    if not isinstance(zipped, bool):
        raise Mistake(("vary", "zip"), "should be true or false")
    given = {key: value for key, value in table.items() if key not in _OPTIONS}
    axes = tuple(_axes(given, ()))
    if not axes and table:
        raise Mistake(("vary",), "no key is varied; for example particle.edge = [40, 50, 60]")
    names = [axis.name for axis in axes]
    for number, axis in enumerate(axes):
        if axis.name in names[:number]:
            raise Mistake(("vary", *axis.written), f"{axis.name} is varied twice")
    if zipped:
        _check_lengths(axes)
    else:
        for axis in axes:
            _check_twice(axis)
    vary = Vary(axes, zipped)
    if len(vary) > MOST_POINTS:
        raise Mistake(("vary",), f"{len(vary)} combinations; at most {MOST_POINTS} are computed")
    return vary


def _axes(table: Mapping[str, Any], written: tuple[str, ...]) -> Iterator[Axis]:
    for word, value in table.items():
        here = (*written, word)
        if isinstance(value, Mapping) and not _RANGE & set(value):
            yield from _axes(value, here)
            continue
        key = _split(".".join(here))
        _check_key(key, here)
        values = tuple(_values(value, ("vary", *here)))
        yield Axis(key, values, here)


def _split(name: str) -> Key:
    """Split a dotted name; numbers and [numbers] are places in a list.

    >>> _split("particle.parts[0].edge") == _split("particle.parts.0.edge")
    True
    """
    words = re.findall(r"[^.\[\]]+", name)
    return tuple(int(word) if word.isdigit() else word for word in words)


def _check_key(key: Key, written: tuple[str, ...]) -> None:
    for length in range(1, len(key) + 1):
        reason = _FIXED.get(dotted(key[:length]))
        if reason:
            raise Mistake(("vary", *written), f"{dotted(key)} cannot be varied: {reason}")
    if len(key) < 2:
        raise Mistake(
            ("vary", *written),
            f'"{dotted(key)}" is no key inside a table; write it with its table, such as '
            "particle.edge",
        )


def _values(value: Any, key: Key) -> Sequence[Any]:
    if isinstance(value, Mapping):
        return _range(value, key)
    if not isinstance(value, list):
        raise Mistake(key, "should be a list of values or a range {from = 40, to = 80, step = 10}")
    if not value:
        raise Mistake(key, "the list of values is empty")
    return value


def _range(value: Mapping[str, Any], key: Key) -> list[float]:
    numbers = []
    for word in value:
        if word not in _RANGE:
            raise Mistake(key, f'"{word}" is not known; write {{from = 40, to = 80, step = 10}}')
    for word in ("from", "to", "step"):
        number = value.get(word)
        if not isinstance(number, int | float) or isinstance(number, bool):
            raise Mistake(key, f"{word} should be a number: {{from = 40, to = 80, step = 10}}")
        numbers.append(number)
    start, stop, step = numbers
    if not (step > 0 and stop >= start and math.isfinite(stop) and math.isfinite(start)):
        raise Mistake(key, "needs from below to, and a step above zero")
    count = math.floor((stop - start) / step + 1e-9) + 1
    if count > MOST_POINTS:
        raise Mistake(key, f"step = {step:g} makes more than {MOST_POINTS} values")
    # whole numbers stay whole: a number of cells or of arms is one
    if all(isinstance(number, int) for number in numbers):
        return [start + i * step for i in range(count)]
    return [round(start + i * step, 12) for i in range(count)]


def _check_twice(axis: Axis) -> None:
    seen = set()
    for value in axis.values:
        if (text := repr(value)) in seen:
            raise Mistake(("vary", *axis.written), f"the value {text} is listed twice")
        seen.add(text)


def _check_lengths(axes: Sequence[Axis]) -> None:
    for axis in axes[1:]:
        if len(axis.values) != len(axes[0].values):
            raise Mistake(
                ("vary", *axis.written),
                f"zip = true takes the values side by side, but {axes[0].name} has "
                f"{len(axes[0].values)} of them and {axis.name} {len(axis.values)}",
            )


def _put(tables: Any, key: Key, value: Any, axis: Axis) -> Any:
    """Return tables with a value at a key; what is not on the way is shared."""
    word, *rest = key
    if isinstance(word, int) and isinstance(tables, Mapping):
        word = str(word)  # the label of a voxel image
    if isinstance(word, int):
        if not isinstance(tables, list) or word >= len(tables):
            raise Mistake(("vary", *axis.written), f"{axis.name}: the study has no such entry")
        inner = _put(tables[word], tuple(rest), value, axis) if rest else value
        return [*tables[:word], inner, *tables[word + 1 :]]
    if not isinstance(tables, Mapping):
        raise Mistake(("vary", *axis.written), f"{axis.name}: there is no such table in the study")
    inner = _put(tables.get(word, {}), tuple(rest), value, axis) if rest else value
    return {**tables, word: inner}
