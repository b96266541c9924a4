"""The steering axis, with its foot on the ground. Data only."""

from __future__ import annotations

import numpy as np

from knucklepath.kinematics.corner import contact_point, steering_axis
from knucklepath.plugins.overlays.glyphs import Glyph, Label, Line, Overlay, Point, Ring, State, minus

UP = np.array([0.0, 0.0, 1.0])
#: An axis that leans more than about 87° has no foot that a picture could show.
LEAST_RISE = 0.05


def draw_steering_axis(state: State) -> list[Glyph]:
    """From the ground up past the upper joint; a layout without steering joints has a virtual axis."""
    point, along = steering_axis(state.pose)
    contact = contact_point(state.pose)
    if not (np.isfinite(along).all() and np.isfinite(contact).all()) or abs(along[2]) < LEAST_RISE:
        return []
    corner = state.pose.corner
    foot = point + along * (contact[2] - point[2]) / along[2]
    top_z = state.wheel_centre[2] + 1.15 * corner.wheel.outer_radius
    if corner.steering_axis:
        highest = max(float(corner.point(name)[..., 2].max()) for name in corner.steering_axis)
        top_z = max(top_z, highest + 0.12 * state.size_mm)
    top = foot + along * (top_z - foot[2]) / along[2]
    kind = "steering axis" if corner.steering_axis else "virtual steering axis"
    angles = state.readings("caster", "kingpin_inclination")
    caster, inclination = (minus(f"{angle:.1f}") for angle in angles.values())
    text = f"{kind}, caster {caster}°, inclination {inclination}°"
    size = 0.018 * state.size_mm
    return [
        Line(np.stack((foot, top)), "steering-axis", width_px=2.0),
        Ring(foot, UP, size, "steering-axis", 2.0),
        Point(foot, "steering-axis", 7.0),
        Line(np.stack((foot, contact)), "steering-axis", dashed=True, width_px=1.5),
        Label(top, text, "steering-axis", priority=3, along=np.linspace(top, foot, 40)),
    ]


OVERLAYS = (
    Overlay("steering-axis", "Steering axis and its foot", draw_steering_axis, standard=("corner", "front", "side")),
)
