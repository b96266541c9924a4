"""The demo's arms, tie rod and rack end: tubes with spherical joints at their ends.

Needed only to make the demo's meshes again (``make_demo.py``); the program itself never imports this.
"""

from __future__ import annotations

import numpy as np
from manifold3d import Manifold

from knucklepath.assets.demo_car import Car
from knucklepath.assets.modelling import (
    PLAY_MM,
    UP,
    Array,
    bar,
    bevelled,
    block,
    drum,
    globe,
    hexagon,
    joint_bolt,
    race,
    skin,
    together,
    unit,
)

#: Radius of the balls, mm: arm pivots, upper and lower ball joint, tie rod.
PIVOT_BALL, UPPER_BALL, LOWER_BALL, ROD_BALL = 10.0, 11.0, 13.0, 9.0
#: Half the room between a fork's jaws, mm: arm pivots, upper ball joint, tie rod.
PIVOT_JAW, UPPER_JAW, ROD_JAW = 17.0, 13.0, 12.0


def _leg(car: Car, arm: str, pivot: str, radius: float, stop: float) -> tuple[list[Manifold], Manifold]:
    """A tube from a bearing housing at a pivot to so far from the ball joint; and what the bearing takes away."""
    at, ball = car[f"{arm}.{pivot}"], car[f"{arm}.ball_joint"]
    axis = car[f"{arm}.front_pivot"] - car[f"{arm}.rear_pivot"]
    along = unit(ball - at)
    ring, hole = race(at, axis, PIVOT_BALL, 16.0, 15.0)
    neck = skin(drum(at + 9.0 * along, axis, 4.5, 8.0), drum(at + 38.0 * along, along, 0.8 * radius, 2.0))
    pieces = [ring, neck, hexagon(at + 42.0 * along, along, 2.05 * radius, 8.0)]
    pieces.append(bar(at + 45.0 * along, at + 57.0 * along, 0.85 * radius, 0.98 * radius))
    pieces.append(bar(at + 55.5 * along, ball - stop * along, radius))
    return pieces, hole


def upper_arm(car: Car) -> Manifold:
    """Two tubes that meet in a forged end with a spherical bearing, which the knuckle's fork takes."""
    ball, normal = car["upper_arm.ball_joint"], car.arm_normal("upper_arm")
    ring, hole = race(ball, normal, UPPER_BALL, 17.0, 14.0)
    pieces, holes, roots = [ring], [hole], []
    for pivot in ("front_pivot", "rear_pivot"):
        tube, taken = _leg(car, "upper_arm", pivot, 9.0, 52.0)
        pieces += tube
        holes.append(taken)
        along = unit(car[f"upper_arm.{pivot}"] - ball)
        roots.append(ball + 46.0 * along)
        pieces.append(skin(drum(ball + 11.0 * along, normal, 9.0, 12.0), drum(ball + 56.0 * along, along, 9.4, 3.0)))
    pieces.append(skin(drum(ball, normal, 12.0, 7.0), *(drum(root, normal, 6.0, 7.0) for root in roots)))
    return together(pieces) - together(holes)


def lower_arm(car: Car) -> Manifold:
    """Two tubes into a welded ball-joint cup, a pierced gusset between them, and a braced lug for the spring."""
    ball, normal = car["lower_arm.ball_joint"], car.arm_normal("lower_arm")
    pieces = [bevelled(ball - 2.0 * normal, normal, 19.0, 27.0, 1.6), bevelled(ball - 17.5 * normal, normal, 14.0, 6.0)]
    holes = [globe(ball, LOWER_BALL + PLAY_MM), bar(ball + 5.0 * normal, ball + 30.0 * normal, 11.0, 30.0)]
    reach = []
    for pivot in ("front_pivot", "rear_pivot"):
        tube, taken = _leg(car, "lower_arm", pivot, 11.0, 15.0)
        pieces += tube
        holes.append(taken)
        reach.append(ball + 150.0 * unit(car[f"lower_arm.{pivot}"] - ball))
    gusset = skin(drum(ball, normal, 10.0, 5.0), *(drum(at, normal, 7.0, 5.0) for at in reach))
    middle = (reach[0] + reach[1]) / 2.0
    for share, radius in ((0.80, 17.0), (0.48, 10.0)):
        gusset -= drum(ball + share * (middle - ball), normal, radius, 20.0, 36)
    return together([*pieces, gusset, *_spring_lug(car)]) - together([*holes, _lug_hole(car)])


