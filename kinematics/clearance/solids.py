"""Solids on bodies: parts from meshes, and those that the program makes from the mechanism's data alone.

Knows no file format and no pixel. A solid's vertices are at the design position, body frame of the car, mm; where
its body goes, the solid goes.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal, TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.clearance.primitives import (
    Mesh,
    ball,
    cylinder,
    merged,
    rim_barrel,
    rod,
    tube,
    tyre_ring,
)
from knucklepath.kinematics.mechanism import CHASSIS, WHEEL_CENTRE, FreeBody, HingedBody, SlidingBody
from knucklepath.kinematics.wheel import Corner

Array: TypeAlias = NDArray[np.float64]
Role: TypeAlias = Literal["chassis", "knuckle", "arm", "rod", "tyre", "rim", "rack", "part"]

#: A rod's joint balls, over the rod's diameter.
END_SHARE = 1.35
#: Legs and spokes of no more than this length, mm, are not made: the balls at their ends are all there is.
SHORTEST_LEG = 1.0
#: Shares of a strut's length at design that its rod and its tube take; they overlap.
STRUT_ROD_SHARE = 0.62
STRUT_TUBE_SHARE = 0.55


@dataclass(frozen=True)
class Solid:
    """A closed or open triangle mesh that stands on a body.

    name : as in clearances; body : the mechanism's body, "chassis" or "wheel"; vertices (n, 3) mm; faces (m, 3);
    colour : "#rrggbb" or None; generated : made by the program; role : how it is drawn.
    """

    name: str
    body: str
    vertices: Array
    faces: NDArray[np.int32]
    colour: str | None = None
    generated: bool = False
    role: Role = "part"


@dataclass(frozen=True)
class RodStyle:
    """Diameters, mm, of the rods and arm legs that the program draws.

    each : name → diameter, or None for one that is not shown.
    """

    diameter: float = 20.0
    each: Mapping[str, float | None] = field(default_factory=dict)

    def of(self, name: str) -> float | None:
        """Diameter of a rod or arm; None where it is not shown."""
        return self.each.get(name, self.diameter)


def generated_solids(corner: Corner, rods: RodStyle) -> tuple[Solid, ...]:
    """Make every solid that follows from the mechanism's data: rods, arms, knuckle, rack, strut, tyre and rim.

    Works for any layout: legs run from a hinge's points to the points where other bodies are held, spokes of the
    carrier from its joints to the wheel centre. The straight spring-damper changes its length and is no solid here.
    """
    mechanism = corner.mechanism
    solids: list[Solid] = []
    for joint in mechanism.rods:
        diameter = rods.of(joint.name)
        if diameter is not None:
            a, b = corner.point(joint.point_a), corner.point(joint.point_b)
            mesh = rod(a, b, diameter / 2.0, END_SHARE * diameter / 2.0)
            solids.append(Solid(joint.name, joint.name, *mesh, generated=True, role="rod"))
    for body in mechanism.bodies:
        diameter = rods.of(body.name)
        if diameter is None:
            continue
        made: Mesh | None = None
        role: Role = "arm"
        if isinstance(body, HingedBody):
            made = _arm(corner, body, diameter)
        elif isinstance(body, FreeBody):
            made, role = _spokes(corner, body, diameter), "knuckle"
        elif isinstance(body.axis, str):
            made, role = _bar(corner, body, diameter), "rack"
        else:
            solids.extend(_strut(corner, body, diameter))
        if made is not None:
            solids.append(Solid(body.name, body.name, *made, generated=True, role=role))
    return (*solids, *_wheel(corner, rods))


def _arm(corner: Corner, body: HingedBody, diameter: float) -> Mesh | None:
    """Legs from both hinge points to every point that the arm holds, with a ball where they meet."""
    held = [name for name in corner.mechanism.attachments(body.name) if name not in body.axis]
    ends = [corner.point(name) for name in held]
    pivots = [corner.point(name) for name in body.axis]
    if not ends:
        return None
    radius = diameter / 2.0
    far = max(ends, key=lambda end: float(np.linalg.norm(np.cross(pivots[1] - pivots[0], end - pivots[0]))))
    legs = [(pivot, far) for pivot in pivots]
    legs += [(_nearest_on(legs, end), end) for end in ends if end is not far]
    spring = corner.spring
    if spring is not None and corner.body(spring.on) == body.name:
        legs.append((_nearest_on(legs, spring.moving), spring.moving))
    meshes = [cylinder(a, b, radius, 20) for a, b in legs if np.linalg.norm(b - a) > SHORTEST_LEG]
    meshes += [ball(point, END_SHARE * radius) for point in (*pivots, *ends)]
    if body.name == corner.carrier:
        meshes.append(_hub(corner, diameter))
    return merged(meshes)


def _hub(corner: Corner, diameter: float) -> Mesh:
    """A short cylinder along the spin axis, mostly inboard of the wheel centre, where the bearing is."""
    centre, spin = corner.wheel.centre, corner.wheel.spin_axis
    return cylinder(centre - 2.2 * diameter * spin, centre + 0.4 * diameter * spin, 1.7 * diameter, 32)


def _nearest_on(legs: list[tuple[Array, Array]], point: Array) -> Array:
    """The point of some straight legs that is nearest to a point."""
    best, found = np.inf, point
    for a, b in legs:
        along = b - a
        if np.linalg.norm(along) <= SHORTEST_LEG:
            continue
        share = float(np.clip((point - a) @ along / (along @ along), 0.0, 1.0))
        at = a + share * along
        apart = float(np.linalg.norm(at - point))
        if apart < best:
            best, found = apart, at
    return found


def _spokes(corner: Corner, body: FreeBody, diameter: float) -> Mesh:
    """Spokes from every joint of a free body to its hub, and the hub along the spin axis on the carrier."""
    held = [name for name in corner.mechanism.attachments(body.name) if name != WHEEL_CENTRE]
    ends = [corner.point(name) for name in held]
    spring = corner.spring
    if spring is not None and corner.body(spring.on) == body.name:
        ends.append(spring.moving)
    radius = 0.6 * diameter
    if body.name == corner.carrier:
        # spokes meet inboard of the wheel centre, where a knuckle's bearing is
        root = corner.wheel.centre - corner.wheel.spin_axis * 1.6 * diameter
        meshes = [_hub(corner, diameter)]
    else:
        root = np.mean(ends, axis=0)
        meshes = [ball(root, radius)]
    meshes += [cylinder(root, end, radius, 20) for end in ends if np.linalg.norm(end - root) > SHORTEST_LEG]
    meshes += [ball(end, END_SHARE * diameter / 2.0) for end in ends]
    return merged(meshes)


def _bar(corner: Corner, body: SlidingBody, diameter: float) -> Mesh | None:
    """A bar along the sliding axis from what the body holds towards the car's middle."""
    held = [corner.point(name) for name in corner.mechanism.attachments(body.name)]
    if not held or not isinstance(body.axis, str):
        return None
    axis = corner.point(body.axis)
    meshes: list[Mesh] = []
    for end in held:
        across = float(end @ axis)
        reach = min(max(abs(across), 40.0), 220.0)
        meshes.append(cylinder(end, end - np.copysign(reach, across) * axis, 0.65 * diameter, 20))
        meshes.append(ball(end, END_SHARE * diameter / 2.0))
    return merged(meshes)


