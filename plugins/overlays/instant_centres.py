"""Front- and side-view instant centres, swing arms, force lines and the roll centre. Data only.

A centre that is far away is drawn as an arrow towards it that says how far it is; one that does not exist is not drawn.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from knucklepath.kinematics.corner import contact_point, front_instant_centre, side_instant_centre
from knucklepath.plugins.overlays.glyphs import (
    ENDLESS_MM,
    FAR_MM,
    Array,
    Arrow,
    Glyph,
    Label,
    Line,
    Overlay,
    Point,
    Ring,
    State,
    length_text,
    minus,
    stretch,
)

#: An arrow towards a far centre is this many sizes of the mechanism long.
ARROW_SHARE = 0.8
#: A force line of a centre on the wheel's own side of the car runs on to the middle plane, unless it is this far, mm.
ROLL_CENTRE_REACH_MM = 1200.0


@dataclass(frozen=True)
class View:
    """One of the two views: its name, its normal (0: x, 1: y), the axis across it, and what + and − along it mean."""

    name: str
    normal: int
    across: int
    plus: str
    minus: str

    @property
    def facing(self) -> Array:
        """(3,) the direction along which one looks."""
        return np.eye(3)[self.normal]


FRONT = View("front", 0, 1, "outboard", "inboard")
SIDE = View("side", 1, 0, "ahead", "behind")


@dataclass(frozen=True)
class Centre:
    """An instant centre seen from a point in the plane of its view.

    start : (3,) that point; towards : (3,) unit vector to the centre; distance : mm, inf where it is endless.
    """

    view: View
    start: Array
    towards: Array
    distance: float

    @property
    def far(self) -> bool:
        """True when it is drawn as a direction only."""
        return self.distance > FAR_MM

    def end(self, state: State) -> Array:
        """(3,) the centre, or the tip of the arrow towards it."""
        return self.start + self.towards * (ARROW_SHARE * state.size_mm if self.far else self.distance)

    @property
    def where(self) -> str:
        """How far it is, and on which side: "1825 mm inboard"."""
        if not self.distance < ENDLESS_MM:
            return "at infinity"
        offset = self.distance * self.towards[self.view.across]
        return f"{length_text(abs(offset))} {self.view.plus if offset > 0.0 else self.view.minus}"


def _centre(state: State, view: View, start: Array) -> Centre | None:
    """The centre of a view as seen from ``start`` (3,); None where there is none."""
    at = front_instant_centre(state.pose) if view is FRONT else side_instant_centre(state.pose)
    along = at - start
    along[view.normal] = 0.0
    if np.isnan(along[view.across]) or not np.isfinite(start).all():
        return None
    # at infinity the height may be inf or nan (0/0: level velocity); the direction is found from the velocity below
    distance = float(np.linalg.norm(along))
    if np.isfinite(distance) and distance < ENDLESS_MM:
        return Centre(view, start, along / distance, distance) if distance > 0.0 else None
    # endless: the line stands across the velocity of the knuckle's point at the start
    body = state.pose
    design = np.linalg.solve(body.rotation("wheel"), start - body.translation("wheel"))
    velocity = body.velocity("wheel", design)
    towards = np.zeros(3)
    towards[view.across], towards[2] = velocity[2], -velocity[view.across]
    length = float(np.linalg.norm(towards))
    if length == 0.0:
        return None
    towards *= np.copysign(1.0, along[view.across] * towards[view.across]) / length
    return Centre(view, start, towards, float("inf"))


def _centre_mark(state: State, view: View) -> list[Glyph]:
    wheel = state.wheel_centre
    centre = _centre(state, view, wheel)
    if centre is None:
        return []
    end = centre.end(state)
    text = f"{view.name}-view instant centre, {centre.where}"
    contact = contact_point(state.pose)
    from_ = wheel if centre.far else contact
    label = Label(end, text, "force-line", priority=2, along=stretch(from_, end), facing=view.facing)
    if centre.far:
        return [Arrow(wheel, end - wheel, "force-line", text, 1.5, view.facing), label]
    return [
        Ring(end, view.facing, 0.024 * state.size_mm, "force-line", 2.0, view.facing),
        Point(end, "force-line", 7.0, view.facing),
        label,
    ]


def front_centre(state: State) -> list[Glyph]:
    """A ring at the front-view instant centre, or an arrow towards it."""
    return _centre_mark(state, FRONT)


def side_centre(state: State) -> list[Glyph]:
    """A ring at the side-view instant centre, or an arrow towards it."""
    return _centre_mark(state, SIDE)


def swing_arms(state: State) -> list[Glyph]:
    """Lines from the wheel centre to both instant centres, with the swing arms' lengths."""
    wheel = state.wheel_centre
    lengths = state.readings("fvsa_length", "svsa_length")
    glyphs: list[Glyph] = []
    for view, length in zip((FRONT, SIDE), lengths.values(), strict=True):
        centre = _centre(state, view, wheel)
        if centre is None:
            continue
        end = centre.end(state)
        text = f"{view.name}-view swing arm, {length_text(abs(length))}"
        points = np.stack((wheel, end))
        if centre.far:
            glyphs.append(Arrow(wheel, end - wheel, "swing-arm", text, 1.5, view.facing))
        else:
            glyphs.append(Line(points, "swing-arm", True, 1.5, view.facing))
        middle = wheel + 0.5 * (end - wheel)
        glyphs.append(Label(middle, text, "swing-arm", priority=4, along=stretch(wheel, middle), facing=view.facing))
    return glyphs


