"""A four-bar linkage, the screw of a displacement, and the count of freedoms.

Sources: R. L. Norton, Design of Machinery, ch. 4 (from memory; recomputed with Freudenstein's equation): both
assemblies of one linkage. F. Freudenstein's equation (1955; from memory). K. M. Lynch and F. C. Park, Modern
Robotics, 2017 (from memory): the screw of a planar displacement; the authors' package ``modern_robotics`` takes the
logarithms. M. Grübler and K. Kutzbach's count (from memory).
"""

from __future__ import annotations

import modern_robotics
import numpy as np
import pytest
from numpy.typing import NDArray

from knucklepath.kinematics.audit import mobility
from knucklepath.kinematics.closure import Closure, pose_frames
from knucklepath.kinematics.following import solve, trace_curve
from knucklepath.kinematics.frames import rotation_from_vector, rotation_vector, screw_axis
from knucklepath.kinematics.mechanism import (
    Body,
    CoordinateInput,
    Hinge,
    HingedBody,
    Input,
    Joint,
    Mechanism,
    PointOnLine,
    Rod,
)
from knucklepath.kinematics.motion import solve_motion
from knucklepath.kinematics.wheel import Corner, Wheel
from knucklepath.plugins.layouts import five_link, semi_trailing_arm

Array = NDArray[np.float64]

CRANK, COUPLER, ROCKER, GROUND = 40.0, 120.0, 80.0, 100.0
DRIVEN: tuple[Input, ...] = (CoordinateInput("crank", "crank"),)


def four_bar(branch: str, coupler: str = "rod", inputs: tuple[Input, ...] = DRIVEN) -> Mechanism:
    """The linkage with its crank at a right angle, in the plane z = 0 (every axis along z).

    ``coupler`` is "rod" (a distance), "pin on line" (a body on the crank whose far point stays on the rocker's pin) or
    "hinge" (five equations, of which a planar linkage needs two).
    """
    crank_pin = np.array([0.0, CRANK])
    rocker_pivot = np.array([GROUND, 0.0])
    across = rocker_pivot - crank_pin
    apart = np.hypot(*across)
    along = (COUPLER**2 - ROCKER**2 + apart**2) / (2.0 * apart)
    height = np.sqrt(COUPLER**2 - along**2) * (1.0 if branch == "open" else -1.0)
    rocker_pin = crank_pin + (along * across + height * np.array([-across[1], across[0]])) / apart
    points: dict[str, Array] = {}
    for name, at in (
        ("crank_pivot", np.zeros(2)),
        ("crank_pin", crank_pin),
        ("rocker_pin", rocker_pin),
        ("rocker_pivot", rocker_pivot),
    ):
        points[name] = np.append(at, 0.0)
        points[f"{name}.above"] = np.append(at, 10.0)
    bodies: list[Body] = [
        HingedBody("crank", ("crank_pivot", "crank_pivot.above")),
        HingedBody("rocker", ("rocker_pivot", "rocker_pivot.above")),
    ]
    joint: Joint = Rod("coupler", "crank", "crank_pin", "rocker", "rocker_pin")
    pin = ("rocker_pin", "rocker_pin.above")
    if coupler != "rod":
        bodies.append(HingedBody("coupler", ("crank_pin", "crank_pin.above"), parent="crank"))
        joint = PointOnLine("pin", "coupler", "rocker_pin", "rocker", pin)
    if coupler == "hinge":
        joint = Hinge("pin", "coupler", "rocker", pin)
    return Mechanism(tuple(bodies), (joint,), inputs, points)


def link_angles(mechanism: Mechanism, crank: Array) -> tuple[Array, Array]:
    """Angles (rad) of coupler and rocker to the ground link, for crank angles (rad)."""
    solution = solve(mechanism, {"crank": crank - np.pi / 2.0})
    assert solution.reached.all()
    frames = pose_frames(solution.closure, solution.state)
    points = {name: point[:, None] for name, point in mechanism.points.items()}
    crank_pin = frames["crank"].locate(points["crank_pin"])
    coupler = frames["coupler"].locate(points["rocker_pin"]) - crank_pin
    rocker = frames["rocker"].locate(points["rocker_pin"]) - points["rocker_pivot"]
    return np.arctan2(coupler[1], coupler[0]), np.arctan2(rocker[1], rocker[0])