def _spring_lug(car: Car) -> list[Manifold]:
    """A cross tube under the spring, and two plates that hold its eye."""
    ball, foot = car["lower_arm.ball_joint"], car["spring.moving"]
    ends = []
    for pivot in ("front_pivot", "rear_pivot"):
        at = car[f"lower_arm.{pivot}"]
        ends.append(at + (ball - at) * (foot[1] - 12.0 - at[1]) / (ball[1] - at[1]))
    middle = ends[0] + (ends[1] - ends[0]) * (foot[0] - ends[0][0]) / (ends[1][0] - ends[0][0])
    pieces = [bar(ends[0], ends[1], 9.0)]
    for side in (-1.0, 1.0):
        shift = np.array([side * 15.0, 0.0, 0.0])
        root = middle + shift
        pieces.append(
            skin(
                drum(foot + shift, (1, 0, 0), 11.0, 5.0),
                *(drum(root + [0.0, y, 2.0], (1, 0, 0), 7.0, 5.0) for y in (-16.0, 14.0)),
            )
        )
    return [*pieces, drum(foot, (1, 0, 0), 5.0, 44.0, 20), hexagon(foot + [21.0, 0.0, 0.0], (1, 0, 0), 15.0, 6.0)]


def _lug_hole(car: Car) -> Manifold:
    """A lightening hole across the lug's plates."""
    return drum(car["spring.moving"] + [0.0, -11.0, -14.0], (1, 0, 0), 3.5, 80.0, 20)


def tie_rod(car: Car) -> Manifold:
    """A tube with a rod end and its lock nut at each end."""
    inboard, outboard = car["tie_rod.inboard"], car["tie_rod.outboard"]
    along = unit(outboard - inboard)
    pieces, holes = [bar(inboard + 58.0 * along, outboard - 58.0 * along, 9.0)], []
    for end, inward in ((inboard, along), (outboard, -along)):
        ring, hole = race(end, rod_axis(car), ROD_BALL, 13.5, 12.0)
        pieces += [
            ring,
            skin(drum(end + 10.0 * inward, rod_axis(car), 5.0, 9.0), drum(end + 24.0 * inward, inward, 6.5, 2.0)),
        ]
        pieces += [bar(end + 20.0 * inward, end + 50.0 * inward, 5.5), hexagon(end + 40.0 * inward, inward, 17.0, 6.0)]
        pieces += [
            bar(end + 46.0 * inward, end + 59.0 * inward, 7.0, 9.0),
            hexagon(end + 47.5 * inward, inward, 16.0, 6.0),
        ]
        holes.append(hole)
    return together(pieces) - together(holes)


def rod_axis(car: Car) -> Array:
    """Axis of the tie rod's eyes: upright, square to the rod."""
    along = unit(car["tie_rod.outboard"] - car["tie_rod.inboard"])
    return unit(UP - along * along[2])


def rack_end(car: Car) -> Manifold:
    """The rack's bar and the fork that takes the tie rod."""
    end, axis = car["tie_rod.inboard"], rod_axis(car)
    inward = np.array([0.0, -1.0, 0.0])
    jaws = skin(
        drum(end, axis, 11.0, 2.0 * ROD_JAW + 10.0),
        block(end + 25.0 * inward, (22.0, 10.0, 2.0 * ROD_JAW + 10.0), axis, inward),
    )
    jaws -= skin(
        drum(end, axis, 17.0, 2.0 * ROD_JAW), block(end + [0.0, 40.0, 0.0], (80.0, 40.0, 2.0 * ROD_JAW), axis, inward)
    )
    pieces = [
        jaws,
        bar(end + 26.0 * inward, end + 205.0 * inward, 12.0),
        hexagon(end + 33.0 * inward, inward, 26.0, 8.0),
    ]
    return together([*pieces, joint_bolt(end, axis, ROD_BALL, ROD_JAW, 5.0, 4.5)])
