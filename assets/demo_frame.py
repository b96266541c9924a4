"""The demo's piece of chassis: the left half of a tubular front frame, and the bodywork stay that comes too near.

Needed only to make the demo's meshes again (``make_demo.py``); the program itself never imports this.
"""

from __future__ import annotations

import numpy as np
from manifold3d import Manifold

from knucklepath.assets.demo_car import Car
from knucklepath.assets.demo_links import PIVOT_BALL, PIVOT_JAW
from knucklepath.assets.modelling import (
    UP,
    Array,
    bar,
    bevelled,
    block,
    drum,
    globe,
    hexagon,
    joint_bolt,
    skin,
    together,
    unit,
)

#: The rails' ends, front and rear, mm.
LOWER_RAIL = (np.array([262.0, 188.0, 172.0]), np.array([-335.0, 198.0, 158.0]))
UPPER_RAIL = (np.array([232.0, 312.0, 398.0]), np.array([-335.0, 304.0, 336.0]))
#: Where the frame's hoops stand, x, mm.
HOOPS = (212.0, -60.0, -300.0)
RAIL_RADIUS, HOOP_RADIUS, BRACE_RADIUS = 15.0, 12.5, 10.0
#: How thick a pick-up bracket's plates are, mm.
PLATE = 5.0
#: Outer end of the bodywork stay, mm: so near the tyre that full bump with full lock is too tight.
STAY_END = np.array([226.0, 449.0, 424.0])
ACROSS = np.array([0.0, 1.0, 0.0])
AHEAD = np.array([1.0, 0.0, 0.0])


def on_rail(rail: tuple[Array, Array], x: float) -> Array:
    """The point of a rail at an x."""
    return rail[0] + (rail[1] - rail[0]) * (x - rail[0][0]) / (rail[1][0] - rail[0][0])


def front_frame(car: Car) -> Manifold:
    """Rails, hoops and braces, pick-up brackets, the spring's tower and the rack's housing; cut in the middle plane."""
    pieces = [bar(*LOWER_RAIL, RAIL_RADIUS), bar(*UPPER_RAIL, RAIL_RADIUS)]
    for rail in (LOWER_RAIL, UPPER_RAIL):
        pieces += [globe(end, RAIL_RADIUS) for end in rail]
    for x in HOOPS:
        low, high = on_rail(LOWER_RAIL, x), on_rail(UPPER_RAIL, x)
        pieces.append(bar(low, high, HOOP_RADIUS))
        pieces += [bar(at * [1.0, 0.0, 1.0], at, HOOP_RADIUS) for at in (low, high)]
    pieces.append(bar(on_rail(LOWER_RAIL, HOOPS[0]), on_rail(UPPER_RAIL, HOOPS[1]), BRACE_RADIUS))
    pieces.append(bar(on_rail(LOWER_RAIL, HOOPS[2]), on_rail(UPPER_RAIL, HOOPS[1]), BRACE_RADIUS))
    pieces.append(bar(on_rail(LOWER_RAIL, HOOPS[0]), on_rail(UPPER_RAIL, HOOPS[0]) * [1.0, 0.0, 1.0], BRACE_RADIUS))
    for arm, rail in (("upper_arm", UPPER_RAIL), ("lower_arm", LOWER_RAIL)):
        for pivot in ("front_pivot", "rear_pivot"):
            pieces += _bracket(car, arm, pivot, rail)
    pieces += _spring_tower(car)
    pieces += _rack_housing(car)
    # the rack runs in its housing, which is closed in the middle of the car
    x, end, z = car["tie_rod.inboard"]
    bore = bar([x, 14.0, z], [x, end - 40.0, z], 13.0)
    return (together(pieces) - bore).trim_by_plane((0.0, 1.0, 0.0), 0.0)


def _bracket(car: Car, arm: str, pivot: str, rail: tuple[Array, Array]) -> list[Manifold]:
    """Two plates from a rail to an arm's pivot, a foot on the rail, and the joint's ball on its bolt."""
    at = car[f"{arm}.{pivot}"]
    axis = unit(car[f"{arm}.front_pivot"] - car[f"{arm}.rear_pivot"])
    pieces = [joint_bolt(at, axis, PIVOT_BALL, PIVOT_JAW, PLATE, 4.5)]
    for side in (-1.0, 1.0):
        eye = at + side * (PIVOT_JAW + PLATE / 2.0) * axis
        root = on_rail(rail, float(eye[0]))
        spread = [root + 15.0 * side_up * UP + 2.0 * ACROSS for side_up in (-1.0, 1.0)]
        pieces.append(skin(drum(eye, axis, 10.0, PLATE), *(drum(end, axis, 4.0, PLATE) for end in spread)))
    foot = on_rail(rail, float(at[0]))
    pieces.append(block(foot + 14.0 * ACROSS, (2.0 * (PIVOT_JAW + PLATE), 34.0, 6.0), ACROSS, UP))
    return pieces