@pytest.mark.parametrize("coupler", ["rod", "pin on line"])
@pytest.mark.parametrize(
    ("branch", "coupler_angle", "rocker_angle"), [("open", 20.298, 57.325), ("crossed", -60.978, -98.005)]
)
def test_both_assemblies_of_the_four_bar(coupler: str, branch: str, coupler_angle: float, rocker_angle: float) -> None:
    third, fourth = link_angles(four_bar(branch, coupler), np.radians([40.0]))
    assert np.degrees(third[0]) == pytest.approx(coupler_angle, abs=0.501e-3)
    assert np.degrees(fourth[0]) == pytest.approx(rocker_angle, abs=0.501e-3)


@pytest.mark.parametrize("branch", ["open", "crossed"])
def test_a_whole_turn_of_the_crank_keeps_freudensteins_equation(branch: str) -> None:
    crank = np.radians(np.linspace(-90.0, 270.0, 361))
    _, rocker = link_angles(four_bar(branch), crank)
    first, second = GROUND / CRANK, GROUND / ROCKER
    third = (CRANK**2 - COUPLER**2 + ROCKER**2 + GROUND**2) / (2.0 * CRANK * ROCKER)
    np.testing.assert_allclose(
        first * np.cos(rocker) - second * np.cos(crank) + third, np.cos(crank - rocker), rtol=0.0, atol=1e-11
    )


@pytest.mark.parametrize("branch", ["open", "crossed"])
def test_the_free_linkage_closes_after_one_turn_of_its_crank(branch: str) -> None:
    # F. Grashof's condition (from memory): shortest + longest < the other two, so the crank beside the ground turns
    # fully and the rocker swings back to where it was.
    assert CRANK + COUPLER < ROCKER + GROUND
    mechanism = four_bar(branch, inputs=())
    closure = Closure(mechanism)
    curve, _, closed = trace_curve(mechanism, closure.tree.design(1), step=2.0)
    assert closed
    assert abs(curve.scalars[0, -1]) == pytest.approx(2.0 * np.pi, abs=2.0 * 2.0 / CRANK)
    assert np.ptp(curve.scalars[1]) < np.pi


def test_the_screw_of_a_planar_displacement() -> None:
    begin, end = np.eye(4), np.eye(4)
    begin[:3, :3], begin[:3, 3] = rotation_from_vector(np.array([0.0, 0.0, np.radians(30.0)])), (1.0, 2.0, 0.0)
    end[:3, :3], end[:3, 3] = rotation_from_vector(np.array([0.0, 0.0, np.radians(60.0)])), (2.0, 1.0, 0.0)
    logarithm = modern_robotics.se3ToVec(modern_robotics.MatrixLog6(end @ np.linalg.inv(begin)))
    angle = np.linalg.norm(logarithm[:3])
    np.testing.assert_allclose(logarithm / angle, [0.0, 0.0, 1.0, 3.3660, -3.3660, 0.0], atol=0.51e-4)
    assert angle == pytest.approx(np.pi / 6.0, abs=1e-12)
    axis = screw_axis(logarithm[:3], logarithm[3:], np.zeros(3))
    np.testing.assert_allclose(axis.point, [3.3660, 3.3660, 0.0], atol=0.51e-4)
    np.testing.assert_allclose(axis.direction, [0.0, 0.0, 1.0], atol=1e-12)
    assert axis.pitch_mm_per_rad == pytest.approx(0.0, abs=1e-12)
    # turning about that axis by that angle is the displacement
    turn = rotation_from_vector(axis.direction * angle)
    np.testing.assert_allclose(turn @ begin[:3, :3], end[:3, :3], atol=1e-12)
    np.testing.assert_allclose(turn @ (begin[:3, 3] - axis.point) + axis.point, end[:3, 3], atol=1e-12)