def _strut(corner: Corner, body: SlidingBody, diameter: float) -> list[Solid]:
    """The rod of a strut on the sliding body, and its tube on the body it slides in."""
    upper, lower = (corner.point(name) for name in body.axis)
    along = lower - upper
    stem = merged(
        [cylinder(upper, upper + STRUT_ROD_SHARE * along, 0.5 * diameter, 20), ball(upper, END_SHARE * diameter)]
    )
    parts = [Solid(body.name, body.name, *stem, generated=True, role="rod")]
    if body.parent != CHASSIS:
        outer = tube(lower, lower - STRUT_TUBE_SHARE * along, 1.15 * diameter, 0.6 * diameter)
        parts.append(Solid(f"{body.name} tube", body.parent, *outer, generated=True, role="knuckle"))
    return parts


def _wheel(corner: Corner, rods: RodStyle) -> list[Solid]:
    """Tyre and rim, from the wheel's figures; sensible ones where the project gives none."""
    wheel = corner.wheel
    outer = wheel.outer_radius
    inner = wheel.rim_diameter / 2.0 if wheel.rim_diameter else 0.66 * outer
    inner = min(inner, 0.94 * outer)
    width = wheel.tyre_width or 0.68 * outer
    solids = []
    if rods.each.get("tyre", 1.0) is not None:
        tyre = tyre_ring(wheel.centre, wheel.spin_axis, outer, width, inner)
        solids.append(Solid("tyre", "wheel", *tyre, generated=True, role="tyre"))
    if rods.each.get("rim", 1.0) is not None:
        rim = rim_barrel(wheel.centre, wheel.spin_axis, inner * 0.955, 0.86 * width)
        solids.append(Solid("rim", "wheel", *rim, generated=True, role="rim"))
    return solids
