"""The wheel centre's path over the travel, with ticks. Data only."""

from __future__ import annotations

import numpy as np

from knucklepath.kinematics.corner import spin_axis
from knucklepath.plugins.overlays.glyphs import Glyph, Label, Line, Overlay, Point, State

#: Travel between two ticks, mm.
TICK_MM = 10.0


def wheel_path(state: State) -> list[Glyph]:
    """The path, ticks each 10 mm of travel (longer at 50), and the present position."""
    path = state.path
    centre = state.pose.corner.wheel.centre
    points = path.point("wheel", centre)
    sound = np.isfinite(points).all(axis=-1)
    if sound.sum() < 2:
        return []
    points, travel = points[sound], path.travel_mm[sound]
    glyphs: list[Glyph] = [Line(points, "path", 2.5)]
    across = np.cross(spin_axis(state.pose), [0.0, 0.0, 1.0])
    across /= np.linalg.norm(across)
    first, last = np.ceil(travel[0] / TICK_MM), np.floor(travel[-1] / TICK_MM)
    for tick in np.arange(first, last + 1.0) * TICK_MM:
        at = np.array([np.interp(tick, travel, points[:, k]) for k in range(3)])
        half = (0.022 if tick % 50.0 == 0.0 else 0.012) * state.size_mm
        glyphs.append(Line(np.stack((at - half * across, at + half * across)), "path", 1.5))
    now = state.pose.point("wheel", centre)
    if np.isfinite(now).all():
        glyphs.append(Point(now, "path", 11.0))
    ends = f"wheel-centre path, {travel[0]:+.0f} to {travel[-1]:+.0f} mm".replace("-", "−")
    glyphs.append(Label(points[-1], ends.replace("wheel−", "wheel-"), "path", priority=3))
    return glyphs


OVERLAYS = (Overlay("wheel-path", "Wheel-centre path", wheel_path),)
