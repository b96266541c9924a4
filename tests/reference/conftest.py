"""Corners from published geometry, shared by the outside checks. All lengths in mm, x forward, y left, z up.

A planar mechanism (published in a picture plane, X to the right and Y up) becomes a corner by extrusion: X is
the car's y, Y its z, both pivots of an arm lie on a fore-aft axis, and the tie rod is a copy of the lower arm
set off along x, which holds the knuckle without changing the planar motion.
"""

from __future__ import annotations

import importlib.util
from collections.abc import Callable

import numpy as np
import pytest
from numpy.typing import NDArray

from knucklepath.kinematics.motion import Motion, solve_motion
from knucklepath.kinematics.wheel import Corner, Wheel
from knucklepath.plugins.layouts import double_a_arm, five_link, strut

Array = NDArray[np.float64]

#: Half the fore-aft spread of the pivots of an extruded arm, and where its tie rod runs.
SPREAD = 150.0
TIE_ROD_X = -120.0


def turned(angle: float, local: Array) -> Array:
    """A planar vector (2,) turned by an angle."""
    c, s = np.cos(angle), np.sin(angle)
    return np.array([c * local[0] - s * local[1], s * local[0] + c * local[1]])


def extruded(planar: Array, x: float = 0.0) -> tuple[float, float, float]:
    """A point (2,) of the picture plane, in metres, as a point of the car in mm."""
    return (x, 1000.0 * float(planar[0]), 1000.0 * float(planar[1]))


def extruded_arm(table: str, pivot: Array, ball: Array) -> dict[str, tuple[float, float, float]]:
    return {
        f"{table}.front_pivot": extruded(pivot, SPREAD),
        f"{table}.rear_pivot": extruded(pivot, -SPREAD),
        f"{table}.ball_joint": extruded(ball),
    }


def extruded_tie_rod(pivot: Array, ball: Array) -> dict[str, tuple[float, float, float]]:
    return {"tie_rod.inboard": extruded(pivot, TIE_ROD_X), "tie_rod.outboard": extruded(ball, TIE_ROD_X)}


@pytest.fixture
def planar_double_a_arm() -> tuple[Corner, dict[str, float]]:
    """The extruded planar double A-arm, assembled at a lower-arm angle that is not the published one.

    P. E. Nikravesh, Planar Multibody Dynamics, 2nd ed., CRC Press 2018, model "AA" (the printed page was not
    seen). Also returns each body's angle (rad) at the design position.
    """
    lower_pivot, upper_pivot = np.array([0.20, 0.26]), np.array([0.32, 0.40])
    knuckle_a, knuckle_b = np.array([-0.07, -0.10]), np.array([-0.10, 0.12])
    lower = 0.06
    a = lower_pivot + turned(lower, np.array([0.24 + 0.18, 0.0]))
    # B is where the circle of the knuckle about A meets the circle of the upper arm about its pivot, outboard
    radius_a, radius_o = float(np.linalg.norm(knuckle_b - knuckle_a)), 0.26
    between = a - upper_pivot
    apart = float(np.linalg.norm(between))
    along = (radius_o**2 - radius_a**2 + apart**2) / (2.0 * apart)
    across = np.sqrt(radius_o**2 - along**2)
    unit = between / apart
    b = upper_pivot + along * unit + across * np.array([-unit[1], unit[0]])
    knuckle = float(np.arctan2(*(b - a)[::-1]) - np.arctan2(*(knuckle_b - knuckle_a)[::-1]))
    upper = float(np.arctan2(*(b - upper_pivot)[::-1]))
    centre = a - turned(knuckle, knuckle_a)
    points = {
        **extruded_arm("lower_arm", lower_pivot, a),
        **extruded_arm("upper_arm", upper_pivot, b),
        **extruded_tie_rod(lower_pivot, a),
        "wheel.centre": extruded(centre),
    }
    wheel = Wheel(np.array(points["wheel.centre"]), loaded_radius=300.0)
    layout = double_a_arm.LAYOUT
    corner = Corner(layout.mechanism(points), wheel, steering_axis=layout.steering_axis)
    return corner, {"lower_arm": lower, "upper_arm": upper, "knuckle": knuckle}


