"""Glyphs turned into polylines, triangles and dots: plain arrays that any output can draw. Knows no renderer.

Dashes, arrowheads, rings and the screw of an axis are made here, in mm, so that a picture, a page and a 3D file show
the same shapes.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass, field
from functools import cache, lru_cache
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.plugins.overlays.glyphs import Arrow, Axis, Disc, Glyph, Grid, Label, Line, Point, Ring, Ticks

Array: TypeAlias = NDArray[np.float64]

RING_SIDES = 64
#: Shares of the mechanism's size: dash and gap; long dash, gap, dot of an axis; head of an arrow; the screw.
DASH, GAP = 0.022, 0.016
LONG_DASH, SHORT_GAP, DOT = 0.085, 0.018, 0.012
HEAD_LENGTH, HEAD_RADIUS = 0.050, 0.016
SCREW_RADIUS, SCREW_LENGTH, SCREW_TURNS, SCREW_WIRE = 0.032, 0.16, 2.5, 0.005
#: Pieces into which a line of the ground is cut, so that it can fade.
GRID_PIECES = 48


@dataclass(frozen=True)
class Ground:
    """A grid's lines (k, n, 3) mm at height 0, how much of their colour is left (k, n), and the height, mm."""

    lines: Array
    strength: Array
    height: float


@dataclass
class Shapes:
    """What a set of glyphs looks like.

    strokes : (role, width_px) → sheaves (k, n, 3) of k polylines; solids : role → triangles (k, 3, 3), wound outward;
    dots : (role, size_px) → points (3,); grids : role → ground.
    """

    strokes: dict[tuple[str, float], list[Array]] = field(default_factory=dict)
    solids: dict[str, list[Array]] = field(default_factory=dict)
    dots: dict[tuple[str, float], list[Array]] = field(default_factory=dict)
    grids: dict[str, Ground] = field(default_factory=dict)

    def line(self, role: str, width: float, points: Array) -> None:
        """Add one polyline (n, 3), or a sheaf of them (k, n, 3)."""
        if len(points):
            self.strokes.setdefault((role, width), []).append(points if points.ndim == 3 else points[None])

    def add(self, other: Shapes) -> None:
        """Take another set of shapes in."""
        for stroke, sheaves in other.strokes.items():
            self.strokes.setdefault(stroke, []).extend(sheaves)
        for role, soups in other.solids.items():
            self.solids.setdefault(role, []).extend(soups)
        for dot, spots in other.dots.items():
            self.dots.setdefault(dot, []).extend(spots)
        self.grids.update(other.grids)


def shapes(glyphs: Iterable[Glyph], size_mm: float) -> Shapes:
    """Turn glyphs into shapes; labels are left to whoever sets type.

    Parameters
    ----------
    size_mm : the mechanism's size, from which dashes and heads take theirs.
    """
    made = Shapes()
    for glyph in glyphs:
        match glyph:
            case Line(points, role, dashed, width):
                for piece in dashes(points, (DASH * size_mm, GAP * size_mm)) if dashed else (points,):
                    made.line(role, width, piece)
            case Arrow():
                _arrow(made, glyph, size_mm)
            case Axis():
                _axis(made, glyph, size_mm)
            case Ring(centre, normal, radius, role, width):
                made.line(role, width, circle(centre, normal, radius))
            case Disc(centre, normal, radius, role):
                rim = circle(centre, normal, radius)
                middle = np.broadcast_to(centre, (len(rim) - 1, 3))
                made.solids.setdefault(role, []).append(np.stack((middle, rim[:-1], rim[1:]), axis=1))
            case Point(at, role, pixels):
                made.dots.setdefault((role, pixels), []).append(at)
            case Ticks(points, directions, halves, role, width):
                offset = halves[:, None, None] * directions
                middle = points[:, None]
                made.line(role, width, np.stack((middle - offset, middle + offset), axis=2).reshape(-1, 2, 3))
            case Grid(centre, spacing, reach, role):
                lines, strength = grid_lines(float(centre[0]), float(centre[1]), spacing, reach)
                made.grids[role] = Ground(lines, strength, float(centre[2]))
            case Label():
                pass
    return made


@cache
def _unit_circle() -> Array:
    angle = np.linspace(0.0, 2.0 * np.pi, RING_SIDES + 1)
    return np.stack((np.cos(angle), np.sin(angle)), axis=-1)


def frame_about(direction: Array) -> Array:
    """(3, 3) rows: two unit vectors across a direction, and its own; right-handed. Plain floats: called every frame."""
    x, y, z = (float(part) for part in direction)
    length = math.sqrt(x * x + y * y + z * z)
    x, y, z = x / length, y / length, z / length
    # M. M. Frisvad's basis as made robust by T. Duff et al., J. Computer Graphics Techniques 6 (2017), from memory
    sign = math.copysign(1.0, z)
    a = -1.0 / (sign + z)
    b = x * y * a
    return np.array([[1.0 + sign * x * x * a, sign * b, -sign * x], [b, sign + y * y * a, -y], [x, y, z]])


def circle(centre: Array, normal: Array, radius: float) -> Array:
    """(RING_SIDES + 1, 3) closed circle, counter-clockwise about the normal."""
    return np.asarray(centre + radius * (_unit_circle() @ frame_about(normal)[:2]))


