"""Signs and limits of the readings, as facts of mechanics."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from knucklepath.kinematics.corner import (
    BUILTIN_READINGS,
    corner_readings,
    front_instant_centre,
    jacking_force,
    steering_axis,
)
from knucklepath.kinematics.errors import MechanismError
from knucklepath.kinematics.motion import solve_motion
from knucklepath.kinematics.wheel import Corner, Spring, Vehicle, Wheel
from knucklepath.plugins.layouts import double_a_arm, five_link, semi_trailing_arm, strut

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


def arms_toward(rise: float) -> dict[str, np.ndarray]:
    """Level lower arm, and an upper arm whose inner pivots stand higher than its ball joint by ``rise``."""
    corner = parallel_arms()
    points = {
        f"upper_arm.{end}": corner.point(f"upper_arm.{end}") + [0.0, 0.0, rise] for end in ("front_pivot", "rear_pivot")
    }
    points["tie_rod.inboard"] = corner.point("tie_rod.inboard") + [0.0, 0.0, rise / 2.0]
    return read(replace(corner, mechanism=corner.mechanism.with_points(points)))


def test_arms_that_meet_inboard_have_their_swing_arm_inboard_and_those_that_meet_outboard_outboard() -> None:
    """The lines of a level arm and one that falls inward by 10 in 300 meet 6 m in: 200/10 · 300 from the joints."""
    meet, part = arms_toward(-10.0), arms_toward(10.0)
    assert meet["front_centre_y_mm"] == pytest.approx(600.0 - 200.0 * 300.0 / 10.0)
    assert meet["front_centre_z_mm"] == pytest.approx(200.0)
    assert meet["fvsa_length_mm"] == pytest.approx(650.0 - meet["front_centre_y_mm"])
    assert meet["camber_rate_deg_per_mm"] == pytest.approx(-np.degrees(1.0 / (650.0 - meet["front_centre_y_mm"])))
    assert part["front_centre_y_mm"] == pytest.approx(600.0 + 200.0 * 300.0 / 10.0)
    assert part["fvsa_length_mm"] < 0.0
    assert part["camber_rate_deg_per_mm"] > 0.0
    # the contact is in z = 0 and the centre in z = 200: the roll centre is above ground when the centre is inboard
    assert meet["roll_centre_height_mm"] == pytest.approx(200.0 * 650.0 / meet["fvsa_length_mm"])
    assert part["roll_centre_height_mm"] < 0.0 < meet["roll_centre_height_mm"]


def test_the_swing_arm_grows_beyond_all_bounds_toward_parallel_and_keeps_its_sign() -> None:
    lengths = [float(arms_toward(rise)["fvsa_length_mm"]) for rise in (-1.0, -1e-3, -1e-6)]
    assert lengths == sorted(lengths)
    assert lengths[2] == pytest.approx(200.0 * 300.0 / 1e-6, rel=1e-3)
    assert float(arms_toward(1e-6)["fvsa_length_mm"]) < -1e9
    assert np.isinf(arms_toward(0.0)["fvsa_length_mm"])


def one_arm(inner: tuple[float, float, float], outer: tuple[float, float, float], **changed: object) -> Corner:
    """A single arm on the axis through two points, the wheel centre at (0, 700, 300), loaded radius 300."""
    layout = semi_trailing_arm.LAYOUT
    hub = (0.0, 700.0, 300.0)
    mechanism = layout.mechanism({"arm.inner_pivot": inner, "arm.outer_pivot": outer, "wheel.centre": hub})
    return Corner(mechanism, Wheel(np.array(hub), 300.0), layout.carrier, axle="rear", **changed)  # type: ignore[arg-type]


def test_a_trailing_arm_swings_about_an_axis_across_the_car() -> None:
    """Pivot 400 ahead and 50 up: no camber, toe or track change; axis and side-view readings are the pivot's."""
    values = read(one_arm((400.0, 300.0, 350.0), (400.0, 600.0, 350.0)), np.array([-40.0, 0.0, 40.0]))
    for name in ("camber_deg", "toe_deg", "half_track_change_mm", "camber_rate_deg_per_mm", "toe_rate_deg_per_mm"):
        np.testing.assert_allclose(values[name], 0.0, atol=1e-12)
    np.testing.assert_allclose(values["side_centre_x_mm"], 400.0)
    np.testing.assert_allclose(values["side_centre_z_mm"], 350.0)
    np.testing.assert_allclose(values["svsa_length_mm"], values["wheel_centre_x_mm"] - 400.0)
    assert (values["svsa_length_mm"] < 0.0).all()  # the centre is ahead of the wheel
    np.testing.assert_allclose(values["svsa_height_mm"], 350.0 - values["contact_z_mm"])
    np.testing.assert_allclose(values["axis_pitch_mm_per_rad"], 0.0, atol=1e-12)
    np.testing.assert_allclose(np.abs(values["axis_direction_y"]), 1.0)
    np.testing.assert_allclose(values["axis_point_x_mm"], 400.0)
    np.testing.assert_allclose(values["axis_point_y_mm"], 700.0)
    # nothing turns in front view
    assert np.isinf(values["fvsa_length_mm"]).all()
    np.testing.assert_allclose(values["roll_centre_height_mm"], 0.0, atol=1e-9)
    # on a circle of radius √(400² + 50²) about the pivot, the wheel's x follows from its height
    x = 400.0 - np.sqrt(400.0**2 + 50.0**2 - (values["wheel_centre_z_mm"] - 350.0) ** 2)
    np.testing.assert_allclose(values["wheelbase_change_mm"], x, atol=1e-9)


