"""Finds on which line of a TOML text every key stands. Knows nothing of what the keys mean.

``tomllib`` reads values and says nothing of their places; this scanner finds places and reads no values. It follows
text that ``tomllib`` accepts, and goes as far as it can through text that it refuses, to find keys given twice.
"""

from __future__ import annotations

import contextlib
import re
import tomllib
from bisect import bisect_right
from dataclasses import dataclass, field
from typing import TypeAlias

#: A place in a document: table keys, and 0-based positions in arrays.
KeyPath: TypeAlias = tuple[str | int, ...]

_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")
_BLANK = re.compile(r"(?:[ \t\r\n]+|#[^\n]*)+")
_SPACE = re.compile(r"[ \t]*")
_PLAIN_VALUE = re.compile(r"[^,\]}#\n]*")
_BASIC_STRING = re.compile(r'"(?:[^"\\\n]|\\.)*"')
_LITERAL_STRING = re.compile(r"'[^'\n]*'")
_LONG_BASIC = re.compile(r'"""(?:[^\\]|\\.)*?"{3,5}(?!")', re.DOTALL)
_LONG_LITERAL = re.compile(r"'''.*?'{3,5}(?!')", re.DOTALL)


@dataclass(frozen=True)
class Repeated:
    """A key or table given twice: its place and the lines, 1-based, of both."""

    path: KeyPath
    first: int
    second: int


@dataclass
class Lines:
    """Lines, 1-based, of every key, table and array element of a TOML text."""

    places: dict[KeyPath, int] = field(default_factory=dict)
    repeated: list[Repeated] = field(default_factory=list)

    def of(self, path: KeyPath) -> int | None:
        """Line of a key, or of the nearest thing around it that has one; None for the document itself."""
        while path:
            if path in self.places:
                return self.places[path]
            path = path[:-1]
        return None


class _Stop(Exception):
    """The text is not TOML from here on."""


def find_lines(text: str) -> Lines:
    """Scan a TOML text; where it is broken, return what stands before the break."""
    scanner = _Scanner(text)
    with contextlib.suppress(_Stop, RecursionError):
        scanner.document()
    return scanner.lines


class _Scanner:
    def __init__(self, text: str) -> None:
        self.text = text
        self.at = 0
        self.lines = Lines()
        self.breaks = [match.start() for match in re.finditer("\n", text)]
        self.arrays: dict[KeyPath, int] = {}
        self.headers: set[KeyPath] = set()

    def line(self) -> int:
        return bisect_right(self.breaks, self.at - 1) + 1

    def peek(self, count: int = 1) -> str:
        return self.text[self.at : self.at + count]

    def skip(self, pattern: re.Pattern[str]) -> str:
        match = pattern.match(self.text, self.at)
        if match is None:
            return ""
        self.at = match.end()
        return match.group()

    def expect(self, mark: str) -> None:
        if not self.text.startswith(mark, self.at):
            raise _Stop
        self.at += len(mark)

    def document(self) -> None:
        table: KeyPath = ()
        while True:
            self.skip(_BLANK)
            if self.at >= len(self.text):
                return
            table = self.header() if self.peek() == "[" else self.assignment(table)

    def header(self) -> KeyPath:
        line = self.line()
        several = self.peek(2) == "[["
        mark = "[[" if several else "["
        self.expect(mark)
        names = self.key()
        self.expect("]]" if several else "]")
        path: KeyPath = ()
        for name in names[:-1]:
            path = self.inside((*path, name))
            self.lines.places.setdefault(path, line)
        path = (*path, names[-1])
        if several:
            if path in self.headers:
                self.repeat(path, line)
            self.lines.places.setdefault(path, line)
            position = self.arrays[path] = self.arrays.get(path, -1) + 1
            path = (*path, position)
            self.lines.places[path] = line
        else:
            if path in self.headers or path in self.arrays:
                self.repeat(path, line)
            self.headers.add(path)
            # a table that came into being through [table.inner] is truly given here
            self.lines.places[path] = line
        return path

    def inside(self, path: KeyPath) -> KeyPath:
        """The last element so far, where a path is an array of tables."""
        return (*path, self.arrays[path]) if path in self.arrays else path

    def repeat(self, path: KeyPath, line: int) -> None:
        self.lines.repeated.append(Repeated(path, self.lines.places.get(path, line), line))

    def assignment(self, table: KeyPath) -> KeyPath:
        line = self.line()
        names = self.key()
        path: KeyPath = table
        for name in names[:-1]:
            path = (*path, name)
            self.lines.places.setdefault(path, line)
        path = (*path, names[-1])
        if path in self.lines.places:
            self.repeat(path, line)
        self.lines.places.setdefault(path, line)
        self.skip(_SPACE)
        self.expect("=")
        self.skip(_SPACE)
        self.value(path)
        return table

    def key(self) -> list[str]:
        names = [self.name()]
        while True:
            self.skip(_SPACE)
            if self.peek() != ".":
                return names
            self.at += 1
            names.append(self.name())

    def name(self) -> str:
        self.skip(_SPACE)
        if self.peek() == '"':
            return self.decode(self.skip(_BASIC_STRING))
        if self.peek() == "'":
            return self.skip(_LITERAL_STRING)[1:-1]
        name = self.skip(_BARE_KEY)
        if not name:
            raise _Stop
        return name

    def decode(self, quoted: str) -> str:
        try:
            return str(tomllib.loads(f"key = {quoted}")["key"])
        except ValueError:
            raise _Stop from None

    def value(self, path: KeyPath) -> None:
        if self.peek() == "[":
            self.array(path)
        elif self.peek() == "{":
            self.inline_table(path)
        elif self.peek(3) == '"""':
            self.required(_LONG_BASIC)
        elif self.peek(3) == "'''":
            self.required(_LONG_LITERAL)
        elif self.peek() == '"':
            self.required(_BASIC_STRING)
        elif self.peek() == "'":
            self.required(_LITERAL_STRING)
        else:
            self.required(_PLAIN_VALUE)

    def required(self, pattern: re.Pattern[str]) -> None:
        if not self.skip(pattern):
            raise _Stop

    def array(self, path: KeyPath) -> None:
        self.expect("[")
        position = 0
        while True:
            self.skip(_BLANK)
            if self.peek() == "]":
                break
            self.lines.places.setdefault((*path, position), self.line())
            self.value((*path, position))
            position += 1
            self.skip(_BLANK)
            if self.peek() != ",":
                break
            self.at += 1
        self.expect("]")

    def inline_table(self, path: KeyPath) -> None:
        self.expect("{")
        while True:
            self.skip(_BLANK)
            if self.peek() == "}":
                break
            self.assignment(path)
            self.skip(_BLANK)
            if self.peek() != ",":
                break
            self.at += 1
        self.expect("}")
