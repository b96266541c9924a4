"""Glyphs: what can be drawn over the bodies, as data. No pixels here; each output draws the same glyphs its own way.

Coordinates are mm in the body frame of the car, arrays of the shapes given. ``role`` is the meaning, from which an
output takes its colour: "instant-axis", "force-line", "steering-axis", "wheel-path", "swing-arm", "roll-centre",
"contact-patch", "ground", "tension", "compression", "gap-line", "reference", "ink", "muted". An output draws a role
that it does not know like "ink".

``facing`` (3,), where a glyph has it, is the normal of the view in which the glyph means something: a front-view
construction faces along x. A picture that sees it edge-on leaves it out.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any, TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.corner import BUILTIN_READINGS, contact_point, corner_readings
from knucklepath.kinematics.motion import Motion

Array: TypeAlias = NDArray[np.float64]

#: A centre farther from the wheel than this, mm, is drawn as an arrow towards it that says how far it is.
FAR_MM = 3000.0
#: Beyond this, mm, a centre is said to be at infinity: the views' lines are parallel for every purpose of a picture.
ENDLESS_MM = 1e6
#: The looks that a picture can have by name.
LOOKS = ("corner", "front", "side", "top")


@dataclass(frozen=True)
class Line:
    """A chain of straight pieces through ``points`` (n, 3)."""

    points: Array
    role: str
    dashed: bool = False
    width_px: float = 2.0
    facing: Array | None = None


@dataclass(frozen=True)
class Arrow:
    """An arrow from ``start`` (3,) along ``vector`` (3,) mm, with its head at the end."""

    start: Array
    vector: Array
    role: str
    text: str = ""
    width_px: float = 2.0
    facing: Array | None = None


@dataclass(frozen=True)
class Axis:
    """A long line through ``point`` (3,) along ``direction`` (3,), with a small screw that shows the pitch's hand.

    pitch_mm_per_rad : positive is right-handed; nan or 0 draws no screw.
    """

    point: Array
    direction: Array
    role: str
    half_length_mm: float
    pitch_mm_per_rad: float = float("nan")
    dash_dot: bool = True
    width_px: float = 2.5
    facing: Array | None = None


@dataclass(frozen=True)
class Ring:
    """A circle about ``centre`` (3,), across ``normal`` (3,)."""

    centre: Array
    normal: Array
    radius_mm: float
    role: str
    width_px: float = 2.0
    facing: Array | None = None


@dataclass(frozen=True)
class Disc:
    """A filled circle about ``centre`` (3,), across ``normal`` (3,)."""

    centre: Array
    normal: Array
    radius_mm: float
    role: str
    facing: Array | None = None


@dataclass(frozen=True)
class Point:
    """A dot at ``at`` (3,), of one size on the picture whatever the distance."""

    at: Array
    role: str
    size_px: float = 8.0
    facing: Array | None = None


@dataclass(frozen=True)
class Ticks:
    """Short strokes at ``points`` (n, 3) along each of ``directions`` (m, 3), ``half_lengths_mm`` (n,) to each side."""

    points: Array
    directions: Array
    half_lengths_mm: Array
    role: str
    width_px: float = 1.5
    facing: Array | None = None


@dataclass(frozen=True)
class Grid:
    """A square grid in the level plane through ``centre`` (3,) that fades with distance from it.

    spacing_mm : between lines, which lie on whole multiples of it in x and y; reach_mm : where it has faded away.
    """

    centre: Array
    spacing_mm: float
    reach_mm: float
    role: str
    facing: Array | None = None


@dataclass(frozen=True)
class Label:
    """Words at a place.

    priority : small ones are kept when there is no room for all. along : (n, 3) places where the words may stand
    instead, the nearest to ``at`` first, when ``at`` is out of the picture.
    """

    at: Array
    text: str
    role: str
    priority: int = 5
    along: Array | None = None
    facing: Array | None = None


Glyph: TypeAlias = Line | Arrow | Axis | Ring | Disc | Point | Ticks | Grid | Label


@dataclass(frozen=True)
class State:
    """What an overlay draws from.

    path : the motion over travel, shape (n,), at the pose's rack; pose : the pose, shape (); size_mm : the
    mechanism's size, from which glyphs choose their own; case : a load case, or None.
    """

    path: Motion
    pose: Motion
    size_mm: float
    case: Any = None

    @cached_property
    def ground_z(self) -> float:
        """Height of the ground at this pose, mm: the body stands still, the ground follows the contact point."""
        return float(contact_point(self.pose)[2])

    @cached_property
    def wheel_centre(self) -> Array:
        """(3,) the wheel centre at this pose, mm."""
        return self.pose.point("wheel", self.pose.corner.wheel.centre)

    def readings(self, *ids: str) -> dict[str, float]:
        """Built-in readings of the pose, by id; one that the corner does not have is nan."""
        wanted = [reading for reading in BUILTIN_READINGS if reading.id in ids]
        values = corner_readings(self.pose, wanted)
        found = {reading.id: float(values[reading.column]) for reading in wanted if reading.column in values}
        return {name: found.get(name, float("nan")) for name in ids}


@dataclass(frozen=True)
class Overlay:
    """Something that can be drawn: a function from the state to glyphs.

    id : as in ``--show``; title : for people; standard : the looks in which it is drawn when nothing is asked for.
    """

    id: str
    title: str
    draw: Callable[[State], Sequence[Glyph]]
    standard: tuple[str, ...] = LOOKS


def length_text(value_mm: float) -> str:
    """A length for people: "470 mm", "1825 mm", "272.8 m", "infinitely far"."""
    if not abs(value_mm) < ENDLESS_MM:
        return "infinitely far"
    text = f"{value_mm:.0f}\N{THIN SPACE}mm" if abs(value_mm) < 1e4 else f"{value_mm / 1e3:.1f}\N{THIN SPACE}m"
    return minus(text)


def minus(text: str) -> str:
    """Give numbers their proper minus sign, and zero none."""
    text = text.replace("-", "\N{MINUS SIGN}")
    magnitude = text.lstrip("\N{MINUS SIGN}")
    digits = magnitude.split("\N{THIN SPACE}")[0].replace(".", "")
    return magnitude if digits and set(digits) == {"0"} else text


def stretch(start: Array, end: Array, count: int = 48) -> Array:
    """(count, 3) places from ``end`` back to ``start``, for a label that belongs to the end of a line."""
    share = np.linspace(1.0, 0.0, count)[:, None]
    return np.asarray(start + share * (end - start))
