"""Signs and limits of the readings, as facts of mechanics."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from knucklepath.kinematics.corner import BUILTIN_READINGS, corner_readings, front_instant_centre
from knucklepath.kinematics.errors import MechanismError
from knucklepath.kinematics.motion import solve_motion
from knucklepath.kinematics.wheel import Corner, Spring, Vehicle, Wheel
from knucklepath.plugins.layouts import double_a_arm, five_link, strut

A_ARMS = double_a_arm.LAYOUT


def a_arms(steered: bool = True, **changed: object) -> Corner:
    corner = Corner(
        A_ARMS.mechanism(A_ARMS.example, steered=steered),
        Wheel(A_ARMS.example["wheel.centre"], 280.0),
        steering_axis=A_ARMS.steering_axis,
    )
    return replace(corner, **changed)  # type: ignore[arg-type]


def parallel_arms() -> Corner:
    """Two equal, level, parallel arms across the car, and a tie rod that is parallel to them."""
    points = {
        "upper_arm.front_pivot": (100.0, 300.0, 400.0),
        "upper_arm.rear_pivot": (-100.0, 300.0, 400.0),
        "upper_arm.ball_joint": (0.0, 600.0, 400.0),
        "lower_arm.front_pivot": (100.0, 300.0, 200.0),
        "lower_arm.rear_pivot": (-100.0, 300.0, 200.0),
        "lower_arm.ball_joint": (0.0, 600.0, 200.0),
        "tie_rod.inboard": (90.0, 300.0, 300.0),
        "tie_rod.outboard": (90.0, 600.0, 300.0),
        "wheel.centre": (0.0, 650.0, 300.0),
    }
    mechanism = A_ARMS.mechanism(points)
    return Corner(mechanism, Wheel(np.array(points["wheel.centre"]), 300.0), steering_axis=A_ARMS.steering_axis)


def read(corner: Corner, travel: object = 0.0, rack: object = 0.0) -> dict[str, np.ndarray]:
    return corner_readings(solve_motion(corner, travel, rack))  # type: ignore[arg-type]


def test_parallel_equal_arms_translate_the_knuckle() -> None:
    """Common practice: no camber or toe change, the instant centre infinitely far, the roll centre on the ground."""
    corner = parallel_arms()
    values = read(corner, np.array([-40.0, 0.0, 40.0]))
    np.testing.assert_allclose(values["camber_deg"], 0.0, atol=1e-10)
    np.testing.assert_allclose(values["toe_deg"], 0.0, atol=1e-10)
    assert np.isinf(values["fvsa_length_mm"]).all()
    assert np.isinf(values["svsa_length_mm"]).all()
    assert np.isinf(values["axis_pitch_mm_per_rad"]).all()
    assert np.isnan(values["axis_direction_x"]).all()
    assert np.isnan(values["axis_point_z_mm"]).all()
    np.testing.assert_allclose(values["roll_centre_height_mm"][1], 0.0, atol=1e-9)
    assert np.isinf(front_instant_centre(solve_motion(corner, 40.0))[1])


def test_no_reading_is_a_made_up_large_number() -> None:
    for value in read(parallel_arms(), np.linspace(-40.0, 40.0, 9)).values():
        finite = value[np.isfinite(value)]
        assert (np.abs(finite) < 1e6).all()


def test_signs_of_camber_and_toe() -> None:
    corner = a_arms(wheel=Wheel(A_ARMS.example["wheel.centre"], 280.0, camber_deg=3.0, toe_deg=1.5))
    spin = corner.wheel.spin_axis
    assert spin[2] < 0.0  # the outboard end of the spin axis points down: the top leans outboard
    assert spin[0] > 0.0  # and forward: the front of the wheel is inboard
    values = read(corner)
    assert values["camber_deg"] == pytest.approx(3.0)
    assert values["toe_deg"] == pytest.approx(1.5)
    assert corner.wheel.contact[1] < corner.wheel.centre[1]


def test_a_tie_rod_ahead_of_the_axle_toes_out_as_the_rack_moves_outboard() -> None:
    values = read(a_arms(), 0.0, np.array([-10.0, 0.0, 10.0]))
    assert values["toe_deg"][0] > values["toe_deg"][1] > values["toe_deg"][2]


def test_caster_and_inclination_are_those_of_the_ball_joints() -> None:
    lower, upper = (np.array(A_ARMS.example[f"{arm}.ball_joint"]) for arm in ("lower_arm", "upper_arm"))
    along = upper - lower
    values = read(a_arms())
    assert values["caster_deg"] == pytest.approx(np.degrees(np.arctan2(-along[0], along[2])))
    assert values["kingpin_inclination_deg"] == pytest.approx(np.degrees(np.arctan2(-along[1], along[2])))
    assert values["caster_deg"] > 0.0


def test_a_five_link_has_a_virtual_axis_with_a_rack_and_none_without() -> None:
    layout = five_link.LAYOUT
    wheel = Wheel(layout.example["wheel.centre"], 280.0)
    steered, fixed = (Corner(layout.mechanism(layout.example, steered=flag), wheel) for flag in (True, False))
    assert np.isfinite(read(steered)["caster_deg"])
    assert np.isnan(read(fixed)["caster_deg"])
    assert np.isnan(read(fixed)["scrub_radius_mm"])
    with pytest.raises(MechanismError, match="no rack"):
        solve_motion(fixed, 0.0, 5.0)


def test_a_strut_steers_about_ball_joint_and_top_mount() -> None:
    """Steering turns the knuckle about that line: its points stay, so the virtual and the stated axis agree."""
    layout = strut.LAYOUT
    wheel = Wheel(layout.example["wheel.centre"], 280.0)
    stated = Corner(layout.mechanism(layout.example), wheel, steering_axis=layout.steering_axis)
    motion = solve_motion(stated, 0.0, 12.0)
    assert motion.point("strut", layout.example["strut.top_mount"]) == pytest.approx(layout.example["strut.top_mount"])
    values = read(stated)
    assert 0.0 < values["kingpin_inclination_deg"] < 20.0


def test_motion_ratio_is_the_slope_of_the_spring_length() -> None:
    spring = Spring(np.array([-20.0, 310.0, 500.0]), np.array([-10.0, 520.0, 150.0]), "lower_arm")
    corner = a_arms(spring=spring)
    travel = np.linspace(-40.0, 40.0, 161)
    values = read(corner, travel)
    slope = np.gradient(values["spring_length_mm"], travel, edge_order=2)
    np.testing.assert_allclose(values["motion_ratio"][2:-2], -slope[2:-2], rtol=1e-5)
    assert read(corner)["spring_length_mm"] == pytest.approx(np.linalg.norm(spring.chassis - spring.moving))


def test_readings_that_need_more_appear_only_with_it() -> None:
    bare = read(a_arms())
    assert "anti_dive_percent" not in bare
    assert "spring_length_mm" not in bare
    vehicle = Vehicle(2500.0, 350.0, 0.6, 0.4)
    front, rear = read(a_arms(vehicle=vehicle)), read(a_arms(vehicle=vehicle, axle="rear"))
    assert {"anti_dive_percent", "anti_lift_drive_percent"} <= set(front)
    assert {"anti_lift_percent", "anti_squat_percent"} <= set(rear)
    assert "anti_lift_drive_percent" not in read(a_arms(vehicle=replace(vehicle, front_drive_share=0.0)))


def test_anti_dive_is_the_handbook_formula() -> None:
    """100 · share · tan θ · wheelbase / height, θ from the contact point to the side-view centre (common practice)."""
    corner = a_arms(vehicle=Vehicle(2500.0, 350.0, 0.6, 0.0))
    values = read(corner)
    slope = values["svsa_height_mm"] / (values["contact_x_mm"] - values["side_centre_x_mm"])
    assert values["anti_dive_percent"] == pytest.approx(100.0 * 0.6 * slope * 2500.0 / 350.0)


def test_columns_have_units_in_their_names() -> None:
    for reading in BUILTIN_READINGS:
        ending = {"deg": "_deg", "mm": "_mm", "%": "_percent", "deg/mm": "_deg_per_mm", "mm/rad": "_mm_per_rad"}
        assert reading.column.endswith(ending.get(reading.unit, ""))


def test_a_single_pose_and_a_grid_read_the_same() -> None:
    corner = a_arms()
    grid = read(corner, np.array([[10.0], [20.0]]), np.array([[0.0, 5.0]]))
    alone = read(corner, 20.0, 5.0)
    for column, value in grid.items():
        np.testing.assert_allclose(value[1, 1], alone[column], rtol=1e-9, atol=1e-9)
        assert np.shape(alone[column]) == ()


def test_a_part_of_a_motion_is_the_motion_of_that_part() -> None:
    corner = a_arms()
    motion = solve_motion(corner, np.linspace(-30.0, 30.0, 7)[:, None], np.linspace(-10.0, 10.0, 5)[None])
    part = motion[2:5, 1]
    assert part.shape == (3,)
    for body in corner.body_names:
        np.testing.assert_array_equal(part.matrix(body), motion.matrix(body)[2:5, 1])
        np.testing.assert_array_equal(part.twist(body, "rack"), motion.twist(body, "rack")[2:5, 1])
    with pytest.raises(MechanismError, match="did you mean 'lower_arm'"):
        motion.matrix("lower_arn")
