"""Facts of mechanics that hold for any sensible geometry of any layout: hypothesis looks for one that breaks them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from knucklepath.kinematics.audit import audit
from knucklepath.kinematics.corner import corner_readings
from knucklepath.kinematics.errors import MechanismError
from knucklepath.kinematics.frames import rotation_from_vector
from knucklepath.kinematics.mechanism import Layout
from knucklepath.kinematics.motion import Motion, solve_motion
from knucklepath.kinematics.wheel import Corner, Spring, Vehicle, Wheel
from knucklepath.plugins.layouts import double_a_arm, five_link, semi_trailing_arm, strut

Array = NDArray[np.float64]

LAYOUTS: tuple[Layout, ...] = (double_a_arm.LAYOUT, strut.LAYOUT, five_link.LAYOUT, semi_trailing_arm.LAYOUT)
SOME = settings(
    max_examples=40, deadline=None, suppress_health_check=[HealthCheck.filter_too_much, HealthCheck.too_slow]
)


@st.composite
def corners(draw: st.DrawFn) -> Corner:
    """A layout's example with every hardpoint moved by up to 25 mm, that the audit takes and that travels ±50 mm."""
    layout = draw(st.sampled_from(LAYOUTS))
    seed = draw(st.integers(0, 2**32 - 1))
    random = np.random.default_rng(seed)
    points = {name: np.array(at) + random.uniform(-25.0, 25.0, 3) for name, at in layout.example.items()}
    steered = layout.steers and draw(st.booleans())
    try:
        mechanism = layout.mechanism(points, steered=steered)
        audit(mechanism)
    except MechanismError:
        assume(False)
    moving = next(name for name in mechanism.body_names[1:] if name != "rack")
    corner = Corner(
        mechanism=mechanism,
        wheel=Wheel(
            points["wheel.centre"],
            float(random.uniform(240.0, 320.0)),
            camber_deg=float(random.uniform(-4.0, 4.0)),
            toe_deg=float(random.uniform(-2.0, 2.0)),
        ),
        carrier=layout.carrier,
        steering_axis=layout.steering_axis,
        spring=Spring(points["wheel.centre"] + [-30.0, -330.0, 260.0], points["wheel.centre"] + [0, -150, -60], moving),
        vehicle=Vehicle(2500.0, 380.0, 0.6, 0.3),
    )
    grid = solve_motion(corner, [-55.0, 55.0, -55.0, 55.0], [-30.0, -30.0, 30.0, 30.0] if steered else 0.0)
    assume(bool(grid.reached.all()))
    return corner


def grid(corner: Corner, travels: int = 5, racks: int = 3) -> Motion:
    rack = np.linspace(-30.0, 30.0, racks) if corner.steered else np.zeros(1)
    return solve_motion(corner, np.linspace(-50.0, 50.0, travels)[:, None], rack[None])


def bodies(corner: Corner) -> tuple[str, ...]:
    return corner.mechanism.body_names


@SOME
@given(corners())
def test_rods_keep_their_length_and_balls_their_point(corner: Corner) -> None:
    motion = grid(corner)
    assert motion.residual_mm.max() <= 1e-9
    mechanism = corner.mechanism
    for rod in mechanism.rods:
        a, b = mechanism.points[rod.point_a], mechanism.points[rod.point_b]
        now = np.linalg.norm(motion.point(rod.body_a, a) - motion.point(rod.body_b, b), axis=-1)
        np.testing.assert_allclose(now, np.linalg.norm(a - b), rtol=0.0, atol=1e-9)
        np.testing.assert_allclose(motion.point(rod.name, a), motion.point(rod.body_a, a), atol=1e-9)
        np.testing.assert_allclose(motion.point(rod.name, b), motion.point(rod.body_b, b), atol=1e-9)
    for joint in mechanism.joints:
        if joint.equations == 3:
            at = mechanism.points[joint.points[0]]
            np.testing.assert_allclose(motion.point(joint.body_a, at), motion.point(joint.body_b, at), atol=1e-9)


@SOME
@given(corners())
def test_every_body_stays_rigid(corner: Corner) -> None:
    motion = grid(corner)
    for name in bodies(corner):
        rotation = motion.rotation(name)
        unit = np.broadcast_to(np.eye(3), rotation.shape)
        np.testing.assert_allclose(rotation @ np.swapaxes(rotation, -1, -2), unit, atol=1e-13)
        assert (np.linalg.det(rotation) > 0.0).all()


