"""TOML → frozen dataclass; every error names the file, the line, the key, and what was probably meant.

Strategy. A dataclass is the description of a table: its fields are the known keys, their types what may stand there,
their defaults what holds when a key is absent. ``tomllib`` reads the text but keeps no line numbers. They are looked
for only when something is wrong: the line of a key is where the last statement begins in the shortest beginning of
the file that already holds it. That costs a few parses, needs no second reader of TOML, and cannot disagree with the
first one.

A type may be ``str``, ``int``, ``float``, ``bool``, ``Literal[...]``, a dataclass (a table), ``tuple[T, ...]`` (a list,
or a list of tables), ``tuple[A, B]``, ``dict[str, T]``, a union of these, or ``Annotated[T, reader]`` where ``reader``
is a function from what stands in the file to the value; it raises ConfigurationError with the reason alone. The same
holds for a dataclass's ``__post_init__``. Where the key is not the field's name: ``field(metadata={"key": "hold"})``.
"""

from __future__ import annotations

import dataclasses
import difflib
import math
import re
import tomllib
import types
import typing
from collections.abc import Iterable
from pathlib import Path
from typing import Annotated, Any, Literal, TypeVar

from gnssmon.errors import ConfigurationError
from gnssmon.printable import printable
from gnssmon.utc import parse_duration_s

T = TypeVar("T")
Where = tuple[str | int, ...]
"""Keys and list positions from the top of the file to a value."""

LARGEST_BYTES = 200_000
"""No settings are that long; a log given by mistake may be gigabytes."""

WORDS = {bool: "true or false", int: "a whole number", float: "a number", str: "a text in quotes"}


def load(cls: type[T], text_or_path: str | Path, *, name: str | None = None) -> T:
    """Read TOML into ``cls``: a ``str`` is the text itself, a ``Path`` the file that holds it.

    ``name`` is how errors call the file; a path is its own name. Raises ConfigurationError.
    """
    name = name or (str(text_or_path) if isinstance(text_or_path, Path) else "settings")
    text = contents(text_or_path) if isinstance(text_or_path, Path) else text_or_path
    text = text.removeprefix("\ufeff")  # some editors begin a file with it
    try:
        document = tomllib.loads(text)
    except (tomllib.TOMLDecodeError, RecursionError) as error:
        raise ConfigurationError(_syntax(str(error), text, name)) from None
    try:
        return typing.cast(T, _table(cls, document, ()))
    except _Mistake as mistake:
        raise ConfigurationError(_located(mistake, text, name)) from None


def nearest(word: str, known: Iterable[str], count: int = 1) -> str:
    """The ``count`` entries of ``known`` most like ``word``, in quotes: ``'at_most'`` or ``'a', 'b'``."""
    best = difflib.get_close_matches(word, list(known), n=count, cutoff=0.0)
    return ", ".join(f"'{match}'" for match in best)


def duration_s(value: object) -> float:
    """Seconds from ``"10m"`` or a number of seconds."""
    if isinstance(value, str):
        return parse_duration_s(value)
    if isinstance(value, int | float) and not isinstance(value, bool) and 0 <= value < math.inf:
        return float(value)
    raise ConfigurationError(f'wanted a duration such as "30s", "10m" or "1h30m", got {_shown(value)}')


Duration = Annotated[float, duration_s]
"""A field that holds seconds and is written ``"10s"``, ``"30m"``, ``"1h30m"``, or as a number of seconds."""


class _Mistake(Exception):
    """What is wrong, and where in the document."""

    def __init__(self, where: Where, reason: str) -> None:
        super().__init__(reason)
        self.where = where
        self.reason = reason


def contents(path: Path) -> str:
    """The text of a settings file, exactly as it stands; raises ConfigurationError."""
    try:
        with path.open("rb") as file:
            data = file.read(LARGEST_BYTES + 1)
    except OSError as error:
        raise ConfigurationError(f"{path}: cannot be read: {error.strerror or error}") from None
    if len(data) > LARGEST_BYTES:
        raise ConfigurationError(f"{path}: larger than {LARGEST_BYTES} bytes: this is no settings file")
    try:
        return data.decode("utf-8")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise ConfigurationError(f"{path}, line {line}: not UTF-8 text: this is no settings file") from None


def _table(cls: Any, values: object, where: Where) -> object:
    if not isinstance(values, dict):
        raise _Mistake(where, f"wanted a table, got {_shown(values)}")
    hints = typing.get_type_hints(cls, include_extras=True)
    known = {field.metadata.get("key", field.name): field for field in dataclasses.fields(cls) if field.init}
    for key in values:
        if key not in known:
            reason = f"unknown key; nearest known key: {nearest(key, known)}; known here: {', '.join(known)}"
            raise _Mistake((*where, key), reason)
    given = {}
    for key, field in known.items():
        if key in values:
            given[field.name] = _value(hints[field.name], values[key], (*where, key))
        elif field.default is dataclasses.MISSING and field.default_factory is dataclasses.MISSING:
            raise _Mistake(where, f"the key '{key}' is missing")
    try:
        return cls(**given)
    except ConfigurationError as error:
        raise _Mistake(where, str(error)) from None