def force_lines(state: State) -> list[Glyph]:
    """From the contact point to the instant centres: a contact force along them asks nothing of the spring."""
    contact = contact_point(state.pose)
    glyphs: list[Glyph] = []
    for view in (FRONT, SIDE):
        centre = _centre(state, view, contact)
        if centre is None:
            continue
        end = centre.end(state)
        text = f"{view.name}-view force line"
        if centre.far:
            text += f", centre {centre.where}"
            glyphs.append(Arrow(contact, end - contact, "force-line", text, 2.0, view.facing))
        else:
            glyphs.append(Line(np.stack((contact, end)), "force-line", False, 2.0, view.facing))
            glyphs.append(Ring(end, view.facing, 0.024 * state.size_mm, "force-line", 2.0, view.facing))
        middle = contact + 0.5 * (end - contact)
        glyphs.append(Label(middle, text, "force-line", priority=4, along=stretch(contact, middle), facing=view.facing))
    return glyphs


def roll_centre(state: State) -> list[Glyph]:
    """Where the front-view force line meets the car's middle plane: the roll centre of a mirror-symmetric axle."""
    height = state.readings("roll_centre_height")["roll_centre_height"]
    contact = contact_point(state.pose)
    if not (np.isfinite(height) and np.isfinite(contact).all()) or abs(height) > ROLL_CENTRE_REACH_MM:
        return []
    foot = np.array([contact[0], 0.0, contact[2]])
    at = foot + np.array([0.0, 0.0, height])
    tall = np.array([0.0, 0.0, max(0.35 * state.size_mm, 1.4 * height)])
    deep = np.array([0.0, 0.0, min(-0.06 * state.size_mm, 1.2 * height)])
    side = "below" if height < 0.0 else "above"
    text = f"roll centre, {minus(f'{abs(height):.0f}')}\N{THIN SPACE}mm {side} ground"
    size = 0.02 * state.size_mm
    view = FRONT.facing
    cross = [np.array([0.0, size, size]), np.array([0.0, size, -size])]
    return [
        Line(np.stack((foot + deep, foot + tall)), "muted", True, 1.5, view),
        Line(np.stack((contact, at)), "force-line", True, 1.5, view),
        Ring(at, view, size, "roll-centre", 2.0, view),
        *(Line(np.stack((at - arm, at + arm)), "roll-centre", False, 2.0, view) for arm in cross),
        Label(at, text, "roll-centre", priority=2, along=stretch(contact, at), facing=view),
    ]


OVERLAYS = (
    Overlay("front-centre", "Front-view instant centre", front_centre, standard=("front",)),
    Overlay("side-centre", "Side-view instant centre", side_centre, standard=("side",)),
    Overlay("swing-arms", "Front- and side-view swing arms", swing_arms, standard=()),
    Overlay("force-lines", "Front- and side-view force lines", force_lines, standard=("corner", "front", "side")),
    Overlay("roll-centre", "Roll centre of a mirror-symmetric axle", roll_centre, standard=("front",)),
)
