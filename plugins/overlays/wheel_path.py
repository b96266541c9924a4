"""The wheel centre's path over the travel, with ticks. Data only."""

from __future__ import annotations

import numpy as np

from knucklepath.plugins.overlays.glyphs import Glyph, Label, Line, Overlay, Point, State, Ticks, minus

#: Travel between two ticks, mm; each fifth is long.
TICK_MM = 10.0
#: Across the path in front and in side view, so that every view shows them.
ACROSS = np.array([[0.0, 1.0, 0.0], [1.0, 0.0, 0.0]])


def wheel_path(state: State) -> list[Glyph]:
    """The path over the reachable travel, ticks each 10 mm of travel (longer each 50), and the present place."""
    centre = state.pose.corner.wheel.centre
    points = state.path.point("wheel", centre)
    sound = np.isfinite(points).all(axis=-1)
    if sound.sum() < 2:
        return []
    points, travel = points[sound], state.path.travel_mm[sound]
    number = np.arange(np.ceil(travel[0] / TICK_MM - 1e-9), np.floor(travel[-1] / TICK_MM + 1e-9) + 1.0)
    at = np.stack([np.interp(number * TICK_MM, travel, points[:, axis]) for axis in range(3)], axis=-1)
    half = np.where(number % 5 == 0, 0.026, 0.013) * state.size_mm
    ends = minus(f"{travel[0]:.0f}"), f"+{travel[-1]:.0f}"
    text = f"wheel-centre path, {ends[0]} to {ends[1]}\N{THIN SPACE}mm"
    glyphs: list[Glyph] = [
        Line(points, "wheel-path"),
        Ticks(at, ACROSS, half, "wheel-path"),
        Label(points[-1], text, "wheel-path", priority=5),
    ]
    if np.isfinite(state.wheel_centre).all():
        glyphs.append(Point(state.wheel_centre, "wheel-path", 9.0))
    return glyphs


OVERLAYS = (
    Overlay(
        "wheel-path", "Path of the wheel centre, a tick each 10 mm", wheel_path, standard=("corner", "front", "side")
    ),
)
