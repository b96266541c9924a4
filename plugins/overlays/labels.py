"""Names of the rods and arms, at their middles. Data only."""

from __future__ import annotations

import numpy as np

from knucklepath.kinematics.mechanism import HingedBody
from knucklepath.plugins.overlays.glyphs import Array, Glyph, Label, Overlay, State


def labels(state: State) -> list[Glyph]:
    """A name for each rod and each hinged arm, at its middle; among the first to go when there is no room."""
    corner = state.pose.corner
    named: list[tuple[str, Array]] = []
    for body in corner.mechanism.bodies:
        if isinstance(body, HingedBody):
            held = [corner.point(name) for name in corner.mechanism.attachments(body.name) if name not in body.axis]
            end = held[0] if held else corner.wheel.centre
            # on one leg, not in the gap between the two
            named.append((body.name, (corner.point(body.axis[0]) + end) / 2.0))
    for rod in corner.mechanism.rods:
        named.append((rod.name, (corner.point(rod.point_a) + corner.point(rod.point_b)) / 2.0))
    glyphs: list[Glyph] = []
    for name, middle in named:
        at = state.pose.point(name, middle)
        if np.isfinite(at).all():
            glyphs.append(Label(at, name.replace("_", " "), "muted", priority=6))
    return glyphs


OVERLAYS = (Overlay("labels", "Names of rods and arms", labels),)
