"""The demo's knuckle and brake caliper: castings with machined faces, and their bolts.

Needed only to make the demo's meshes again (``make_demo.py``); the program itself never imports this.
"""

from __future__ import annotations

import numpy as np
from manifold3d import Manifold

from knucklepath.assets.casting import Field, cast, cheese, cushion, flowing, hollowed, limb, saddle
from knucklepath.assets.demo_car import Car
from knucklepath.assets.demo_links import LOWER_BALL, ROD_BALL, ROD_JAW, UPPER_BALL, UPPER_JAW, rod_axis
from knucklepath.assets.modelling import (
    UP,
    Array,
    bar,
    bevelled,
    block,
    drum,
    frame_along,
    globe,
    hexagon,
    joint_bolt,
    skin,
    together,
    turned,
    unit,
)

#: Where the bearing housing's middle lies along the spin axis, mm, and half its length.
HOUSING, HALF_HOUSING = -45.0, 20.0
#: Radius and angles of the caliper's bolts, and the face on which it is bolted, along the spin axis.
CALIPER_BOLTS = ((104.0, -119.0), (104.0, -61.0))
CALIPER_FACE = -38.0
#: How thick a fork's jaws are, mm.
JAW_PLATE = 8.0
#: Size of the grid's cells, mm: knuckle, caliper.
KNUCKLE_CELL, CALIPER_CELL = 5.6, 5.4
AHEAD = np.array([1.0, 0.0, 0.0])


def knuckle(car: Car) -> Manifold:
    """The upright: a casting, machined where things are bolted to it, with the joints' balls and bolts."""
    solid = _blank(car)
    middle = car.hub + HOUSING * car.spin
    cuts = [
        drum(middle, car.spin, 40.0, 300.0, 48),
        drum(middle - (HALF_HOUSING - 1.0) * car.spin, car.spin, 44.0, 6.0, 48),
        drum(middle - (HALF_HOUSING + 20.0 - 1.0) * car.spin, car.spin, 51.0, 40.0, 48),
        drum(middle + (HALF_HOUSING + 8.0) * car.spin, car.spin, 51.0, 18.0, 48),
    ]
    cuts += [_upper_slot(car), _rod_slot(car), drum(car["lower_arm.ball_joint"], UP, 27.0, 34.0, 40)]
    for radius, angle in CALIPER_BOLTS:
        lug = car.on_wheel(CALIPER_FACE, radius, angle)
        cuts += [
            drum(lug + 10.0 * car.spin, car.spin, 16.0, 20.0, 24),
            drum(lug - 22.0 * car.spin, car.spin, 12.0, 20.0, 24),
        ]
    upper, rod = car["upper_arm.ball_joint"], car["tie_rod.outboard"]
    bolted = [
        joint_bolt(upper, car.arm_normal("upper_arm"), UPPER_BALL, UPPER_JAW, JAW_PLATE, 5.0),
        joint_bolt(rod, rod_axis(car), ROD_BALL, ROD_JAW, JAW_PLATE - 1.0, 4.5),
        *_lower_stud(car),
    ]
    for radius, angle in CALIPER_BOLTS:
        bolted.append(hexagon(car.on_wheel(CALIPER_FACE - 15.0, radius, angle), car.spin, 15.0, 6.5))
    return together([solid - together(cuts), *bolted])


def _blank(car: Car) -> Manifold:
    """The raw casting: bearing housing, two legs to each ball joint, steering arm, caliper ears."""
    middle, spin = car.hub + HOUSING * car.spin, car.spin
    upper, lower, rod = car["upper_arm.ball_joint"], car["lower_arm.ball_joint"], car["tie_rod.outboard"]
    top, foot = upper + 17.0 * spin, lower + 28.0 * UP
    fields: list[Field] = [cheese(middle, spin, 55.0, HALF_HOUSING + 1.0, 5.0)]
    for side in (-1.0, 1.0):
        fields.append(limb(middle + 37.0 * side * AHEAD + 26.0 * UP, top + 9.0 * side * AHEAD - 22.0 * UP, 13.5, 10.5))
        fields.append(limb(middle + 36.0 * side * AHEAD - 26.0 * UP, foot + 8.0 * side * AHEAD + 2.0 * UP, 14.0, 12.0))
    # thin webs between the legs
    for end in (top - 14.0 * UP, foot):
        lean = frame_along(spin, end - middle)
        fields.append(cushion((end + middle) / 2.0, (27.0, 0.5 * float(np.linalg.norm(end - middle)), 5.0), lean, 4.0))
    normal = car.arm_normal("upper_arm")
    jaws = UPPER_JAW + JAW_PLATE
    fields.append(cushion(upper + 7.0 * spin, (16.5, 23.0, jaws), frame_along(normal, spin), 4.0))
    fields.append(limb(foot - 9.0 * UP, foot + 4.0 * UP, 17.5, 15.0))
    axis = rod_axis(car)
    knee = rod - 34.0 * AHEAD
    fields.append(limb(middle + 40.0 * AHEAD - 24.0 * UP, knee, 15.0, 14.0))
    fields.append(limb(knee, rod - 26.0 * AHEAD, 14.0, 13.0))
    fields.append(
        cushion(rod - 8.0 * AHEAD, (22.5, 14.0, ROD_JAW + JAW_PLATE - 1.0), frame_along(axis, (0, 1, 0)), 4.0)
    )
    for (radius, angle), root in zip(CALIPER_BOLTS, (-104.0, -76.0), strict=True):
        ear = car.on_wheel(CALIPER_FACE - 6.0, radius, angle)
        fields.append(limb(car.on_wheel(HOUSING + 2.0, 42.0, root), ear, 12.5, 10.0))
        fields.append(cheese(ear, spin, 12.5, 7.5, 2.5))
    # windows between the legs, as round-edged as the rest
    windows = [
        limb(
            middle + 0.60 * (top - 14.0 * UP - middle) - 40.0 * spin,
            middle + 0.60 * (top - 14.0 * UP - middle) + 40.0 * spin,
            9.0,
            9.0,
        ),
    ]
    return cast(hollowed(flowing(11.0, *fields), 7.0, *windows), (-140, 555, 150), (125, 665, 440), KNUCKLE_CELL)


