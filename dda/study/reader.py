"""From a TOML file to a checked study.

``read_study`` reports every mistake that the tables themselves show, each with its line and key.
"""

from __future__ import annotations

import difflib
import tomllib
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, get_args

from pydantic import BaseModel, ValidationError

from dda.errors import InputError
from dda.study.lines import line_of
from dda.study.mistakes import Mistake, dotted
from dda.study.schema import StudyTables, WavelengthRange
from dda.study.vary import Vary, read_vary

#: A file with more mistakes than this is better looked at as a whole.
MOST_MESSAGES = 8
_TAGS = ("range", "list")
NOTHING_VARIES = Vary()
NO_VALUES: Mapping[str, Any] = {}
_PLAIN = {
    "float_type": "should be a number",
    "int_type": "should be a whole number",
    "int_from_float": "should be a whole number",
    "string_type": "should be a text in quotes",
    "tuple_type": "should be a list",
    "dict_type": "should be a table",
    "model_type": "should be a table",
    "finite_number": "should be finite",
    "bool_type": "should be true or false",
}


@dataclass(frozen=True)
class Study:
    """A study file that has been read: its tables and where they came from.

    Attributes
    ----------
    path : Path
    text : str
    tables : StudyTables
        With varied keys at their first values.
    vary : Vary
        The varied keys.
    data : dict
        The file as parsed.
    """

    path: Path
    text: str
    tables: StudyTables
    vary: Vary = NOTHING_VARIES
    data: Mapping[str, Any] = field(default_factory=dict, repr=False)

    @property
    def name(self) -> str:
        """The study's own name for itself."""
        return self.tables.name

    @property
    def folder(self) -> Path:
        """The folder at which relative paths in the study start."""
        return self.path.parent

    def variants(self) -> Iterator[tuple[dict[str, Any], StudyTables]]:
        """Yield each combination of the varied keys, and the tables it makes.

        Raises
        ------
        InputError
            A combination does not make a study.
        """
        for values in self.vary.combinations():
            varied = self.vary.named(values)
            yield varied, _tables(self.path, self.text, self.data, self.vary, values)

    def located(self, mistake: Mistake, varied: Mapping[str, Any] | None = None) -> InputError:
        """Return an error that names the file and the line of a mistake as well."""
        if varied is None and self.vary.axes:
            varied = self.vary.named(next(iter(self.vary.combinations())))
        return _error(self.path, self.text, mistake.key, mistake.message, self.vary, varied or {})


def read_study(path: str | Path) -> Study:
    """Read and check a study file.

    Parameters
    ----------
    path : str or Path
        A TOML file.

    Returns
    -------
    Study

    Raises
    ------
    InputError
        The file cannot be read, is no TOML, or its tables do not make a study. The message has a
        line for every mistake found.
    """
    path = Path(path)
    return study_from_text(_read(path), path)


def study_from_text(text: str, path: Path) -> Study:
    """Check the text of a study file; ``path`` tells where relative paths start."""
    try:
        data = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise InputError(f"{path}: not valid TOML: {error}") from None
    return study_from_tables(data, path, text)


def study_from_tables(data: dict[str, Any], path: Path, text: str = "") -> Study:
    """Check tables that are already parsed; ``path`` tells where relative paths start."""
    vary = Vary()
    if isinstance(table := data.get("vary"), Mapping):
        try:
            vary = read_vary(table)
        except Mistake as mistake:
            raise _error(path, text, mistake.key, mistake.message) from None
    first = next(iter(vary.combinations()))
    return Study(path, text, _tables(path, text, data, vary, first), vary, data)


def _tables(
    path: Path, text: str, data: Mapping[str, Any], vary: Vary, values: Sequence[Any]
) -> StudyTables:
    """Check the tables that a combination of the varied keys makes."""
    varied = vary.named(values)
    try:
        return StudyTables.model_validate(vary.applied(data, values))
    except Mistake as mistake:
        raise _error(path, text, mistake.key, mistake.message, vary, varied) from None
    except ValidationError as error:
        raise InputError("\n".join(_messages(path, text, error, vary, varied))) from None


def nearest(word: str, known: Iterable[str]) -> str:
    """Return a hint that names the known word nearest to a mistaken one, or all of them.

    >>> nearest("rouding", ["edge", "rounding"])
    'did you mean "rounding"?'
    """
    names = [str(k) for k in known]
    close = difflib.get_close_matches(word.lower(), names, n=1, cutoff=0.6)
    if close:
        return f'did you mean "{close[0]}"?'
    return f"known: {', '.join(names)}"


