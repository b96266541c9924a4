"""A project file as read: its text turned into plain values, and where each of them stands. Knows no schema."""

from __future__ import annotations

import re
import tomllib
from dataclasses import dataclass
from difflib import get_close_matches
from pathlib import Path
from typing import Any

from knucklepath.kinematics.errors import ProjectError
from knucklepath.viewer.toml_lines import KeyPath, Lines, find_lines

#: Bytes of a project file, at most: what people write by hand is a thousandth of it.
MOST_BYTES = 4_000_000
#: Characters of a value that a message repeats, at most.
SHOWN_LENGTH = 60

_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")
_AT = re.compile(r"\s*\(at (?:line (\d+), column \d+|end of document)\)\s*$")
_LONG_NUMBER = re.compile(r"\d{640,}")
#: How the standard library's reader speaks of keys and tables given twice.
_TWICE = ("overwrite", "twice", "mutate", "redefine", "duplicate")


@dataclass(frozen=True)
class Source:
    """A project file's values, with the line of each.

    path : the file; file : the path as the user gave it, for messages; folder : where it lies, resolved; data : as
    TOML gives it.
    """

    path: Path
    file: str
    folder: Path
    data: dict[str, Any]
    lines: Lines

    def error(self, path: KeyPath, message: str) -> ProjectError:
        """Build the error for a key, with its line or that of the nearest thing around it."""
        return ProjectError(message, file=self.file, key=dotted(path) or None, line=self.lines.of(path))


def dotted(path: KeyPath) -> str:
    """A place as people write it: ``points.upper_arm.ball_joint``; ``parts[1]`` is the first part."""
    text = ""
    for step in path:
        if isinstance(step, int):
            text += f"[{step + 1}]"
        else:
            name = step if _BARE_KEY.fullmatch(step) else f'"{printable(step)}"'
            text += f".{name}" if text else name
    return text


def one_line(text: str) -> str:
    """A text on one line, whatever is in it."""
    return "".join(letter if letter.isprintable() else ascii(letter)[1:-1] for letter in text)


def printable(text: str, length: int = SHOWN_LENGTH) -> str:
    """A text on one line, whatever is in it, and not too long."""
    safe = one_line(text)
    return safe if len(safe) <= length else safe[: length - 1] + "…"


def shown(value: object) -> str:
    """A value as TOML people know it, for a message."""
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, str):
        return f'"{printable(value)}"'
    if isinstance(value, dict):
        return "a table"
    if isinstance(value, int) and abs(value) > 10**SHOWN_LENGTH:
        return "a number of more than 60 digits"
    return printable(str(value))


def nearest(word: str, known: list[str]) -> str | None:
    """The known word that looks most like another, or None."""
    near = get_close_matches(word.lower(), [name.lower() for name in known], n=1, cutoff=0.55)
    return next((name for name in known if near and name.lower() == near[0]), None)


def read_source(path: str | Path, several: tuple[str, ...] = ()) -> Source:
    """Read a project file, or the one in a folder.

    Parameters
    ----------
    several : tables that are written with double brackets, for messages.

    Raises
    ------
    ProjectError : there is no such file or more than one; it is not text; it is not TOML.
    """
    file = _find(Path(path))
    name = one_line(str(file))
    text = _text(file, name)
    lines = find_lines(text)
    try:
        data = tomllib.loads(text)
    except RecursionError:
        deepest = max(range(text.count("\n") + 1), key=lambda row: text.split("\n")[row].count("["))
        raise ProjectError("brackets are nested too deeply for a project file", file=name, line=deepest + 1) from None
    except ValueError as error:
        raise _not_toml(str(error), text, lines, name, several) from None
    return Source(file, name, file.parent.resolve(), data, lines)


