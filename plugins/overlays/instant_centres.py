"""Front- and side-view instant centres, swing arms, force lines and the roll centre. Data only.

A centre that is far away is drawn as an arrow towards it with its distance; one that does not exist is not drawn.
"""

from __future__ import annotations

from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.corner import contact_point, corner_readings, front_instant_centre, side_instant_centre
from knucklepath.kinematics.motion import Motion
from knucklepath.plugins.overlays.glyphs import (
    FAR_SHARE,
    Arrow,
    Glyph,
    Label,
    Line,
    Overlay,
    Point,
    Ring,
    State,
    metres,
)

Array: TypeAlias = NDArray[np.float64]
FORWARD, LEFT = np.array([1.0, 0.0, 0.0]), np.array([0.0, 1.0, 0.0])


def _wheel_centre(state: State) -> Array:
    return state.pose.point("wheel", state.pose.corner.wheel.centre)


def _front(motion: Motion) -> Array:
    """The front-view centre, infinite ones replaced by a point 10¹² mm out along their direction."""
    return _finite(front_instant_centre(motion), motion, 1)


def _side(motion: Motion) -> Array:
    return _finite(side_instant_centre(motion), motion, 0)


def _finite(centre: Array, motion: Motion, axis: int) -> Array:
    if np.isinf(centre[axis]):
        wheel = motion.point("wheel", motion.corner.wheel.centre)
        velocity = motion.velocity("wheel", motion.corner.wheel.centre)
        # a centre at infinity lies across the velocity of the wheel centre
        out = np.zeros(3)
        out[axis], out[2] = velocity[2], -velocity[axis]
        return wheel + np.copysign(1e12, centre[axis] * out[axis]) * out
    return centre


def _reach(start: Array, centre: Array, state: State) -> tuple[Array, bool, float]:
    """End of a line from ``start`` to a centre, whether the centre itself is reached, and its distance."""
    along = centre - start
    distance = float(np.linalg.norm(along))
    longest = FAR_SHARE * state.size_mm
    if distance <= longest:
        return centre, True, distance
    return start + along / distance * 0.55 * longest, False, distance


def _centre(state: State, centre: Array, normal: Array, view: str) -> list[Glyph]:
    if not np.isfinite(centre).all():
        return []
    end, reached, _ = _reach(_wheel_centre(state), centre, state)
    if not reached:
        return []
    radius = 0.022 * state.size_mm
    return [
        Ring(end, normal, radius, "force-line"),
        Point(end, "force-line", 6.0),
        Label(end, f"{view}-view instant centre", "force-line", priority=2),
    ]


def front_centre(state: State) -> list[Glyph]:
    """A ring at the front-view instant centre."""
    return _centre(state, _front(state.pose), FORWARD, "front")


def side_centre(state: State) -> list[Glyph]:
    """A ring at the side-view instant centre."""
    return _centre(state, _side(state.pose), LEFT, "side")


def swing_arms(state: State) -> list[Glyph]:
    """Lines from the wheel centre to both instant centres, with the swing arms' lengths."""
    start = _wheel_centre(state)
    readings = corner_readings(state.pose)
    glyphs: list[Glyph] = []
    for centre, length, view in (
        (_front(state.pose), readings["fvsa_length_mm"], "front"),
        (_side(state.pose), readings["svsa_length_mm"], "side"),
    ):
        if not np.isfinite(centre).all() or not np.isfinite(start).all():
            continue
        end, reached, _ = _reach(start, centre, state)
        glyphs += _line_or_arrow(start, end, reached, "swing-arm", dashed=True)
        text = metres(float(abs(length))) if np.isfinite(length) else "∞"
        glyphs.append(Label(start + 0.6 * (end - start), f"{view}-view swing arm {text}", "swing-arm", priority=7))
    return glyphs


def _line_or_arrow(start: Array, end: Array, reached: bool, role: str, dashed: bool = False) -> list[Glyph]:
    if reached:
        return [Line(np.stack((start, end)), role, 1.8, dashed)]
    return [
        Line(np.stack((start, end)), role, 1.8, dashed),
        Arrow(start + 0.9 * (end - start), 0.1 * (end - start), role),
    ]


def force_lines(state: State) -> list[Glyph]:
    """From the contact point to the instant centres: a contact force along them asks nothing of the spring."""
    contact = contact_point(state.pose)
    if not np.isfinite(contact).all():
        return []
    glyphs: list[Glyph] = []
    for centre, normal, axis, view in (
        (_front(state.pose), FORWARD, 0, "front"),
        (_side(state.pose), LEFT, 1, "side"),
    ):
        if not np.isfinite(centre).all():
            continue
        # drawn in the view's own plane through the contact point
        flat = centre.copy()
        flat[axis] = contact[axis]
        end, reached, distance = _reach(contact, flat, state)
        glyphs += _line_or_arrow(contact, end, reached, "force-line")
        text = f"{view}-view force line"
        if reached:
            glyphs.append(Ring(end, normal, 0.022 * state.size_mm, "force-line"))
        else:
            text += f", centre {metres(distance) if distance < 1e9 else 'infinitely far'} away"
        glyphs.append(Label(end, text, "force-line", priority=2))
    return glyphs


def roll_centre(state: State) -> list[Glyph]:
    """Where the front-view force line meets the car's middle plane: the roll centre of a mirror-symmetric axle."""
    height = float(corner_readings(state.pose)["roll_centre_height_mm"])
    contact = contact_point(state.pose)
    if not np.isfinite(height) or abs(height) > FAR_SHARE * state.size_mm:
        return []
    at = np.array([contact[0], 0.0, contact[2] + height])
    foot = np.array([contact[0], 0.0, contact[2]])
    text = f"roll centre, {height:.0f} mm above ground".replace("-", "−")
    return [
        Line(np.stack((foot, at)), "roll-centre", 1.5, dashed=True),
        Ring(at, FORWARD, 0.03 * state.size_mm, "roll-centre", 3.0),
        Point(at, "roll-centre", 8.0),
        Label(at, text, "roll-centre", priority=2),
    ]


OVERLAYS = (
    Overlay("force-lines", "Force lines", force_lines),
    Overlay("front-centre", "Front-view instant centre", front_centre, standard=False),
    Overlay("side-centre", "Side-view instant centre", side_centre, standard=False),
    Overlay("swing-arms", "Swing arms", swing_arms, standard=False),
    Overlay("roll-centre", "Roll centre", roll_centre),
)