def _read(path: Path) -> str:
    if path.is_dir():
        raise InputError(f"{path}: a folder, not a study file")
    try:
        return path.read_text(encoding="utf-8-sig")
    except FileNotFoundError:
        there = sorted(p.name for p in path.parent.glob("*.toml")) if path.parent.is_dir() else []
        close = difflib.get_close_matches(path.name, there, n=1)
        hint = f'; did you mean "{path.parent / close[0]}"?' if close else ""
        raise InputError(f"{path}: no such file{hint}") from None
    except UnicodeDecodeError as error:
        raise InputError(
            f"{path}: not a text in UTF-8 (byte {error.start}); a study is a TOML file"
        ) from None
    except OSError as error:
        raise InputError(f"{path}: cannot be read: {error.strerror}") from None


def _error(
    path: Path,
    text: str,
    key: Sequence[str | int],
    message: str,
    vary: Vary = NOTHING_VARIES,
    varied: Mapping[str, Any] = NO_VALUES,
) -> InputError:
    """Return an error at a key; one that is varied stands in ``[vary]``."""
    here: Sequence[str | int] = key
    for axis in vary.axes:
        if tuple(key[: len(axis.key)]) == axis.key:
            here = ("vary", *axis.written)
    line = line_of(text, here)
    place = f"{path}, line {line}" if line else f"{path}"
    if varied:
        at = ", ".join(f"{name} = {_shown(value)}" for name, value in varied.items())
        message = f"{message} (with {at})"
    return InputError(f"{place}: {dotted(key)}: {message}" if key else f"{place}: {message}")


def _messages(
    path: Path, text: str, error: ValidationError, vary: Vary, varied: Mapping[str, Any]
) -> list[str]:
    mistakes = error.errors(include_url=False)
    lines = []
    for mistake in mistakes[:MOST_MESSAGES]:
        key = tuple(part for part in mistake["loc"] if part not in _TAGS)
        lines.append(str(_error(path, text, key, _sentence(mistake, key), vary, varied)))
    if len(mistakes) > MOST_MESSAGES:
        lines.append(f"and {len(mistakes) - MOST_MESSAGES} more")
    return lines


def _sentence(mistake: Any, key: Sequence[str | int]) -> str:
    kind, value = mistake["type"], mistake["input"]
    if kind == "missing":
        known = _model_at(key)
        what = "table" if known is not None else "key"
        return f"this {what} is missing; the study needs it"
    if kind == "extra_forbidden":
        model = _model_at(key[:-1])
        return f"unknown key; {nearest(str(key[-1]), _keys(model) if model else ())}"
    if kind == "value_error":
        return str(mistake["ctx"]["error"])
    if kind in _PLAIN:
        return f"{_PLAIN[kind]}, not {_shown(value)}"
    if kind == "greater_than" and mistake["ctx"]["gt"] == 0:
        return f"should be above zero, not {_shown(value)}"
    message = mistake["msg"].replace("Input should", "should")
    return f"{message[0].lower()}{message[1:]}, not {_shown(value)}"


def _shown(value: Any) -> str:
    text = f'"{value}"' if isinstance(value, str) else repr(value)
    if isinstance(value, bool):
        text = str(value).lower()
    return text if len(text) <= 60 else text[:57] + "..."


def _model_at(key: Sequence[str | int]) -> type[BaseModel] | None:
    """Return the model of the table at a key path, None where there is no table."""
    model: type[BaseModel] = StudyTables
    for part in key:
        if isinstance(part, int):
            continue  # a table of a list of them
        if part == "wavelengths" and "wavelengths" in model.model_fields:
            model = WavelengthRange
            continue
        field = model.model_fields.get(str(part))
        kinds = () if field is None else _inside(field.annotation)
        tables = [k for k in kinds if isinstance(k, type) and issubclass(k, BaseModel)]
        if not tables:
            return None
        model = tables[0]
    return model


def _inside(annotation: Any) -> tuple[Any, ...]:
    """An annotation and all that its brackets hold."""
    return (annotation, *(kind for a in get_args(annotation) for kind in _inside(a)))


def _keys(model: type[BaseModel]) -> list[str]:
    return [field.alias or name for name, field in model.model_fields.items()]
