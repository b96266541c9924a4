"""The engine that holds a project's values against a schema. Knows no key of the project file by name.

A schema is data: a ``Table`` of named entries, each a small frozen object that says what may stand there. The first
thing that is wrong raises a ``ProjectError`` that names file, key and line, what is wrong and what would be right.
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, TypeAlias

from knucklepath.viewer.source import Source, dotted, nearest, shown
from knucklepath.viewer.toml_lines import KeyPath

#: Greatest size of a length in the file's own unit; whether a lesser one is believable is not judged here.
MOST_LENGTH = 1e6
#: Greatest size of any other number.
MOST_NUMBER = 1e12

_COLOUR = re.compile(r"#(?:[0-9a-fA-F]{3}|[0-9a-fA-F]{6})")


@dataclass(frozen=True)
class Number:
    """One number. ``length`` ones are in the file's unit and come out in mm.

    over : must be greater than that; least, most : bounds that it may reach (mm for lengths).
    """

    example: str
    required: bool = False
    length: bool = False
    over: float | None = None
    least: float | None = None
    most: float | None = None


@dataclass(frozen=True)
class Vector:
    """``count`` numbers in an array; lengths come out in mm."""

    example: str
    required: bool = False
    length: bool = True
    count: int = 3
    about: str = ""


@dataclass(frozen=True)
class Text:
    """Text; ``choices``, where given, are all that may stand there."""

    example: str
    required: bool = False
    choices: tuple[str, ...] = ()


@dataclass(frozen=True)
class Texts:
    """Several texts in an array; just ``count`` of them where that is given."""

    example: str
    required: bool = False
    count: int | None = None


@dataclass(frozen=True)
class Flag:
    """true or false."""

    example: str = "false"
    required: bool = False


@dataclass(frozen=True)
class Colour:
    """A colour, "#rrggbb"."""

    example: str = '"#7f8c8d"'
    required: bool = False


@dataclass(frozen=True)
class Table:
    """Named entries. ``about`` says, where the table is required and missing, what it is for."""

    entries: Mapping[str, Entry]
    required: bool = False
    about: str = ""


@dataclass(frozen=True)
class Tables:
    """An array of tables, written with double brackets."""

    entry: Table
    required: bool = False


Value: TypeAlias = Number | Vector | Text | Texts | Flag | Colour
Entry: TypeAlias = Value | Table | Tables


def check(source: Source, schema: Table, mm_per_unit: float) -> dict[str, Any]:
    """Hold a file's values against a schema.

    Parameters
    ----------
    mm_per_unit : what a length of 1 in the file is in mm.

    Returns
    -------
    The values: tables as dict, arrays of tables as lists of dict, numbers as float, vectors as tuple; lengths in mm.
    Keys that the file leaves out are left out.

    Raises
    ------
    ProjectError : the first thing that is wrong.
    """
    return _Check(source, mm_per_unit).table((), schema, source.data)


def check_value(source: Source, path: KeyPath, entry: Value, value: object) -> Any:
    """Hold one value against its entry, lengths taken as mm.

    Raises
    ------
    ProjectError : it does not fit.
    """
    return _Check(source, 1.0).value(path, entry, value)


def refuse_unknown(source: Source, path: KeyPath, given: Mapping[str, Any], known: list[str]) -> None:
    """Refuse the first key of a table that is not known, with the nearest that is.

    Raises
    ------
    ProjectError : there is an unknown key.
    """
    for name in given:
        if name in known:
            continue
        near = nearest(name, [other for other in known if other not in given]) or nearest(name, known)
        hint = f"did you mean '{near}'? " if near else ""
        where = f"in {dotted(path)}" if path else "at the top"
        raise source.error((*path, name), f"unknown key; {hint}Known {where}: {', '.join(known) or 'none'}")


class _Check:
    def __init__(self, source: Source, mm_per_unit: float) -> None:
        self.source = source
        self.mm_per_unit = mm_per_unit

    def table(self, path: KeyPath, schema: Table, given: object) -> dict[str, Any]:
        if isinstance(given, list):
            raise self.source.error(path, f"is given as a list; write [{dotted(path)}], with single brackets, once")
        if not isinstance(given, dict):
            raise self.source.error(path, f"is {shown(given)}, not a table; write [{dotted(path)}] and its keys below")
        refuse_unknown(self.source, path, given, list(schema.entries))
        checked: dict[str, Any] = {}
        for name, value in given.items():
            entry = schema.entries[name]
            here = (*path, name)
            if isinstance(entry, Table):
                checked[name] = self.table(here, entry, value)
            elif isinstance(entry, Tables):
                checked[name] = self.tables(here, entry, value)
            else:
                checked[name] = self.value(here, entry, value)
        for name, entry in schema.entries.items():
            if entry.required and name not in given:
                raise self.source.error((*path, name), self.missing((*path, name), entry))
        return checked

    def missing(self, path: KeyPath, entry: Entry) -> str:
        if isinstance(entry, Table):
            needed = [name for name, inner in entry.entries.items() if inner.required]
            keys = f" with {', '.join(needed)}" if needed else ""
            return f"is missing{': ' + entry.about if entry.about else ''}; add [{dotted(path)}]{keys}"
        if isinstance(entry, Tables):
            return f"is missing; add [[{dotted(path)}]]"
        about = f" ({entry.about})" if isinstance(entry, Vector) and entry.about else ""
        return f"is missing; add {dotted(path[-1:])} = {entry.example}{about}"

    def tables(self, path: KeyPath, schema: Tables, given: object) -> list[dict[str, Any]]:
        if isinstance(given, dict):
            raise self.source.error(path, f"there may be several of these: write [[{dotted(path)}]], double brackets")
        if not isinstance(given, list):
            raise self.source.error(path, f"is {shown(given)}; write [[{dotted(path)}]] and its keys below")
        return [self.table((*path, position), schema.entry, item) for position, item in enumerate(given)]

    def value(self, path: KeyPath, entry: Value, value: object) -> Any:
        if isinstance(entry, Number):
            return self.number(path, entry, value)
        if isinstance(entry, Vector):
            return self.vector(path, entry, value)
        if isinstance(entry, Text):
            return self.text(path, entry, value)
        if isinstance(entry, Texts):
            return self.texts(path, entry, value)
        if isinstance(entry, Flag):
            if not isinstance(value, bool):
                raise self.wrong(path, value, "true or false", entry.example)
            return value
        if not isinstance(value, str) or not _COLOUR.fullmatch(value):
            raise self.wrong(path, value, "a colour", entry.example)
        if len(value) == 4:
            value = "#" + "".join(2 * digit for digit in value[1:])
        return value.lower()

    def wrong(self, path: KeyPath, value: object, wanted: str, example: str) -> Exception:
        name = next((step for step in reversed(path) if isinstance(step, str)), "")
        return self.source.error(
            path, f"is {shown(value)}, not {wanted}; write for example {dotted((name,))} = {example}"
        )

    def plain(self, path: KeyPath, value: object, example: str, length: bool) -> float:
        """A finite number of sensible size, in mm if it is a length."""
        if isinstance(value, bool) or not isinstance(value, (int, float)):
            raise self.wrong(path, value, "a number", example)
        try:
            number = float(value)
        except OverflowError:
            number = math.inf if value > 0 else -math.inf
        if not math.isfinite(number):
            raise self.wrong(path, value, "a finite number", example)
        most = MOST_LENGTH if length else MOST_NUMBER
        if abs(number) > most:
            raise self.source.error(
                path, f"is {shown(value)}, far too large (more than {most:,.0f}); write for example {example}"
            )
        return number * self.mm_per_unit if length else number

    def number(self, path: KeyPath, entry: Number, value: object) -> float:
        number = self.plain(path, value, entry.example, entry.length)
        unit = " mm" if entry.length and self.mm_per_unit == 1.0 else ""
        per = self.mm_per_unit if entry.length else 1.0
        if entry.over is not None and number <= entry.over:
            what = "must be positive" if entry.over == 0.0 else f"must be greater than {entry.over / per:g}{unit}"
        elif entry.least is not None and number < entry.least:
            what = "must not be negative" if entry.least == 0.0 else f"must be at least {entry.least / per:g}{unit}"
        elif entry.most is not None and number > entry.most:
            what = f"must be at most {entry.most / per:g}{unit}"
        else:
            return number
        raise self.source.error(path, f"is {shown(value)}; it {what}, for example {entry.example}")

    def vector(self, path: KeyPath, entry: Vector, value: object) -> tuple[float, ...]:
        if not isinstance(value, list):
            raise self.wrong(path, value, f"{entry.count} numbers in brackets", entry.example)
        if len(value) != entry.count:
            count = "1 number" if len(value) == 1 else f"{len(value)} numbers"
            raise self.source.error(
                path, f"has {count}, not {entry.count}; write for example {dotted(path[-1:])} = {entry.example}"
            )
        return tuple(
            self.plain((*path, position), item, entry.example, entry.length) for position, item in enumerate(value)
        )

    def text(self, path: KeyPath, entry: Text, value: object) -> str:
        if not isinstance(value, str):
            raise self.wrong(path, value, "text in quotes", entry.example)
        if entry.choices and value not in entry.choices:
            # two letters are like any other two
            near = nearest(value, list(entry.choices)) if len(value) > 2 else None
            hint = f"did you mean '{near}'? " if near else ""
            raise self.source.error(path, f"is {shown(value)}; {hint}it may be: {', '.join(entry.choices)}")
        if not value.strip():
            raise self.source.error(path, f"is empty; write for example {dotted(path[-1:])} = {entry.example}")
        return value

    def texts(self, path: KeyPath, entry: Texts, value: object) -> tuple[str, ...]:
        if not isinstance(value, list) or (entry.count is not None and len(value) != entry.count):
            wanted = "a list of texts" if entry.count is None else f"a list of {entry.count} texts"
            raise self.wrong(path, value, wanted, entry.example)
        for position, item in enumerate(value):
            if not isinstance(item, str) or not item.strip():
                raise self.wrong((*path, position), item, "text in quotes", entry.example)
        return tuple(value)
