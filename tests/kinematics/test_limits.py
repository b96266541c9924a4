"""Joint angles, spring stroke, drive shaft and lock-up margins: facts of mechanics, and independent searches."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from knucklepath.kinematics.errors import MechanismError
from knucklepath.kinematics.limits import DriveShaft, JointLimit, check_limits, joint_bodies
from knucklepath.kinematics.motion import find_limit, solve_motion
from knucklepath.kinematics.wheel import Corner, Spring, Wheel
from knucklepath.plugins.layouts.double_a_arm import LAYOUT
from knucklepath.plugins.layouts.five_link import LAYOUT as FIVE_LINK

TRAVEL, RACK = (-50.0, 60.0), (-30.0, 30.0)
UP = np.array([0.0, 0.0, 1.0])


@pytest.fixture(scope="module")
def corner() -> Corner:
    wheel = Wheel(LAYOUT.example["wheel.centre"], 280.0, camber_deg=-1.0)
    return Corner(LAYOUT.mechanism(LAYOUT.example), wheel, steering_axis=LAYOUT.steering_axis)


def dense(corner: Corner):  # type: ignore[no-untyped-def]
    return solve_motion(corner, np.linspace(*TRAVEL, 111)[:, None], np.linspace(*RACK, 61)[None])


def test_a_joint_stands_straight_at_design_and_leans_as_the_bodies_turn_against_each_other(corner: Corner) -> None:
    limit = JointLimit("lower_arm.ball_joint", UP, 10.0)
    (still, *_) = check_limits(corner, (0.0, 0.0), (0.0, 0.0), (limit,))
    assert still.extreme == pytest.approx(0.0, abs=1e-9)
    (result, *_) = check_limits(corner, TRAVEL, RACK, (limit,))
    motion = dense(corner)
    arm, knuckle = (motion.rotation(body) @ UP for body in ("lower_arm", "knuckle"))
    leans = np.degrees(np.arccos(np.clip((arm * knuckle).sum(axis=-1), -1.0, 1.0)))
    assert result.extreme >= leans.max() - 1e-9
    assert result.extreme == pytest.approx(leans.max(), abs=0.01)
    assert not result.ok
    (wider, *_) = check_limits(corner, TRAVEL, RACK, (replace(limit, greatest_deg=result.extreme + 0.1),))
    assert wider.ok
    at = solve_motion(corner, result.travel_mm, result.rack_mm)
    lean = np.degrees(np.arccos((at.rotation("lower_arm") @ UP) @ (at.rotation("knuckle") @ UP)))
    assert lean == pytest.approx(result.extreme, abs=1e-6)


def test_a_stud_along_the_steering_axis_does_not_lean_by_steering_alone(corner: Corner) -> None:
    lower, upper = (corner.point(f"{name}.ball_joint") for name in ("lower_arm", "upper_arm"))
    axis = (upper - lower) / np.linalg.norm(upper - lower)
    joint = JointLimit("lower_arm.ball_joint", axis, 5.0)
    straight, steered = (check_limits(corner, (0.0, 0.0), rack, (joint,))[0] for rack in ((0.0, 0.0), (-8.0, 8.0)))
    assert straight.extreme == pytest.approx(0.0, abs=1e-9)
    assert steered.extreme < 2.0


def test_rod_ends_and_ball_joints_are_known_by_their_hardpoint(corner: Corner) -> None:
    assert joint_bodies(corner.mechanism, "upper_arm.ball_joint") == (("upper_arm", "knuckle"),)
    assert joint_bodies(corner.mechanism, "upper ball joint") == (("upper_arm", "knuckle"),)
    assert joint_bodies(corner.mechanism, "tie_rod.inboard") == (("tie_rod", "rack"),)
    with pytest.raises(MechanismError, match=r"no ball joint or rod end 'upper_arm\.front_pivot'"):
        joint_bodies(corner.mechanism, "upper_arm.front_pivot")
    with pytest.raises(MechanismError, match=r"did you mean 'tie_rod\.outboard'"):
        joint_bodies(corner.mechanism, "tierod.outbord")


def test_where_two_rods_meet_the_one_that_leans_more_is_reported() -> None:
    """The same corner, with both lower links on one knuckle point: the limit there is for both of them."""
    apart = FIVE_LINK.mechanism(FIVE_LINK.example)
    shared = tuple(
        replace(joint, point_b="lower_front.outboard") if joint.name == "lower_rear" else joint
        for joint in apart.joints
    )
    wheel = Wheel(FIVE_LINK.example["wheel.centre"], 280.0)
    corner = Corner(replace(apart, joints=shared), wheel)
    (result, *_) = check_limits(corner, TRAVEL, RACK, (JointLimit("lower_front.outboard", UP, 10.0),))
    motion = dense(corner)
    leans = {
        rod: np.degrees(np.arccos(((motion.rotation(rod) @ UP) * (motion.rotation("knuckle") @ UP)).sum(axis=-1))).max()
        for rod in ("lower_front", "lower_rear")
    }
    assert abs(leans["lower_front"] - leans["lower_rear"]) > 0.1
    assert result.extreme == pytest.approx(max(leans.values()), abs=0.01)


def test_the_spring_is_held_against_both_its_lengths(corner: Corner) -> None:
    spring = Spring(np.array([-20.0, 310.0, 500.0]), np.array([-10.0, 520.0, 150.0]), "lower_arm", 390.0, 430.0)
    sprung = replace(corner, spring=spring)
    shortest, longest, *_ = check_limits(sprung, TRAVEL, RACK)
    motion = dense(sprung)
    lengths = np.linalg.norm(motion.point("lower_arm", spring.moving) - spring.chassis, axis=-1)
    assert shortest.extreme == pytest.approx(lengths.min(), abs=1e-3)
    assert longest.extreme == pytest.approx(lengths.max(), abs=1e-3)
    assert (shortest.travel_mm, longest.travel_mm) == (60.0, -50.0)
    assert shortest.ok == (lengths.min() >= 390.0)
    assert longest.ok == (lengths.max() <= 430.0)


def test_a_drive_shaft_bends_and_plunges_as_its_geometry_says(corner: Corner) -> None:
    """A level shaft across the car to the wheel centre: its inner angle is that of the wheel centre's rise."""
    outer = corner.wheel.centre
    inner = outer - [0.0, 420.0, 0.0]
    shaft = DriveShaft(inner, outer, np.array([0.0, 1.0, 0.0]), 8.0, 30.0, 5.0)
    angle, other, plunge, *_ = check_limits(corner, TRAVEL, (0.0, 0.0), shaft=shaft)
    motion = solve_motion(corner, np.linspace(*TRAVEL, 2001))
    along = motion.point("wheel", outer) - inner
    bends = np.degrees(np.arctan2(np.hypot(along[:, 0], along[:, 2]), along[:, 1]))
    assert angle.extreme == pytest.approx(bends.max(), abs=1e-3)
    assert angle.ok == (bends.max() <= 8.0)
    slides = np.abs(np.linalg.norm(along, axis=-1) - 420.0)
    assert plunge.extreme == pytest.approx(slides.max(), abs=1e-3)
    axes = motion.rotation("wheel") @ corner.wheel.spin_axis
    crossed = np.linalg.norm(np.cross(along, axes), axis=-1)
    assert other.extreme == pytest.approx(np.degrees(np.arctan2(crossed, (along * axes).sum(axis=-1))).max(), abs=1e-3)
    assert plunge.travel_mm == 60.0