def _value(kind: Any, value: object, where: Where) -> object:
    origin = typing.get_origin(kind)
    arguments = typing.get_args(kind)
    if origin is Annotated:
        try:
            return arguments[1](value)
        except ConfigurationError as error:
            raise _Mistake(where, str(error)) from None
    if origin in (typing.Union, types.UnionType):
        return _one_of([option for option in arguments if option is not types.NoneType], value, where)
    if origin is Literal:
        if value not in arguments or isinstance(value, bool) is not isinstance(arguments[0], bool):
            choices = ", ".join(f'"{choice}"' if isinstance(choice, str) else str(choice) for choice in arguments)
            raise _Mistake(where, f"wanted one of {choices}, got {_shown(value)}")
        return value
    if origin is tuple:
        return _list(arguments, value, where)
    if origin is dict:
        if not isinstance(value, dict):
            raise _Mistake(where, f"wanted a table, got {_shown(value)}")
        return {key: _value(arguments[1], item, (*where, key)) for key, item in value.items()}
    if dataclasses.is_dataclass(kind):
        return _table(kind, value, where)
    return _scalar(kind, value, where)


def _one_of(options: list[Any], value: object, where: Where) -> object:
    reasons = []
    for option in options:
        try:
            return _value(option, value, where)
        except _Mistake as mistake:
            if len(options) == 1 or len(mistake.where) > len(where):
                raise
            reasons.append(mistake.reason)
    raise _Mistake(where, "; or ".join(reasons))


def _list(arguments: tuple[Any, ...], value: object, where: Where) -> object:
    if not isinstance(value, list):
        hint = f"; write it as [[{where[-1]}]]" if isinstance(value, dict) and where else ""
        raise _Mistake(where, f"wanted a list, got {_shown(value)}{hint}")
    if len(arguments) == 2 and arguments[1] is Ellipsis:
        return tuple(_value(arguments[0], item, (*where, index)) for index, item in enumerate(value))
    if len(value) != len(arguments):
        raise _Mistake(where, f"wanted a list of {len(arguments)} values, got {len(value)}")
    return tuple(_value(kind, item, (*where, i)) for i, (kind, item) in enumerate(zip(arguments, value, strict=True)))


def _scalar(kind: Any, value: object, where: Where) -> object:
    if kind is float and isinstance(value, int) and not isinstance(value, bool):
        try:
            return float(value)
        except OverflowError:
            raise _Mistake(where, "the number is too large") from None
    if not isinstance(value, kind) or (kind is int and isinstance(value, bool)):
        raise _Mistake(where, f"wanted {WORDS.get(kind, kind.__name__)}, got {_shown(value)}")
    if isinstance(value, float) and not math.isfinite(value):
        raise _Mistake(where, f"wanted a finite number, got {value}")
    return value


def _shown(value: object) -> str:
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, str):
        return f'the text "{printable(value, 60)}"'
    if isinstance(value, dict):
        return "a table"
    if isinstance(value, list):
        return "a list"
    return printable(str(value), 60)


def _syntax(reason: str, text: str, name: str) -> str:
    place = re.search(r" *\(at line (\d+), column \d+\)$", reason)
    if place is None:
        return f"{name}: not TOML: {printable(reason)}"
    number = int(place[1])
    lines = text.split("\n")
    line = printable(lines[number - 1].strip(), 80) if number <= len(lines) else ""
    return f"{name}, line {number}: not TOML: {printable(reason[: place.start()])}, in: {line}"


def _located(mistake: _Mistake, text: str, name: str) -> str:
    line = line_of(text, mistake.where)
    keys = [part for part in mistake.where if isinstance(part, str)]
    place = f"{name}, line {line}" if line else name
    key = f", key '{printable('.'.join(keys), 80)}'" if keys else ""
    return f"{place}{key}: {mistake.reason}"


def line_of(text: str, where: Where) -> int | None:
    """The line, from 1, on which the statement begins that first gives ``where`` a value; None if there is none."""
    lines = text.split("\n")
    whole, document = _whole_statements(lines, len(lines))
    if not where or not _holds(document, where):
        return None
    without, holding = 0, whole
    while holding - without > 1:
        middle = (without + holding) // 2
        whole, document = _whole_statements(lines, middle)
        if _holds(document, where):
            holding = whole
        else:
            without = middle
    return _whole_statements(lines, holding - 1)[0] + 1


def _whole_statements(lines: list[str], end: int) -> tuple[int, Any]:
    """The largest number of lines, at most ``end``, that are TOML by themselves, and what they hold."""
    while end > 0:
        try:
            return end, tomllib.loads("\n".join(lines[:end]))
        except tomllib.TOMLDecodeError:
            end -= 1
    return 0, {}


def _holds(document: Any, where: Where) -> bool:
    for part in where:
        try:
            document = document[part]
        except (KeyError, IndexError, TypeError):
            return False
    return True
