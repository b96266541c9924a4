"""The instant screw axis of the knuckle in travel. Data only."""

from __future__ import annotations

import numpy as np

from knucklepath.plugins.overlays.glyphs import (
    ENDLESS_MM,
    FAR_MM,
    Array,
    Axis,
    Glyph,
    Label,
    Overlay,
    Point,
    State,
    length_text,
    minus,
)

#: The axis is drawn this many sizes of the mechanism to each side of where it passes nearest the wheel.
HALF_SHARE = 4.0
#: A pitch smaller than this, mm/rad, is a plain hinge: no hand to show.
NO_PITCH = 0.05


def instant_axis(state: State) -> list[Glyph]:
    """The axis through its point nearest the wheel centre, with the pitch; nothing for a pure translation.

    An axis that passes the wheel farther than ``FAR_MM`` is out of every picture: its label then says how far away it
    is, at the wheel centre.
    """
    screw = state.pose.screw()
    direction, point, wheel = screw.direction, screw.point, state.wheel_centre
    if not (np.isfinite(direction).all() and np.isfinite(point).all()):
        return []
    pitch = float(screw.pitch_mm_per_rad)
    sounds = "" if abs(pitch) < NO_PITCH else minus(f"{pitch:.0f}\N{THIN SPACE}mm/rad")
    text = f"instant axis, pitch {sounds}" if sounds else "instant axis, no pitch"
    away = float(np.linalg.norm(point - wheel))
    if away > FAR_MM:
        if away > ENDLESS_MM:
            return []
        return [Label(wheel, f"{text}, {length_text(away)} away", "instant-axis", priority=1)]
    half = HALF_SHARE * state.size_mm
    hand = pitch if sounds else float("nan")
    return [
        Axis(point, direction, "instant-axis", half, hand),
        Point(point, "instant-axis", 7.0),
        Label(point, text, "instant-axis", priority=1, along=_outward(point, direction, half)),
    ]


def _outward(point: Array, direction: Array, half: float, count: int = 60) -> Array:
    """(2·count, 3) places along the axis, the nearest to its point first."""
    steps = np.linspace(0.0, half, count + 1)[1:]
    signed = np.stack((steps, -steps), axis=-1).reshape(-1)
    return np.asarray(point + signed[:, None] * direction)


OVERLAYS = (Overlay("instant-axis", "Instant axis, with the pitch's hand", instant_axis, standard=("corner", "top")),)