def _spring_tower(car: Car) -> list[Manifold]:
    """Two legs from the upper rail to a node inboard of the spring, a tube across the car, and the spring's plates."""
    top = car["spring.chassis"]
    node = top + [0.0, -78.0, 8.0]
    pieces = [bar(node * [1.0, 0.0, 1.0], node, HOOP_RADIUS), globe(node, HOOP_RADIUS)]
    for x in (72.0, -92.0):
        pieces.append(bar(on_rail(UPPER_RAIL, float(top[0]) + x), node, HOOP_RADIUS))
    for side in (-1.0, 1.0):
        shift = side * 18.0 * AHEAD
        root = [node + shift + z * UP for z in (-13.0, 13.0)]
        pieces.append(skin(drum(top + shift, AHEAD, 12.5, 6.0), *(drum(end, AHEAD, 6.0, 6.0) for end in root)))
        pieces.append(hexagon(top + side * 24.0 * AHEAD, AHEAD, 16.0, 6.5))
    return [*pieces, drum(top, AHEAD, 5.0, 48.0, 20), drum(node, AHEAD, 9.0, 42.0)]


def _rack_housing(car: Car) -> list[Manifold]:
    """A tube across the car with end glands, a pinion tower, and clamps on a cross tube beneath."""
    x, end, z = car["tie_rod.inboard"]
    axle = np.array([x, 0.0, z])
    stop = float(end) - 76.0
    pieces = [
        bar(axle, axle + stop * ACROSS, 19.0, segments=28),
        bevelled(axle + (stop - 9.0) * ACROSS, ACROSS, 23.0, 18.0),
    ]
    pieces.append(bevelled(axle + (stop - 24.0) * ACROSS, ACROSS, 21.0, 5.0))
    pieces += [
        skin(
            drum(axle + 30.0 * ACROSS, ACROSS, 24.0, 44.0),
            drum(axle + [-16.0, 30.0, 32.0], [-0.5, 0.0, 0.87], 17.0, 8.0),
        )
    ]
    pieces.append(bevelled(axle + [-22.0, 30.0, 42.0], [-0.5, 0.0, 0.87], 9.0, 30.0))
    beam = on_rail(LOWER_RAIL, float(x))
    pieces.append(bar(beam * [1.0, 0.0, 1.0], beam, HOOP_RADIUS))
    for y in (76.0, 134.0):
        pieces.append(
            skin(drum(axle + y * ACROSS, ACROSS, 24.5, 15.0), block([x, y, beam[2] + 4.0], (44.0, 15.0, 10.0)))
        )
        pieces += [hexagon([x + side * 17.0, y, z + 22.0], UP, 11.0, 5.0) for side in (-1.0, 1.0)]
        pieces.append(block([x, y, z + 17.0], (46.0, 15.0, 5.0)))
    return pieces


def bodywork_stay(car: Car) -> Manifold:
    """An outrigger that carries the nose's side panel: drawn without a thought of the wheel on full lock."""
    root, end = on_rail(UPPER_RAIL, 222.0), STAY_END
    knee = root + [14.0, 52.0, 22.0]
    tube = 8.0
    pieces = [
        bar(root, knee, tube),
        globe(knee, tube),
        bar(knee, end - 6.0 * unit(end - knee), tube),
        bevelled(root + 0.3 * (knee - root), knee - root, 11.0, 14.0),
    ]
    ahead = np.array([46.0, 6.0, 0.0])
    tab = skin(drum(end, UP, 14.0, 4.0), drum(end + ahead, UP, 12.0, 4.0)) - drum(end + 0.45 * ahead, UP, 6.0, 20.0, 24)
    pieces += [globe(end - 6.0 * unit(end - knee), tube), tab, bevelled(end + ahead + 3.5 * UP, UP, 8.0, 5.0)]
    return together(pieces) - drum(end + ahead, UP, 3.5, 30.0, 20)
