"""The meshes of a starter project: a knuckle, an arm or rod, a tyre, made from the mechanism's data. Writes no file.

They are simple on purpose: something to look at and to check until the user's own parts take their place.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.clearance.primitives import Mesh, ball, cylinder, merged, rod, tyre_ring
from knucklepath.kinematics.mechanism import CHASSIS, WHEEL_CENTRE, HingedBody
from knucklepath.kinematics.wheel import Corner

Array = NDArray[np.float64]

#: Nothing shorter than this, mm, becomes a leg.
LEAST_LEG = 1.0


@dataclass(frozen=True)
class StarterPart:
    """A part to be written: its name, the body it stands on, file name, colour and mesh in mm."""

    name: str
    body: str
    file: str
    colour: str
    about: str
    mesh: Mesh


def starter_parts(corner: Corner, rod_diameter: float) -> tuple[StarterPart, ...]:
    """Parts for a corner of any layout: what carries the wheel, the first arm or rod, and the tyre."""
    carrier = corner.carrier
    mesh = _carrier(corner, rod_diameter)
    parts = [StarterPart(carrier, carrier, "knuckle.stl", "#7f8c8d", "what carries the wheel", mesh)]
    arms = [body for body in corner.mechanism.bodies if isinstance(body, HingedBody) and body.name != carrier]
    if arms:
        # the lowest arm: the one that passes nearest to the tyre
        arm = min(arms, key=lambda body: float(np.mean([corner.point(name)[2] for name in body.axis])))
        mesh = _arm(corner, arm, rod_diameter)
        parts.append(StarterPart(arm.name, arm.name, "arm.stl", "#5d6d7e", "an arm", mesh))
    elif corner.mechanism.rods:
        link = corner.mechanism.rods[0]
        ends = corner.point(link.point_a), corner.point(link.point_b)
        mesh = rod(*ends, 0.5 * rod_diameter, 0.7 * rod_diameter)
        parts.append(StarterPart(link.name, link.name, "link.stl", "#5d6d7e", "a link", mesh))
    else:
        # the wheel is joined to its carrier: without a piece of chassis there would be nothing to check
        parts.append(StarterPart("side rail", CHASSIS, "side_rail.stl", "#95a5a6", "a piece of chassis", _rail(corner)))
    parts.append(StarterPart("tyre", "wheel", "tyre.stl", "#2c3e50", "the tyre", _tyre(corner)))
    return tuple(parts)


def _tyre(corner: Corner) -> Mesh:
    wheel = corner.wheel
    width, rim = wheel.tyre_width or 0.6 * wheel.outer_radius, wheel.rim_diameter or 1.3 * wheel.outer_radius
    return tyre_ring(wheel.centre, wheel.spin_axis, wheel.outer_radius, width, 0.5 * rim, segments=64)


def _rail(corner: Corner) -> Mesh:
    """A tube along the car, inboard of the tyre and above the arm."""
    wheel = corner.wheel
    radius = wheel.loaded_radius
    inboard = 0.5 * (wheel.tyre_width or 0.6 * radius) + 0.25 * radius
    middle = wheel.centre + np.array([0.1 * radius, -inboard, 0.85 * radius])
    half = np.array([1.1 * radius, 0.0, 0.0])
    return cylinder(middle - half, middle + half, 0.09 * radius, 24)


def _carrier(corner: Corner, thickness: float) -> Mesh:
    """A hub behind the wheel centre, and a leg from it to every point that the carrier holds."""
    spin, centre = corner.wheel.spin_axis, corner.wheel.centre
    inner, outer = centre - 2.4 * thickness * spin, centre + 0.5 * thickness * spin
    meshes = [cylinder(inner, outer, 1.6 * thickness, 32)]
    body = corner.mechanism.body(corner.carrier)
    names = [name for name in corner.mechanism.attachments(corner.carrier) if name != WHEEL_CENTRE]
    if isinstance(body, HingedBody):
        meshes += _bushes(corner, body, thickness)
        names = [*names, *body.axis]
    root = inner + 0.8 * thickness * spin
    for name in dict.fromkeys(names):
        end = corner.point(name)
        meshes += _leg(root, end, 0.55 * thickness)
        meshes.append(ball(end, 0.75 * thickness))
    return merged(meshes)


def _arm(corner: Corner, arm: HingedBody, thickness: float) -> Mesh:
    """Bushes on the hinge axis, legs from them to the farthest point that the arm holds, stubs to the others."""
    meshes = _bushes(corner, arm, thickness)
    pivots = [corner.point(name) for name in arm.axis]
    held = [corner.point(name) for name in corner.mechanism.attachments(arm.name) if name not in arm.axis]
    along = pivots[1] - pivots[0]
    if held:
        tip = max(held, key=lambda point: float(np.linalg.norm(np.cross(along, point - pivots[0]))))
        for pivot in pivots:
            meshes += _leg(pivot, tip, 0.5 * thickness)
        for point in held:
            meshes.append(ball(point, 0.75 * thickness))
            if point is not tip:
                meshes += _leg(pivots[0] + 0.5 * along + 0.5 * (tip - pivots[0] - 0.5 * along), point, 0.4 * thickness)
    return merged(meshes)


def _bushes(corner: Corner, body: HingedBody, thickness: float) -> list[Mesh]:
    pivots = [corner.point(name) for name in body.axis]
    along = (pivots[1] - pivots[0]) / np.linalg.norm(pivots[1] - pivots[0])
    half = 0.8 * thickness if body.parent == CHASSIS else 0.6 * thickness
    return [cylinder(pivot - half * along, pivot + half * along, 0.85 * thickness, 28) for pivot in pivots]


def _leg(a: Array, b: Array, radius: float) -> list[Mesh]:
    return [cylinder(a, b, radius, 20)] if np.linalg.norm(b - a) > LEAST_LEG else []