def test_a_trailing_arm_lifts_the_car_under_braking_and_drive_by_its_side_view_slopes() -> None:
    """The pivot's slope is 350/400 from the contact (brakes on the arm), 50/400 from the wheel centre (drive shaft)."""
    corner = one_arm((400.0, 300.0, 350.0), (400.0, 600.0, 350.0), vehicle=Vehicle(2600.0, 520.0, 0.7, 0.0))
    values = read(corner)
    assert values["anti_lift_percent"] == pytest.approx(100.0 * 0.3 * (350.0 / 400.0) * 2600.0 / 520.0)
    assert values["anti_squat_percent"] == pytest.approx(100.0 * 1.0 * (50.0 / 400.0) * 2600.0 / 520.0)
    motion = solve_motion(corner, 0.0)
    # braking pushes the tyre rearward: the links pull the rear down; driving forward by a shaft lifts it
    assert jacking_force(motion, (-1000.0, 0.0, 0.0)) == pytest.approx(-1000.0 * 350.0 / 400.0)
    assert jacking_force(motion, (1000.0, 0.0, 0.0), "drive shaft") == pytest.approx(1000.0 * 50.0 / 400.0)


def test_a_swing_axle_turns_about_a_line_along_the_car_and_jacks_it_up() -> None:
    """Pivot line at y = 100, z = 300: the wheel leans by the angle of its half-shaft, and cornering lifts the car."""
    travel = np.array([-60.0, 0.0, 60.0])
    corner = one_arm((200.0, 100.0, 300.0), (-200.0, 100.0, 300.0))
    values = read(corner, travel)
    np.testing.assert_allclose(values["camber_deg"], -np.degrees(np.arcsin(travel / 600.0)), atol=1e-10)
    np.testing.assert_allclose(values["toe_deg"], 0.0, atol=1e-12)
    np.testing.assert_allclose(values["front_centre_y_mm"], 100.0)
    np.testing.assert_allclose(values["front_centre_z_mm"], 300.0)
    assert values["fvsa_length_mm"][1] == pytest.approx(600.0)
    assert values["fvsa_height_mm"][1] == pytest.approx(300.0)
    assert values["roll_centre_height_mm"][1] == pytest.approx(300.0 * 700.0 / 600.0)
    assert np.isinf(values["svsa_length_mm"]).all()
    # the ground pushes an outer left wheel inboard, to −y
    lift = jacking_force(solve_motion(corner, 0.0), (0.0, -1000.0, 0.0))
    assert lift == pytest.approx(1000.0 * 300.0 / 600.0)