def dashes(points: Array, pattern: tuple[float, ...]) -> list[Array]:
    """Cut a polyline (n, 3) into dashes: lengths of dash, gap, dash, gap, … in mm along it.

    Returns
    -------
    Sheaves (k, m, 3) of polylines; a straight line of two points gives one sheaf.
    """
    steps = np.linalg.norm(np.diff(points, axis=0), axis=1)
    reached = np.concatenate(([0.0], np.cumsum(steps)))
    total = float(reached[-1])
    if total == 0.0 or not np.isfinite(total):
        return []
    edges = np.cumsum(np.tile(pattern, int(total / sum(pattern)) + 1))
    edges = np.minimum(np.concatenate(([0.0], edges)), total)
    pairs = edges[: len(edges) // 2 * 2].reshape(-1, 2)
    pairs = pairs[pairs[:, 1] > pairs[:, 0]]
    if len(points) == 2:
        return [points[0] + pairs[..., None] / total * (points[1] - points[0])]
    pieces = []
    for begin, end in pairs:
        at = np.concatenate(([begin], reached[(reached > begin) & (reached < end)], [end]))
        pieces.append(np.stack([np.interp(at, reached, points[:, axis]) for axis in range(3)], axis=-1)[None])
    return pieces


def _arrow(made: Shapes, arrow: Arrow, size_mm: float) -> None:
    """Shaft and head: a flat head in the plane of a view's construction, else a cone."""
    length = float(np.linalg.norm(arrow.vector))
    if length == 0.0 or not np.isfinite(length):
        return
    along = arrow.vector / length
    head = min(HEAD_LENGTH * size_mm, 0.6 * length)
    half = head * HEAD_RADIUS / HEAD_LENGTH
    tip = arrow.start + arrow.vector
    base = tip - head * along
    made.line(arrow.role, arrow.width_px, np.stack((arrow.start, base)))
    solids = made.solids.setdefault(arrow.role, [])
    if arrow.facing is not None:
        across = np.cross(arrow.facing, along) * half
        solids.append(np.stack((tip, base - across, base + across))[None])
        return
    rim = circle(base, along, half)[::2]
    for point, sides in ((tip, (rim[:-1], rim[1:])), (base, (rim[1:], rim[:-1]))):
        solids.append(np.stack((np.broadcast_to(point, (len(rim) - 1, 3)), *sides), axis=1))


def _axis(made: Shapes, axis: Axis, size_mm: float) -> None:
    along = axis.direction / np.linalg.norm(axis.direction)
    reach = axis.half_length_mm * along
    screw = np.isfinite(axis.pitch_mm_per_rad) and axis.pitch_mm_per_rad != 0.0
    pattern = tuple(share * size_mm for share in (LONG_DASH, SHORT_GAP, DOT, SHORT_GAP))
    half = np.stack((np.zeros(3), reach))
    for piece in dashes(half, pattern) if axis.dash_dot else (half[None],):
        made.line(axis.role, axis.width_px, np.concatenate((axis.point + piece, axis.point - piece)))
    if screw:
        hand = float(np.sign(axis.pitch_mm_per_rad))
        made.solids.setdefault(axis.role, []).append(screw_thread(axis.point, along, hand, size_mm))


def screw_thread(point: Array, along: Array, hand: float, size_mm: float) -> Array:
    """(n, 3, 3) triangles of a few turns of wire about an axis: right-handed for ``hand`` > 0."""
    return np.asarray(point + size_mm * (_unit_thread(hand) @ frame_about(along)))


@cache
def _unit_thread(hand: float) -> Array:
    """The thread about z at the origin, for a mechanism of size 1."""
    turn = np.linspace(-np.pi * SCREW_TURNS, np.pi * SCREW_TURNS, int(28 * SCREW_TURNS) + 1)
    rise = SCREW_LENGTH / (2.0 * np.pi * SCREW_TURNS)
    zero = np.zeros_like(turn)
    out = np.stack((np.cos(turn), hand * np.sin(turn), zero), axis=-1)
    core = SCREW_RADIUS * out + np.stack((zero, zero, rise * turn), axis=-1)
    tangent = np.stack((-SCREW_RADIUS * np.sin(turn), hand * SCREW_RADIUS * np.cos(turn), rise + zero), axis=-1)
    tangent /= np.linalg.norm(tangent, axis=1, keepdims=True)
    side = np.cross(tangent, out)
    section = np.linspace(0.0, 2.0 * np.pi, 9)[None, :, None]
    tube = core[:, None] + SCREW_WIRE * (np.cos(section) * out[:, None] + np.sin(section) * side[:, None])
    a, b, c, d = tube[:-1, :-1], tube[:-1, 1:], tube[1:, 1:], tube[1:, :-1]
    return np.concatenate((np.stack((a, b, c), axis=2), np.stack((a, c, d), axis=2))).reshape(-1, 3, 3)


@lru_cache(maxsize=16)
def grid_lines(x: float, y: float, spacing: float, reach: float) -> tuple[Array, Array]:
    """Lines (k, n, 3), mm, of a grid at height 0, and their strength (k, n): 1 at (x, y), smoothly 0 at the reach."""
    share = np.linspace(-1.0, 1.0, GRID_PIECES + 1)
    sheaves = []
    for axis, (middle, other) in enumerate(((x, y), (y, x))):
        number = np.arange(np.ceil((middle - reach) / spacing), np.floor((middle + reach) / spacing) + 1.0)
        fixed = number * spacing
        half = np.sqrt(np.maximum(reach**2 - (fixed - middle) ** 2, 0.0))
        sheaf = np.zeros((len(number), len(share), 3))
        sheaf[..., axis] = fixed[:, None]
        sheaf[..., 1 - axis] = other + half[:, None] * share
        sheaves.append(sheaf)
    lines = np.concatenate(sheaves)
    far = np.hypot(lines[..., 0] - x, lines[..., 1] - y) / reach
    return lines, np.clip(1.0 - far, 0.0, 1.0) ** 1.3