def _upper_slot(car: Car) -> Manifold:
    """Room for the upper arm's end between the knuckle's jaws, open inboard and to the sides."""
    ball, normal = car["upper_arm.ball_joint"], car.arm_normal("upper_arm")
    inboard = ball - 60.0 * unit(car.spin - normal * (car.spin @ normal))
    return skin(
        drum(ball, normal, 20.5, 2.0 * UPPER_JAW, 48), block(inboard, (130.0, 40.0, 2.0 * UPPER_JAW), normal, car.spin)
    )


def _rod_slot(car: Car) -> Manifold:
    """Room for the tie rod's eye between the steering arm's jaws, and for its shank on full lock."""
    rod, axis, high = car["tie_rod.outboard"], rod_axis(car), 2.0 * ROD_JAW
    eye = skin(drum(rod, axis, 17.0, high, 40), block(rod + 50.0 * AHEAD, (100.0, 40.0, high), axis, AHEAD))
    on_lock = rod + [-20.0, -36.0, 0.0]
    return eye + skin(drum(rod, axis, 10.0, high), drum(on_lock, axis, 10.0, high))


def _lower_stud(car: Car) -> list[Manifold]:
    """The lower joint's ball and the stud by which the knuckle stands on it."""
    ball = car["lower_arm.ball_joint"]
    pieces = [globe(ball, LOWER_BALL, 24), bar(ball + 8.0 * UP, ball + 24.0 * UP, 7.0, 9.0)]
    return [*pieces, bevelled(ball + 18.0 * UP, UP, 13.0, 5.0)]


def caliper(car: Car) -> Manifold:
    """A four-piston caliper behind the axle: two halves over the disc, pads between them."""
    spin = car.spin
    back = unit(car.on_wheel(0.0, 1.0, -90.0) - car.hub)
    fields: list[Field] = [saddle(car.hub, spin, back, (88.0, 138.0), (CALIPER_FACE + 4.0, 24.0), 37.0, 7.0)]
    for angle in (-105.0, -75.0):
        for along in (CALIPER_FACE + 7.0, 21.0):
            fields.append(cheese(car.on_wheel(along, 112.0, angle), spin, 17.0, 9.0, 3.0))
    for radius, angle in CALIPER_BOLTS:
        fields.append(cheese(car.on_wheel(CALIPER_FACE + 7.0, radius, angle), spin, 13.0, 9.0, 3.0))
    solid = cast(flowing(7.0, *fields), (-150, 595, 190), (-50, 705, 355), CALIPER_CELL)
    slot = [(-13.5, 40.0), (-13.5, 130.5), (5.5, 130.5), (5.5, 40.0)]
    window = [(-24.0, 40.0), (-24.0, 150.0), (16.0, 150.0), (16.0, 40.0)]
    sector = skin(*(car_sector(car, angle, 200.0) for angle in (-99.0, -81.0)))
    solid = solid - turned(slot, car.hub, spin, 96) - (turned(window, car.hub, spin, 72) ^ sector)
    solid -= drum(car.hub + (CALIPER_FACE - 20.0) * spin, spin, 190.0, 40.0, 24) ^ together(
        [drum(car.on_wheel(CALIPER_FACE - 20.0, radius, angle), spin, 12.0, 40.0) for radius, angle in CALIPER_BOLTS]
    )
    pieces = [solid]
    for low, high in ((-13.8, -9.5), (1.5, 5.8)):
        plate = [(low, 90.0), (low, 124.0), (high, 124.0), (high, 90.0)]
        pieces.append(
            turned(plate, car.hub, spin, 60) ^ skin(*(car_sector(car, angle, 200.0) for angle in (-114.0, -66.0)))
        )
    for along in (-19.0, 10.5):
        for angle in (-117.0, -63.0):
            pieces.append(
                hexagon(car.on_wheel(along, 138.7, angle), car.on_wheel(0.0, 1.0, angle) - car.hub, 10.0, 5.0)
            )
    return together(pieces)


def car_sector(car: Car, angle: float, reach: float) -> Manifold:
    """A thin plate through the axle at an angle: hulls of two make a sector."""
    out: Array = unit(car.on_wheel(0.0, 1.0, angle) - car.hub)
    return block(car.hub + 0.5 * reach * out, (0.2, 200.0, reach), out, car.spin)
