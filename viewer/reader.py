"""A table of a project file, read key by key: every fault is one ``ProjectError`` with key, line and remedy."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from difflib import get_close_matches
from typing import Any

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.errors import ProjectError
from knucklepath.viewer.toml_lines import KeyPath, Lines

Array = NDArray[np.float64]

#: Length units and what one of each is in mm.
UNITS = {"mm": 1.0, "m": 1000.0, "in": 25.4}
#: No length of a car reaches this, mm: beyond it the number or its unit is wrong.
GREATEST_MM = 1e6


def dotted(path: KeyPath) -> str:
    """A path as people write it: ``parts[2].mesh``, the first entry being number 1."""
    text = ""
    for part in path:
        text += f"[{part + 1}]" if isinstance(part, int) else (f".{part}" if text else part)
    return text


def nearest(word: str, words: Sequence[str]) -> str:
    """A hint with the nearest known word, or with all of them."""
    near = get_close_matches(word, words, n=1, cutoff=0.5)
    return f"did you mean '{near[0]}'?" if near else f"known: {', '.join(words)}"


class Reader:
    """One table of the file.

    Parameters
    ----------
    data : the table as parsed; path : where it stands; file, lines : for messages; scale : mm per unit of length.
    """

    def __init__(self, data: Mapping[str, Any], path: KeyPath, file: str, lines: Lines, scale: float = 1.0) -> None:
        self.data, self.path, self.file, self.lines, self.scale = data, path, file, lines, scale

    def fault(self, message: str, key: str | None = None) -> ProjectError:
        """The error for a key of this table, or for the table itself."""
        path = self.path if key is None else (*self.path, key)
        return ProjectError(message, file=self.file, key=dotted(path) or None, line=self.lines.of(path))

    def allow(self, *known: str) -> None:
        """Refuse keys that are not among ``known``.

        Raises
        ------
        ProjectError : naming the key, its line and the nearest known one.
        """
        for key in self.data:
            if key not in known:
                raise self.fault(f"unknown key '{key}'; {nearest(key, known)}", key)

    def need(self, key: str, example: str) -> Any:
        """The value of a key that must be there."""
        if key not in self.data:
            raise self.fault(f"'{key}' is missing; write for example {key} = {example}")
        return self.data[key]

    def text(self, key: str, default: str | None = None, choices: Sequence[str] = (), example: str = '"…"') -> str:
        """A string that is not empty, one of ``choices`` if there are any."""
        if default is not None and key not in self.data:
            return default
        value = self.need(key, f'"{choices[0]}"' if choices else example)
        if not isinstance(value, str) or not value.strip():
            raise self.fault(f"must be text in quotes, not {_kind(value)}", key)
        if choices and value not in choices:
            raise self.fault(f"'{value}' is not known; {nearest(value, choices)}", key)
        return value

    def flag(self, key: str, default: bool) -> bool:
        """True or false."""
        value = self.data.get(key, default)
        if not isinstance(value, bool):
            raise self.fault(f"must be true or false, not {_kind(value)}", key)
        return value

    def number(
        self,
        key: str,
        default: float | None = None,
        *,
        low: float = -math.inf,
        high: float = math.inf,
        example: str = "12.5",
    ) -> float:
        """A finite number without a length unit, low ≤ value ≤ high."""
        if default is not None and key not in self.data:
            return default
        value = self._finite(self.need(key, example), key)
        if not low <= value <= high:
            raise self.fault(f"{value:g} is out of range: {_range(low, high)}", key)
        return value

    def length(self, key: str, default: float | None = None, *, positive: bool = True, example: str = "120.0") -> float:
        """A length, in mm whatever the file's unit."""
        if default is not None and key not in self.data:
            return default
        value = self._finite(self.need(key, example), key) * self.scale
        if positive and value <= 0.0:
            raise self.fault(f"must be greater than zero, not {self.data[key]:g}", key)
        if abs(value) > GREATEST_MM:
            raise self.fault(
                f"{self.data[key]:g} is far too large for a length on a car; check the number and 'units'", key
            )
        return value

    def optional_length(self, key: str) -> float | None:
        """A positive length in mm, or None where the key is absent."""
        return self.length(key) if key in self.data else None

    def optional_number(self, key: str, low: float, high: float) -> float | None:
        """A number between ``low`` and ``high``, or None where the key is absent."""
        return self.number(key, low=low, high=high) if key in self.data else None

    def vector(
        self,
        key: str,
        default: Sequence[float] | None = None,
        *,
        count: int = 3,
        is_length: bool = True,
        example: str = "[0.0, 640.0, 205.0]",
    ) -> Array:
        """``count`` finite numbers as an array; lengths come in mm."""
        if default is not None and key not in self.data:
            return np.asarray(default, dtype=float)
        value = self.need(key, example)
        if not isinstance(value, list) or len(value) != count:
            what = f"{len(value)} values" if isinstance(value, list) else _kind(value)
            raise self.fault(f"must be {count} numbers like {example}, not {what}", key)
        numbers = np.array([self._finite(item, key) for item in value])
        if is_length:
            numbers = numbers * self.scale
            if (np.abs(numbers) > GREATEST_MM).any():
                raise self.fault("is far too large for a point on a car; check the numbers and 'units'", key)
        return numbers

    def table(self, key: str) -> Reader:
        """A sub-table that must be there."""
        value = self.data.get(key)
        here = dotted((*self.path, key))
        if value is None:
            raise self.fault(f"the table [{here}] is missing")
        if not isinstance(value, dict):
            raise self.fault(f"must be a table written [{here}], not {_kind(value)}", key)
        return Reader(value, (*self.path, key), self.file, self.lines, self.scale)

    def optional_table(self, key: str) -> Reader | None:
        """A sub-table, or None where it is absent."""
        return self.table(key) if key in self.data else None

    def tables(self, key: str) -> list[Reader]:
        """The entries of an array of tables; empty where it is absent."""
        value = self.data.get(key, [])
        here = dotted((*self.path, key))
        if not isinstance(value, list) or not all(isinstance(item, dict) for item in value):
            raise self.fault(f"must be written with double brackets, [[{here}]], once for each entry", key)
        return [
            Reader(item, (*self.path, key, index), self.file, self.lines, self.scale)
            for index, item in enumerate(value)
        ]

    def _finite(self, value: Any, key: str) -> float:
        if isinstance(value, bool) or not isinstance(value, int | float):
            raise self.fault(f"must be a number, not {_kind(value)}", key)
        try:
            number = float(value)
        except OverflowError:
            number = math.inf
        if not math.isfinite(number):
            raise self.fault(
                f"must be a finite number, not {value if isinstance(value, float) else 'one so large'}", key
            )
        return number


def _kind(value: Any) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return f"the text '{value[:40]}'" if value.strip() else "empty text"
    if isinstance(value, list):
        return f"a list of {len(value)}"
    if isinstance(value, dict):
        return "a table"
    if isinstance(value, int | float):
        return f"the number {str(value)[:24]}"
    return f"a {type(value).__name__}"


def _range(low: float, high: float) -> str:
    if math.isinf(high):
        return f"at least {low:g}"
    if math.isinf(low):
        return f"at most {high:g}"
    return f"{low:g} to {high:g}"