def test_an_output_axis_may_be_written_in_either_sense(corner: Corner) -> None:
    outer = corner.wheel.centre
    shafts = [DriveShaft(outer - [0.0, 420.0, 0.0], outer, np.array([0.0, sense, 0.0]), 25.0) for sense in (1.0, -1.0)]
    one, other = (check_limits(corner, TRAVEL, RACK, shaft=shaft)[0] for shaft in shafts)
    assert one == other
    assert one.ok


def test_lock_up_margins_are_those_of_find_limit(corner: Corner) -> None:
    limit = find_limit(corner, "travel", -900.0)
    assert limit is not None
    low = limit.value_mm / 1.2
    results = {result.name: result for result in check_limits(corner, (low, 40.0), (0.0, 0.0))}
    rebound = results["travel to lock-up, rebound"]
    assert rebound.extreme == pytest.approx(-limit.value_mm, abs=0.02)
    assert rebound.ok
    assert rebound.note == limit.reason
    assert results["travel to lock-up, bump"].ok
    assert "no lock-up as far as 60.0 mm" in results["travel to lock-up, bump"].note


def test_a_motion_beyond_lock_up_fails_its_margin(corner: Corner) -> None:
    limit = find_limit(corner, "travel", -900.0)
    assert limit is not None
    results = {result.name: result for result in check_limits(corner, (limit.value_mm - 10.0, 60.0), (0.0, 0.0))}
    assert not results["travel to lock-up, rebound"].ok


def test_travel_that_locks_is_not_blamed_on_the_rack(corner: Corner) -> None:
    results = {result.name: result for result in check_limits(corner, (-50.0, 900.0), (-10.0, 10.0))}
    assert not results["travel to lock-up, bump"].ok
    assert results["rack to lock-up, left"].ok
    assert results["rack to lock-up, left"].extreme == 15.0