@SOME
@given(corners())
def test_a_mirrored_geometry_gives_mirrored_motion(corner: Corner) -> None:
    mirror = np.array([1.0, -1.0, 1.0])
    mechanism = corner.mechanism
    # the rack's direction is mirrored with everything else, so the same displacement is the mirrored one
    other = replace(
        corner, mechanism=mechanism.with_points({name: at * mirror for name, at in mechanism.points.items()})
    )
    there, here = grid(corner), grid(other)
    turn = mirror[:, None] * mirror[None]
    for name in bodies(corner):
        np.testing.assert_allclose(here.rotation(name), there.rotation(name) * turn, atol=1e-9)
        np.testing.assert_allclose(here.translation(name), there.translation(name) * mirror, atol=1e-7)
        # a turn is mirrored the other way round
        for per in ("travel", "rack") if corner.steered else ("travel",):
            twist = there.twist(name, per) * np.concatenate((-mirror, mirror))
            np.testing.assert_allclose(here.twist(name, per), twist, rtol=1e-7, atol=1e-7)


@SOME
@given(corners(), st.floats(-3.0, 3.0), st.tuples(*[st.floats(-800.0, 800.0)] * 3))
def test_moving_the_whole_car_changes_no_reading_that_should_not_change(
    corner: Corner, yaw: float, shift: tuple[float, float, float]
) -> None:
    """Turned about the vertical and moved: rods turn with it; camber, trail, lengths and rates stay."""
    turn = rotation_from_vector(np.array([0.0, 0.0, yaw]))
    moved = {
        name: turn @ at + (0.0 if name == "rack.axis" else np.array(shift))
        for name, at in corner.mechanism.points.items()
    }
    assert corner.spring is not None
    wheel = replace(
        corner.wheel,
        centre=moved["wheel.centre"],
        toe_deg=corner.wheel.toe_deg - float(np.degrees(yaw)),
    )
    spring = replace(
        corner.spring,
        chassis=turn @ corner.spring.chassis + shift,
        moving=turn @ corner.spring.moving + shift,
    )
    other = replace(corner, mechanism=corner.mechanism.with_points(moved), wheel=wheel, spring=spring)
    first, second = corner_readings(grid(corner)), corner_readings(grid(other))
    for column in (
        "camber_deg",
        "scrub_radius_mm",
        "caster_trail_mm",
        "camber_rate_deg_per_mm",
        "toe_rate_deg_per_mm",
        "axis_pitch_mm_per_rad",
        "spring_length_mm",
        "motion_ratio",
    ):
        np.testing.assert_allclose(second[column], first[column], rtol=1e-6, atol=1e-6, err_msg=column)
    np.testing.assert_allclose(second["contact_z_mm"] - shift[2], first["contact_z_mm"], rtol=0.0, atol=1e-7)


@SOME
@given(corners(), st.tuples(*[st.floats(-800.0, 800.0)] * 3))
def test_a_car_drawn_elsewhere_reads_the_same(corner: Corner, shift: tuple[float, float, float]) -> None:
    """The origin is a draughtsman's choice: coordinates move with it, and nothing else changes at all."""
    moved = {
        name: at + (0.0 if name == "rack.axis" else np.array(shift)) for name, at in corner.mechanism.points.items()
    }
    assert corner.spring is not None
    spring = replace(corner.spring, chassis=corner.spring.chassis + shift, moving=corner.spring.moving + shift)
    wheel = replace(corner.wheel, centre=moved["wheel.centre"])
    other = replace(corner, mechanism=corner.mechanism.with_points(moved), wheel=wheel, spring=spring)
    first, second = corner_readings(grid(corner)), corner_readings(grid(other))
    by = dict(zip("xyz", shift, strict=True))
    for column, value in first.items():
        if column == "roll_centre_height_mm":
            # the one reading that is measured from the car's middle: its slope stays
            expected = value * (first["contact_y_mm"] + by["y"]) / first["contact_y_mm"]
        elif column.endswith(("_x_mm", "_y_mm", "_z_mm")):
            expected = value + by[column[-4]]
        else:
            expected = value
        np.testing.assert_allclose(second[column], expected, rtol=1e-6, atol=1e-6, err_msg=column)


@SOME
@given(corners())
def test_going_out_and_back_returns_to_the_start(corner: Corner) -> None:
    out = np.concatenate((np.linspace(0.0, 50.0, 6), np.linspace(50.0, -50.0, 11), np.linspace(-50.0, 0.0, 6)))
    motion = solve_motion(corner, out)
    for name in bodies(corner):
        np.testing.assert_allclose(motion.rotation(name)[-1], np.eye(3), atol=1e-10)
        np.testing.assert_allclose(motion.translation(name)[-1], 0.0, atol=1e-8)