@pytest.mark.parametrize("angle", [1e-5, 0.3, 1.7, 3.0])
@pytest.mark.parametrize("axis", [(0.0, 0.0, 1.0), (0.6, 0.8, 0.0), (-0.48, 0.6, 0.64)])
def test_rotations_and_their_logarithms_agree_with_the_package(axis: tuple[float, ...], angle: float) -> None:
    vector = angle * np.array(axis)
    rotation = rotation_from_vector(vector)
    np.testing.assert_allclose(
        rotation, modern_robotics.MatrixExp3(modern_robotics.VecToso3(vector)), rtol=0.0, atol=1e-14
    )
    logarithm = modern_robotics.so3ToVec(modern_robotics.MatrixLog3(rotation))
    # the package takes the angle from its cosine, which costs it digits where the sine is small
    np.testing.assert_allclose(rotation_vector(rotation), logarithm, rtol=0.0, atol=2e-14 / np.sin(angle))
    np.testing.assert_allclose(rotation_vector(rotation), vector, rtol=0.0, atol=1e-14)


@pytest.mark.parametrize(
    "twist",
    [(0.3, -0.2, 0.9, 12.0, 40.0, -7.0), (0.0, 0.02, 0.0, -3.0, 500.0, 80.0), (-1.1, 0.4, 0.7, 0.0, 0.0, 250.0)],
)
def test_a_screw_axis_is_where_the_exponential_of_its_twist_only_slides(twist: tuple[float, ...]) -> None:
    array = np.array(twist)
    displaced = modern_robotics.MatrixExp6(modern_robotics.VecTose3(array))
    axis = screw_axis(array[:3], array[3:], np.zeros(3))
    advance = axis.pitch_mm_per_rad * axis.rate * axis.direction
    for along in (-300.0, 0.0, 450.0):
        point = axis.point + along * axis.direction
        np.testing.assert_allclose(displaced[:3, :3] @ point + displaced[:3, 3], point + advance, atol=1e-9)
    np.testing.assert_allclose(displaced[:3, :3], rotation_from_vector(array[:3]), atol=1e-13)


def test_the_logarithm_of_a_solved_arm_is_a_turn_about_its_instant_axis() -> None:
    layout = semi_trailing_arm.LAYOUT
    wheel = Wheel(np.array(layout.example["wheel.centre"]), loaded_radius=300.0)
    corner = Corner(layout.mechanism(layout.example), wheel, carrier="arm", axle="rear")
    motion = solve_motion(corner, np.array([-90.0, -30.0, 45.0, 110.0]))
    screw = motion.screw()
    for k, matrix in enumerate(motion.matrix("arm")):
        logarithm = modern_robotics.se3ToVec(modern_robotics.MatrixLog6(matrix))
        centre = motion.point("wheel", wheel.centre)[k]
        finite = screw_axis(logarithm[:3], logarithm[3:] + np.cross(logarithm[:3], centre), centre)
        sign = np.sign(finite.direction @ screw.direction[k])
        np.testing.assert_allclose(finite.direction * sign, screw.direction[k], atol=1e-12)
        np.testing.assert_allclose(finite.point, screw.point[k], atol=1e-9)
        assert finite.pitch_mm_per_rad == pytest.approx(0.0, abs=1e-9)


def test_the_count_of_a_five_link_is_one_freedom_and_five_idle_spins() -> None:
    # 7 bodies, 10 ball joints of 3 freedoms: 6(7 − 1 − 10) + 30 = 6
    layout = five_link.LAYOUT
    fixed = mobility(layout.mechanism(layout.example, steered=False))
    assert 6 * (7 - 1 - 10) + 30 == 6 == fixed.by_count + fixed.idle_spins
    assert (fixed.by_count, fixed.by_rank, fixed.idle_spins) == (1, 1, 5)
    steered = mobility(layout.mechanism(layout.example))
    assert (steered.by_count, steered.by_rank, steered.idle_spins) == (2, 2, 5)


def test_the_count_is_wrong_for_a_planar_linkage_in_space_and_the_rank_is_right() -> None:
    # 4 bodies, 4 hinges: 6(4 − 1 − 4) + 4 = −2, although the linkage moves; the classic exception to the count
    counted = mobility(four_bar("open", "hinge"))
    assert (counted.by_count, counted.by_rank) == (-2, 1)
