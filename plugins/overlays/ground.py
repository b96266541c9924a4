"""The ground and the contact patch. Data only."""

from __future__ import annotations

import numpy as np

from knucklepath.kinematics.corner import contact_point, spin_axis
from knucklepath.plugins.overlays.glyphs import Disc, Glyph, Grid, Label, Overlay, Point, State

#: Lines of the ground are this far apart, mm.
GRID_MM = 100.0
UP = np.array([0.0, 0.0, 1.0])


def ground(state: State) -> list[Glyph]:
    """The ground at the design position: the plane through the contact point, as a grid."""
    contact = state.pose.corner.wheel.contact
    centre = np.round(contact / GRID_MM) * GRID_MM
    centre[2] = contact[2]
    return [Grid(centre, np.ceil(1.3 * state.size_mm / GRID_MM) * GRID_MM, GRID_MM, "ground")]


def contact_patch(state: State) -> list[Glyph]:
    """Where the tyre stands, at the present pose."""
    contact = contact_point(state.pose)
    if not np.isfinite(contact).all() or not np.isfinite(spin_axis(state.pose)).all():
        return []
    return [
        Disc(contact, UP, 0.035 * state.size_mm, "contact"),
        Point(contact, "contact"),
        Label(contact, "contact point", "contact", priority=8),
    ]


OVERLAYS = (
    Overlay("ground", "Ground", ground),
    Overlay("contact-patch", "Contact patch", contact_patch),
)