@SOME
@given(corners(), st.randoms(use_true_random=False))
def test_the_order_and_the_fineness_of_the_grid_do_not_matter(corner: Corner, random: object) -> None:
    fine = grid(corner, 21, 9)
    coarse = fine[::5, ::4] if corner.steered else fine[::5]
    again = grid(corner, 5, 3)
    order = np.random.default_rng(0).permutation(fine.travel_mm.size)
    mixed = solve_motion(corner, fine.travel_mm.reshape(-1)[order], fine.rack_mm.reshape(-1)[order])
    for name in bodies(corner):
        np.testing.assert_allclose(coarse.matrix(name), again.matrix(name), atol=1e-8)
        flat = fine.matrix(name).reshape(-1, 4, 4)
        np.testing.assert_allclose(mixed.matrix(name), flat[order], atol=1e-8)


@SOME
@given(corners(), st.floats(-500.0, 500.0))
def test_along_the_instant_axis_nothing_moves_but_for_the_pitch(corner: Corner, along: float) -> None:
    motion = grid(corner)
    screw = motion.screw()
    twist = motion.twist("wheel")
    at = screw.point + along * screw.direction
    velocity = twist[..., 3:] + np.cross(twist[..., :3], at)
    expected = (screw.pitch_mm_per_rad * screw.rate)[..., None] * screw.direction
    np.testing.assert_allclose(velocity, expected, atol=1e-8)


@SOME
@given(corners())
def test_rates_equal_differences_of_solved_poses(corner: Corner) -> None:
    """Central differences with a step of 0.02 mm, to 1e-6 of the greatest speed."""
    step = 0.01
    inputs = ("travel", "rack") if corner.steered else ("travel",)
    travel, rack = np.array([-37.0, 3.0, 41.0]), np.array([-11.0, 7.0, 23.0]) * float(corner.steered)
    motion = solve_motion(corner, travel, rack)
    probe = corner.wheel.centre + [60.0, -40.0, 90.0]
    for per in inputs:
        shift = {name: step if name == per else 0.0 for name in ("travel", "rack")}
        ahead = solve_motion(corner, travel + shift["travel"], rack + shift["rack"])
        behind = solve_motion(corner, travel - shift["travel"], rack - shift["rack"])
        for name in bodies(corner):
            difference = (ahead.point(name, probe) - behind.point(name, probe)) / (2.0 * step)
            exact = motion.velocity(name, probe, per)
            np.testing.assert_allclose(difference, exact, rtol=0.0, atol=1e-6 * max(1.0, float(np.abs(exact).max())))


@SOME
@given(corners())
def test_rates_of_camber_and_toe_equal_differences(corner: Corner) -> None:
    travel = np.linspace(-45.0, 45.0, 7)
    readings = corner_readings(solve_motion(corner, travel))
    step = 0.02
    ahead, behind = (corner_readings(solve_motion(corner, travel + side)) for side in (step, -step))
    for name in ("camber", "toe"):
        difference = (ahead[f"{name}_deg"] - behind[f"{name}_deg"]) / (2.0 * step)
        np.testing.assert_allclose(readings[f"{name}_rate_deg_per_mm"], difference, rtol=1e-5, atol=1e-8)
    difference = (ahead["spring_length_mm"] - behind["spring_length_mm"]) / (2.0 * step)
    np.testing.assert_allclose(readings["motion_ratio"], np.abs(difference), rtol=1e-5, atol=1e-8)


@pytest.mark.parametrize("layout", LAYOUTS, ids=lambda layout: layout.id)
def test_geometry_variants_on_leading_axes_equal_one_by_one(layout: Layout) -> None:
    random = np.random.default_rng(3)
    variants = {name: np.array(at) + random.uniform(-10.0, 10.0, (4, 1, 3)) for name, at in layout.example.items()}
    travel = np.linspace(-40.0, 40.0, 5)
    together = Corner(
        layout.mechanism(variants, steered=False), Wheel(layout.example["wheel.centre"], 280.0), layout.carrier
    )
    motion = solve_motion(together, travel)
    assert motion.shape == (4, 5)
    for k in range(4):
        alone = replace(
            together, mechanism=layout.mechanism({name: at[k, 0] for name, at in variants.items()}, steered=False)
        )
        single = solve_motion(alone, travel)
        for name in bodies(alone):
            np.testing.assert_allclose(motion.matrix(name)[k], single.matrix(name), atol=1e-8)
