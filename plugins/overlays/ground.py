"""The ground and the contact patch. Data only."""

from __future__ import annotations

import numpy as np

from knucklepath.kinematics.corner import contact_point
from knucklepath.plugins.overlays.glyphs import LOOKS, Glyph, Grid, Label, Overlay, Point, Ring, State

#: Lines of the ground are this far apart, mm.
SPACING_MM = 100.0
#: The ground has faded away at this many sizes of the mechanism.
REACH_SHARE = 2.2
UP = np.array([0.0, 0.0, 1.0])


def ground(state: State) -> list[Glyph]:
    """The ground: a 100 mm grid in the level plane through the contact point, which the wheel stands on."""
    contact = contact_point(state.pose)
    if not np.isfinite(contact).all():
        return []
    design = state.pose.corner.wheel.contact
    # the grid keeps its lines while the contact point wanders; only its height follows
    centre = np.array([design[0], design[1], contact[2]])
    return [Grid(centre, SPACING_MM, REACH_SHARE * state.size_mm, "ground")]


def contact_patch(state: State) -> list[Glyph]:
    """Where the tyre stands."""
    contact = contact_point(state.pose)
    if not np.isfinite(contact).all():
        return []
    radius = 0.028 * state.size_mm
    return [
        Ring(contact, UP, radius, "contact-patch", 1.5),
        Point(contact, "contact-patch", 7.0),
        Label(contact, "contact point", "contact-patch", priority=7),
    ]


OVERLAYS = (
    Overlay("ground", "Ground, 100 mm grid", ground),
    Overlay("contact-patch", "Contact point of the tyre", contact_patch, standard=LOOKS),
)
