"""Glyphs: what can be drawn over the bodies, as data. No pixels here; each output draws the same glyphs its own way.

Coordinates are mm in the body frame of the car. ``role`` is the meaning, from which an output takes its colour:
"path", "instant-axis", "force-line", "steering-axis", "ground", "contact", "swing-arm", "roll-centre", "gap", "ink".
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.motion import Motion

Array: TypeAlias = NDArray[np.float64]

#: A centre farther from the wheel than this share of the scene's size is said to be far, and drawn as a direction.
FAR_SHARE = 2.2


@dataclass(frozen=True)
class Line:
    """A chain of straight pieces through ``points`` (n, 3)."""

    points: Array
    role: str
    width_px: float = 2.0
    dashed: bool = False


@dataclass(frozen=True)
class Arrow:
    """An arrow from ``start`` (3,) along ``vector`` (3,), mm."""

    start: Array
    vector: Array
    role: str
    width_px: float = 2.0


@dataclass(frozen=True)
class Axis:
    """A long dash-dot line through ``point`` along ``direction``, with a small screw that shows the pitch's hand.

    pitch_mm_per_rad : positive is right-handed; nan draws no screw.
    """

    point: Array
    direction: Array
    role: str
    half_length_mm: float
    pitch_mm_per_rad: float = float("nan")


@dataclass(frozen=True)
class Ring:
    """A circle about ``centre``, across ``normal``."""

    centre: Array
    normal: Array
    radius_mm: float
    role: str
    width_px: float = 2.5


@dataclass(frozen=True)
class Disc:
    """A filled circle about ``centre``, across ``normal``."""

    centre: Array
    normal: Array
    radius_mm: float
    role: str


@dataclass(frozen=True)
class Point:
    """A dot of fixed size on the picture."""

    at: Array
    role: str
    size_px: float = 9.0


@dataclass(frozen=True)
class Grid:
    """A square grid in the plane z = ``centre[2]`` that fades with distance; ``pitch_mm`` between its lines."""

    centre: Array
    half_width_mm: float
    pitch_mm: float
    role: str


@dataclass(frozen=True)
class Label:
    """Words at a place. Those of the smallest ``priority`` are kept when there is no room for all."""

    at: Array
    text: str
    role: str
    priority: int = 5


Glyph: TypeAlias = Line | Arrow | Axis | Ring | Disc | Point | Grid | Label


@dataclass(frozen=True)
class State:
    """What an overlay draws from.

    path : the motion over travel (1-D) at the pose's rack; pose : the pose, shape (); size_mm : the scene's size, by
    which glyphs choose their own; case : a load case, or None.
    """

    path: Motion
    pose: Motion
    size_mm: float
    case: Any = None


@dataclass(frozen=True)
class Overlay:
    """Something that can be drawn: a function from the state to glyphs.

    id : as in ``--show``; title : for people; standard : drawn when nothing is asked for.
    """

    id: str
    title: str
    draw: Callable[[State], Sequence[Glyph]]
    standard: bool = True


def metres(value_mm: float) -> str:
    """A length in words: mm up to ten metres, then metres."""
    text = f"{value_mm:.0f} mm" if abs(value_mm) < 10_000.0 else f"{value_mm / 1000.0:.0f} m"
    return text.replace("-", "−")