def test_a_swept_axis_gives_toe_and_camber_together() -> None:
    """Semi-trailing at 45° in plan: per radian the wheel turns as much about x as about y, and steers as it leans."""
    values = read(one_arm((300.0, 300.0, 300.0), (600.0, 600.0, 300.0)), np.array([-30.0, 0.0, 30.0]))
    direction = np.abs(np.stack([values[f"axis_direction_{axis}"] for axis in "xyz"], axis=-1))
    np.testing.assert_allclose(direction, np.broadcast_to([np.sqrt(0.5), np.sqrt(0.5), 0.0], (3, 3)), atol=1e-12)
    # the axis is level with the wheel: at design it leans and does not yet steer
    assert values["toe_rate_deg_per_mm"][1] == pytest.approx(0.0, abs=1e-12)
    assert abs(values["camber_rate_deg_per_mm"][1]) > 0.01
    assert values["toe_deg"][0] * values["toe_deg"][2] > 0.0  # and toes the same way, up or down


def test_a_spring_on_half_the_lever_moves_half_as_far() -> None:
    """Upright spring half way out on a level arm: ratio a half at design, and less than that where the arm tilts."""
    spring = Spring(np.array([200.0, 450.0, 700.0]), np.array([200.0, 450.0, 300.0]), "arm")
    corner = one_arm((400.0, 300.0, 300.0), (400.0, 600.0, 300.0), spring=spring)
    values = read(corner, np.array([0.0, 100.0]))
    assert values["motion_ratio"][0] == pytest.approx(0.5)
    assert values["spring_length_mm"][0] == pytest.approx(400.0)
    tilt = np.arcsin(100.0 / 400.0)
    end = np.array([400.0 - 200.0 * np.cos(tilt), 300.0 + 200.0 * np.sin(tilt)])
    unit = (np.array([200.0, 700.0]) - end) / np.linalg.norm(np.array([200.0, 700.0]) - end)
    # the arm turns by 1/(400 cos) per mm; its middle moves square to it
    velocity = 200.0 * np.array([np.sin(tilt), np.cos(tilt)]) / (400.0 * np.cos(tilt))
    assert values["motion_ratio"][1] == pytest.approx(abs(unit @ velocity))


def test_a_layout_without_a_steering_axis_has_no_caster_and_all_else() -> None:
    layout = five_link.LAYOUT
    wheel = Wheel(layout.example["wheel.centre"], 280.0)
    values = read(Corner(layout.mechanism(layout.example, steered=False), wheel), np.linspace(-40.0, 40.0, 5))
    missing = {name for name, value in values.items() if np.isnan(value).any()}
    assert missing == {"caster_deg", "kingpin_inclination_deg", "scrub_radius_mm", "caster_trail_mm"}
    assert all(np.isfinite(value).all() for name, value in values.items() if name not in missing)


def test_steering_about_the_virtual_axis_leaves_its_points_at_rest_but_for_the_pitch() -> None:
    layout = five_link.LAYOUT
    corner = Corner(layout.mechanism(layout.example), Wheel(layout.example["wheel.centre"], 280.0))
    motion = solve_motion(corner, 10.0, np.array([-15.0, 0.0, 15.0]))
    point, along = steering_axis(motion)
    twist = motion.twist("knuckle", "rack")
    velocity = twist[..., 3:] + np.cross(twist[..., :3], point)
    np.testing.assert_allclose(np.cross(velocity, along), 0.0, atol=1e-10)
    assert (along[..., 2] > 0.0).all()


def test_scrub_and_trail_of_an_upright_axis_are_plain_offsets() -> None:
    """Ball joints in one upright line 60 inboard of and 25 ahead of the contact: no caster, and nothing to project."""
    corner = parallel_arms()
    shift = np.array([25.0, -10.0, 0.0])
    points = {f"{arm}.ball_joint": corner.point(f"{arm}.ball_joint") + shift for arm in ("upper_arm", "lower_arm")}
    values = read(replace(corner, mechanism=corner.mechanism.with_points(points)))
    assert values["caster_deg"] == pytest.approx(0.0, abs=1e-12)
    assert values["kingpin_inclination_deg"] == pytest.approx(0.0, abs=1e-12)
    assert values["scrub_radius_mm"] == pytest.approx(60.0)
    assert values["caster_trail_mm"] == pytest.approx(25.0)
