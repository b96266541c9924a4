"""The instant screw axis of the knuckle in travel. Data only."""

from __future__ import annotations

from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.plugins.overlays.glyphs import FAR_SHARE, Axis, Glyph, Label, Overlay, Point, State, metres

Array: TypeAlias = NDArray[np.float64]


def instant_axis(state: State) -> list[Glyph]:
    """The axis through its point nearest the wheel centre, with its pitch; nothing for a pure translation.

    An axis that passes far from the wheel is drawn where it comes nearest to the scene.
    """
    screw = state.pose.screw()
    if not np.isfinite(screw.direction).all():
        return []
    direction, point = screw.direction, screw.point
    centre = state.pose.point("wheel", state.pose.corner.wheel.centre)
    pitch = float(screw.pitch_mm_per_rad)
    text = f"instant axis, pitch {pitch:.0f} mm/rad".replace("-", "−")
    distance = float(np.linalg.norm(point - centre))
    if distance > FAR_SHARE * state.size_mm:
        text += f", {metres(distance)} away"
    middle = _nearest_to_scene(point, direction, state)
    half = 1.1 * state.size_mm
    return [
        Axis(middle, direction, "instant-axis", half, pitch),
        Point(point, "instant-axis"),
        Label(middle, text, "instant-axis", priority=1),
    ]


def _nearest_to_scene(point: Array, direction: Array, state: State) -> Array:
    """The axis' point nearest to the middle of the mechanism."""
    middle = np.mean(list(state.pose.corner.mechanism.points.values()), axis=0)
    return point + direction * float((middle - point) @ direction)


OVERLAYS = (Overlay("instant-axis", "Instant axis", instant_axis),)