def _find(path: Path) -> Path:
    """The TOML file that a path means."""
    name = one_line(str(path))
    try:
        if path.is_dir():
            found = sorted(item for item in path.glob("*.toml") if item.is_file() and not item.name.startswith("."))
            if len(found) == 1:
                return found[0]
            if not found:
                raise ProjectError(
                    "the folder holds no project file (.toml); 'knucklepath new FOLDER --layout ID' makes one",
                    file=name,
                )
            names = ", ".join(printable(item.name) for item in found[:5]) + (", …" if len(found) > 5 else "")
            raise ProjectError(
                f"the folder holds {len(found)} TOML files ({names}); name the one that is meant", file=name
            )
        if path.is_file():
            return path
        if path.exists():
            raise ProjectError("is neither a file nor a folder; give a project file (.toml) or its folder", file=name)
        beside = [item.name for item in path.parent.iterdir()] if path.parent.is_dir() else []
    except (OSError, ValueError) as error:
        raise ProjectError(f"cannot be read: {_reason(error)}", file=name) from None
    near = nearest(path.name, beside)
    hint = f"did you mean '{one_line(str(path.parent / near))}'?" if near else "check the path"
    raise ProjectError(f"there is no such file or folder; {hint}", file=name)


def _reason(error: OSError | ValueError) -> str:
    return str(getattr(error, "strerror", None) or error)


def _text(file: Path, name: str) -> str:
    try:
        with file.open("rb") as opened:
            content = opened.read(MOST_BYTES + 1)
    except OSError as error:
        raise ProjectError(f"cannot be read: {_reason(error)}", file=name) from None
    if len(content) > MOST_BYTES:
        raise ProjectError(f"is larger than {MOST_BYTES // 1_000_000} MB, too large for a project file", file=name)
    if content.startswith((b"\xff\xfe", b"\xfe\xff")):
        raise ProjectError("is UTF-16 text; save it as UTF-8", file=name)
    try:
        # some editors put a byte-order mark before UTF-8
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        raise ProjectError(
            "is not UTF-8 text; give the project's TOML file, saved as UTF-8", file=name, line=line
        ) from None
    if "\0" in text:
        line = text.count("\n", 0, text.index("\0")) + 1
        raise ProjectError("is binary, not text; give the project's TOML file", file=name, line=line)
    return text.replace("\r\n", "\n")


def _not_toml(reason: str, text: str, lines: Lines, name: str, several: tuple[str, ...]) -> ProjectError:
    """Build the error for text that is not TOML: a key given twice, or where the reader stumbled."""
    found = _AT.search(reason)
    line = int(found[1]) if found and found[1] else None
    if any(word in reason for word in _TWICE) and lines.repeated:
        # the reader stops at the first; the scanner goes on
        twice = lines.repeated[0]
        last = str(twice.path[-1])
        remedy = f"write [[{last}]], double brackets, each time" if last in several else "keep one of them"
        return ProjectError(
            f"is given twice, first on line {twice.first}; {remedy}",
            file=name,
            key=dotted(twice.path),
            line=twice.second,
        )
    if line is None:
        # the reader gives no line at the end of the text, nor for a number that is too long
        long = _LONG_NUMBER.search(text)
        line = text.count("\n", 0, long.start() if long and not found else len(text.rstrip("\n"))) + 1
    what = printable(_AT.sub("", reason))
    return ProjectError(
        f"is not TOML: {what[:1].lower() + what[1:]}; {_remedy(text.split(chr(10))[line - 1])}", file=name, line=line
    )


def _remedy(line: str) -> str:
    """What is likely meant by a line that is not TOML."""
    value = line.partition("=")[2].partition("#")[0].strip()
    if re.fullmatch(r"[+-]?\d+,\d+", value):
        return f"numbers have a decimal point: {value.replace(',', '.')}"
    if value.count('"') % 2 or value.count("'") % 2:
        return "a quotation mark is missing"
    if re.fullmatch(r"[^\W\d][\w\s./-]*", value) and value not in ("true", "false", "nan", "inf"):
        return f'text stands in quotes: "{printable(value)}"'
    return 'write key = value, text in "quotes", points as [x, y, z], tables as [name]'