@pytest.fixture
def planar_strut() -> tuple[Corner, dict[str, float]]:
    """The extruded planar strut, assembled at an arm angle that is not the published one.

    P. E. Nikravesh, Planar Multibody Dynamics, 2nd ed., CRC Press 2018, model "MP_A" (the printed page was not
    seen). Also returns each body's angle (rad) at the design position.
    """
    top, pivot = np.array([0.41, 0.83]), np.array([0.12, 0.29])
    knuckle_a, knuckle_b = np.array([0.0, -0.07]), np.array([-0.17, 0.25])
    slide = np.array([0.47, -0.88]) / np.hypot(0.47, 0.88)
    arm = 0.09
    a = pivot + turned(arm, np.array([0.45, 0.0]))
    # A keeps its distance from the slide axis, which always runs through the top mount
    offset = knuckle_a - knuckle_b
    distance = slide[0] * offset[1] - slide[1] * offset[0]
    from_top = a - top
    heading = np.arctan2(from_top[1], from_top[0]) - np.arcsin(distance / np.linalg.norm(from_top))
    knuckle = float(heading - np.arctan2(slide[1], slide[0]))
    centre = a - turned(knuckle, knuckle_a)
    points = {
        **extruded_arm("lower_arm", pivot, a),
        **extruded_tie_rod(pivot, a),
        "strut.top_mount": extruded(top),
        "strut.axis_lower": extruded(centre + turned(knuckle, knuckle_b)),
        "wheel.centre": extruded(centre),
    }
    wheel = Wheel(np.array(points["wheel.centre"]), loaded_radius=300.0)
    layout = strut.LAYOUT
    corner = Corner(layout.mechanism(points), wheel, steering_axis=layout.steering_axis)
    return corner, {"lower_arm": arm, "knuckle": knuckle}


@pytest.fixture
def at_turn() -> Callable[[Corner, str, float], Motion]:
    """Bring a body of a planar corner to a given turn (rad about x, from design), by Newton on the travel."""

    def find(corner: Corner, body: str, turn: float) -> Motion:
        travel = 0.0
        for _ in range(12):
            motion = solve_motion(corner, travel)
            error = float(turn_about_x(motion, body)) - turn
            if abs(error) < 1e-14:
                break
            travel -= error / float(motion.twist(body)[0])
        assert abs(error) < 1e-12
        return motion

    return find


def turn_about_x(motion: Motion, body: str) -> Array:
    """Turn (...) of a body of a planar corner about x, rad; fails where the body leaves its plane."""
    rotation = motion.rotation(body)
    np.testing.assert_allclose(rotation[..., 0, 0], 1.0, atol=1e-12)
    return np.asarray(np.arctan2(rotation[..., 2, 1], rotation[..., 1, 1]))


@pytest.fixture(name="turn_about_x")
def turn_about_x_fixture() -> Callable[[Motion, str], Array]:
    return turn_about_x


ROAD_VEHICLE_POINTS = {
    "lower_arm.rear_pivot": (-251.0, 320.0, -80.0),
    "lower_arm.front_pivot": (148.0, 320.0, -94.0),
    "lower_arm.ball_joint": (13.0, 737.0, -145.0),
    "upper_arm.rear_pivot": (-105.0, 435.0, 196.0),
    "upper_arm.front_pivot": (122.0, 435.0, 230.0),
    "upper_arm.ball_joint": (-25.0, 680.0, 162.0),
    "tie_rod.inboard": (-150.0, 380.0, -38.0),
    "tie_rod.outboard": (-137.0, 690.0, -88.0),
    "wheel.centre": (0.0, 768.0, 0.0),
}


@pytest.fixture
def spatial_double_a_arm() -> Corner:
    """A double A-arm with rack, left wheel.

    G. Rill and A. A. Castro, Road Vehicle Dynamics: Fundamentals and Modeling with MATLAB, 2nd ed., CRC Press
    2020, ch. 5 (attribution from memory). Its spin axis runs along (0, 1, −0.8° in rad).
    """
    lean = float(np.degrees(np.arctan(np.radians(0.8))))
    wheel = Wheel(np.array(ROAD_VEHICLE_POINTS["wheel.centre"]), loaded_radius=285.0, camber_deg=lean)
    layout = double_a_arm.LAYOUT
    return Corner(layout.mechanism(ROAD_VEHICLE_POINTS), wheel, steering_axis=layout.steering_axis)


@pytest.fixture
def spatial_double_a_arm_as_five_links(spatial_double_a_arm: Corner) -> Corner:
    """The same corner with a link in the place of every arm leg."""
    given = spatial_double_a_arm.mechanism.points
    points = {"wheel.centre": given["wheel.centre"]}
    for arm in ("upper", "lower"):
        for end in ("front", "rear"):
            points[f"{arm}_{end}.inboard"] = given[f"{arm}_arm.{end}_pivot"]
            points[f"{arm}_{end}.outboard"] = given[f"{arm}_arm.ball_joint"]
    for end in ("inboard", "outboard"):
        points[f"toe_link.{end}"] = given[f"tie_rod.{end}"]
    return Corner(five_link.LAYOUT.mechanism(points), spatial_double_a_arm.wheel)


#: The CAD kernel is a large package, in the extra "oracle"; without it its checks are not collected.
collect_ignore = [] if importlib.util.find_spec("OCP") else ["test_opencascade.py"]
