"""Words from the command line turned into numbers, and the checks that go with them."""

from __future__ import annotations

import math
import sys

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.errors import KnucklepathError
from knucklepath.viewer.project import Project, load_project

#: Poses of one sweep, at most: beyond it a typing slip is likelier than a need.
MOST_POSES = 2_000_000


class UsageError(KnucklepathError):
    """A word on the command line is wrong."""


def number(text: str, option: str, *, positive: bool = False) -> float:
    """Read one finite number.

    Raises
    ------
    UsageError : naming the option and what would be right.
    """
    try:
        value = float(text)
    except ValueError:
        raise UsageError(f"{option}: '{text}' is not a number; write for example {option}=12.5") from None
    if not math.isfinite(value) or (positive and value <= 0.0):
        raise UsageError(f"{option}: {text} must be a {'positive ' if positive else ''}finite number")
    return value


def spread(text: str, option: str) -> NDArray[np.float64]:
    """Read FROM:TO:COUNT, or one value, as an ascending array of mm.

    Raises
    ------
    UsageError : naming the option and what would be right.
    """
    words = text.split(":")
    if len(words) == 1:
        return np.array([number(text, option)])
    example = f"write FROM:TO:COUNT, for example {option}=-50:60:23"
    if len(words) != 3:
        raise UsageError(f"{option}: '{text}' is not a range; {example}")
    first, last = number(words[0], option), number(words[1], option)
    try:
        count = int(words[2])
    except ValueError:
        raise UsageError(f"{option}: the count '{words[2]}' is not a whole number; {example}") from None
    if not 1 <= count <= MOST_POSES:
        raise UsageError(f"{option}: the count must lie between 1 and {MOST_POSES}; {example}")
    if count == 1 and first != last:
        raise UsageError(f"{option}: one value cannot reach from {words[0]} to {words[1]}; give a count of 2 or more")
    return np.unique(np.linspace(min(first, last), max(first, last), count))


def size(text: str) -> tuple[int, int]:
    """Read WIDTHxHEIGHT in pixels.

    Raises
    ------
    UsageError : naming what would be right.
    """
    words = text.lower().replace("×", "x").split("x")
    if len(words) == 2 and all(word.isdecimal() for word in words):
        width, height = int(words[0]), int(words[1])
        if 160 <= width <= 8192 and 120 <= height <= 8192:
            return width, height
    raise UsageError(
        f"--size: '{text}' is not a picture size; write for example --size 1920x1080 (160x120 to 8192x8192)"
    )


def open_project(path: str, allow_plugins: bool, quiet: bool = False) -> Project:
    """Load a project and, unless ``quiet``, say on standard error what is out of the ordinary about it."""
    project = load_project(path, allow_plugins=allow_plugins)
    if quiet:
        return project
    for part in project.parts:
        if part.dropped_triangles:
            note(f"part '{part.name}': {part.dropped_triangles} degenerate triangles dropped")
    if project.unused_keys:
        note(f"read and checked, but not used yet: {', '.join(project.unused_keys)}")
    return project


def note(text: str) -> None:
    """Say something beside the result, on standard error."""
    print(f"note: {text}", file=sys.stderr)


def check_rack(project: Project, rack_mm: NDArray[np.float64]) -> None:
    """Refuse rack displacement on an axle without a rack.

    Raises
    ------
    UsageError : saying so.
    """
    if not project.corner.steered and np.any(rack_mm != 0.0):
        raise UsageError("--rack: this axle has no rack; leave --rack out, or add [rack] to the project")
