"""The steering axis, with its foot on the ground. Data only."""

from __future__ import annotations

import numpy as np

from knucklepath.kinematics.corner import contact_point, steering_axis
from knucklepath.plugins.overlays.glyphs import Glyph, Label, Line, Overlay, Ring, State

UP = np.array([0.0, 0.0, 1.0])


def draw_steering_axis(state: State) -> list[Glyph]:
    """From the ground up past the upper joint; a layout without steering joints has a virtual axis."""
    point, along = steering_axis(state.pose)
    contact = contact_point(state.pose)
    if not np.isfinite(along).all() or abs(along[2]) < 0.05:
        return []
    corner = state.pose.corner
    foot = point + along * (contact[2] - point[2]) / along[2]
    highest = max(float(position[2]) for position in corner.mechanism.points.values())
    top = foot + along * (highest + 0.12 * state.size_mm - foot[2]) / along[2]
    kind = "steering axis" if corner.steering_axis else "virtual steering axis"
    return [
        Line(np.stack((foot, top)), "steering-axis", 2.0),
        Ring(foot, UP, 0.02 * state.size_mm, "steering-axis"),
        Label(top, kind, "steering-axis", priority=4),
    ]


OVERLAYS = (Overlay("steering-axis", "Steering axis", draw_steering_axis),)
