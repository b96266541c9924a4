"""Poses and exact rates over travel and rack: shapes, indexing, and every rate against differences of solved poses."""

from __future__ import annotations

import numpy as np
import pytest

from knucklepath.kinematics.corner import corner_readings
from knucklepath.kinematics.errors import MechanismError
from knucklepath.kinematics.frames import rotation_vector
from knucklepath.kinematics.mechanism import Layout
from knucklepath.kinematics.motion import Motion, solve_motion
from knucklepath.kinematics.wheel import Corner, Wheel
from knucklepath.plugins.layouts import double_a_arm, five_link, semi_trailing_arm, strut

LAYOUTS = (double_a_arm.LAYOUT, strut.LAYOUT, five_link.LAYOUT, semi_trailing_arm.LAYOUT)
A_ARMS, FIVE, ARM = double_a_arm.LAYOUT, five_link.LAYOUT, semi_trailing_arm.LAYOUT
each_layout = pytest.mark.parametrize("layout", LAYOUTS, ids=lambda layout: layout.id)


def corner_of(layout: Layout, steered: bool = True) -> Corner:
    mechanism = layout.mechanism(layout.example, steered=steered and layout.steers)
    return Corner(mechanism, Wheel(layout.example["wheel.centre"], 280.0), layout.carrier, layout.steering_axis)


def grid(corner: Corner, travels: int = 5, racks: int = 3) -> Motion:
    rack = np.linspace(-20.0, 20.0, racks) if corner.steered else np.zeros(1)
    return solve_motion(corner, np.linspace(-50.0, 50.0, travels)[:, None], rack[None])


@each_layout
def test_at_the_design_position_nothing_has_moved(layout: Layout) -> None:
    corner = corner_of(layout)
    motion = solve_motion(corner, 0.0)
    assert motion.shape == ()
    for body in corner.body_names:
        np.testing.assert_allclose(motion.matrix(body), np.eye(4), atol=1e-12)
    assert motion.residual_mm <= 1e-9
    assert motion.closeness == pytest.approx(1.0)


@each_layout
def test_inputs_are_what_was_asked_for(layout: Layout) -> None:
    corner = corner_of(layout)
    motion = grid(corner)
    assert motion.reached.all()
    assert motion.residual_mm.max() <= 1e-9
    centre = motion.point("wheel", corner.wheel.centre)
    np.testing.assert_allclose(centre[..., 2] - corner.wheel.centre[2], motion.travel_mm, atol=1e-9)
    if corner.steered:
        np.testing.assert_allclose(motion.translation("rack")[..., 1], motion.rack_mm, atol=1e-12)
        np.testing.assert_array_equal(motion.rotation("rack"), np.broadcast_to(np.eye(3), (*motion.shape, 3, 3)))
    else:
        assert not motion.rack_mm.any()


@each_layout
@pytest.mark.parametrize("per", ["travel", "rack"])
def test_the_twist_of_every_body_equals_differences_of_solved_poses(layout: Layout, per: str) -> None:
    """Turn and shift of bodies and rods over ±h, to 1e-6 of the greatest rate; h balances h² against rounding."""
    corner = corner_of(layout)
    if per == "rack" and not corner.steered:
        with pytest.raises(MechanismError, match="there is no input 'rack'"):
            solve_motion(corner, 0.0).twist("wheel", per)
        return
    travel, rack = np.linspace(-45.0, 45.0, 4), np.linspace(18.0, -18.0, 4) * float(corner.steered)
    step = 0.01
    by = {"travel": (step, 0.0), "rack": (0.0, step)}[per]
    motion = solve_motion(corner, travel, rack)
    ahead, behind = (solve_motion(corner, travel + side * by[0], rack + side * by[1]) for side in (1.0, -1.0))
    for body in corner.mechanism.body_names:
        turned = ahead.rotation(body) @ np.swapaxes(behind.rotation(body), -1, -2)
        angular = rotation_vector(turned) / (2.0 * step)
        # the twist's velocity is that of the body's point at the origin; measured at the body it loses no digits
        at = corner.wheel.centre
        velocity = (ahead.point(body, at) - behind.point(body, at)) / (2.0 * step)
        twist = motion.twist(body, per)
        size = max(1.0, float(np.abs(velocity).max()))
        np.testing.assert_allclose(motion.velocity(body, at, per), velocity, rtol=0.0, atol=1e-6 * size)
        np.testing.assert_allclose(twist[:, :3], angular, rtol=0.0, atol=1e-6 * size / 100.0)
        moving = twist[:, 3:] + np.cross(twist[:, :3], motion.point(body, at))
        np.testing.assert_allclose(moving, motion.velocity(body, at, per), atol=1e-12)
    assert not motion.twist("chassis", per).any()


def test_the_screw_of_the_knuckle_is_made_of_its_twist() -> None:
    motion = grid(corner_of(FIVE))
    screw, twist = motion.screw(), motion.twist("knuckle")
    np.testing.assert_allclose(screw.direction * screw.rate[..., None], twist[..., :3], atol=1e-15)
    along = np.cross(twist[..., :3], screw.point) + twist[..., 3:]
    np.testing.assert_allclose(along, screw.pitch_mm_per_rad[..., None] * twist[..., :3], atol=1e-12)
    centre = motion.point("wheel", motion.corner.wheel.centre)
    np.testing.assert_allclose(((centre - screw.point) * screw.direction).sum(axis=-1), 0.0, atol=1e-9)


def test_matrix_point_rotation_and_translation_agree() -> None:
    motion = grid(corner_of(A_ARMS))
    at = np.array([12.0, 480.0, 260.0])
    for body in motion.corner.body_names:
        matrix = motion.matrix(body)
        assert matrix.shape == (5, 3, 4, 4)
        np.testing.assert_array_equal(matrix[..., 3, :], np.broadcast_to([0.0, 0.0, 0.0, 1.0], (5, 3, 4)))
        np.testing.assert_allclose(motion.point(body, at), matrix[..., :3, :3] @ at + matrix[..., :3, 3], atol=1e-11)
        np.testing.assert_allclose(motion.rotation(body), matrix[..., :3, :3])
        np.testing.assert_allclose(motion.translation(body), matrix[..., :3, 3])
    np.testing.assert_array_equal(motion.matrix("wheel"), motion.matrix("knuckle"))
    np.testing.assert_array_equal(motion.matrix("chassis"), np.broadcast_to(np.eye(4), (5, 3, 4, 4)))


def test_many_points_of_a_body_are_found_at_once() -> None:
    motion = grid(corner_of(A_ARMS))
    points = np.random.default_rng(1).uniform(0.0, 600.0, (5, 3, 3))
    together = motion.point("upper_arm", points)
    assert together[3, 1] == pytest.approx(motion[3, 1].point("upper_arm", points[3, 1]))


@pytest.mark.parametrize("index", [(2, 1), (slice(1, 4), 0), (slice(None, None, -2),), ([0, 0, 4], [2, 1, 0]), (...,)])
def test_a_part_of_a_motion_is_the_motion_of_that_part(index: tuple[object, ...]) -> None:
    motion = grid(corner_of(A_ARMS))
    part = motion[index]
    assert part.shape == np.empty(motion.shape)[index].shape
    for body in motion.corner.body_names:
        np.testing.assert_array_equal(part.matrix(body), motion.matrix(body)[index])
        np.testing.assert_array_equal(part.twist(body, "rack"), motion.twist(body, "rack")[index])
    np.testing.assert_array_equal(part.travel_mm, motion.travel_mm[index])
    np.testing.assert_array_equal(part.reached, motion.reached[index])
    np.testing.assert_array_equal(part.closeness, motion.closeness[index])
    for column, value in corner_readings(part).items():
        np.testing.assert_allclose(value, corner_readings(motion)[column][index], rtol=1e-12, err_msg=column)


def test_a_motion_can_be_gone_through_row_by_row() -> None:
    motion = grid(corner_of(FIVE))
    rows = list(motion)
    assert [row.shape for row in rows] == [(3,)] * 5
    np.testing.assert_array_equal(np.stack([row.matrix("knuckle") for row in rows]), motion.matrix("knuckle"))


def test_a_part_of_a_part_of_geometry_variants_keeps_its_geometry() -> None:
    random = np.random.default_rng(5)
    variants = {name: np.array(at) + random.uniform(-8.0, 8.0, (4, 1, 3)) for name, at in A_ARMS.example.items()}
    corner = Corner(A_ARMS.mechanism(variants), Wheel(A_ARMS.example["wheel.centre"], 280.0))
    motion = solve_motion(corner, np.linspace(-30.0, 30.0, 3), 4.0)
    assert motion.shape == (4, 3)
    part = motion[1:, ::2][2]
    for body in corner.body_names:
        np.testing.assert_array_equal(part.matrix(body), motion.matrix(body)[3, ::2])
        np.testing.assert_array_equal(part.twist(body), motion.twist(body)[3, ::2])


def test_travel_and_rack_broadcast_as_arrays_do() -> None:
    corner = corner_of(A_ARMS)
    travel, rack = np.linspace(-30.0, 30.0, 3), np.linspace(-10.0, 10.0, 4)
    whole = solve_motion(corner, travel[:, None], rack)
    assert whole.shape == (3, 4)
    assert solve_motion(corner, 5.0, rack).shape == (4,)
    assert solve_motion(corner, travel, 5.0).shape == (3,)
    assert solve_motion(corner, [10.0], [[1.0], [2.0]]).shape == (2, 1)
    np.testing.assert_array_equal(whole.travel_mm[:, 2], travel)
    np.testing.assert_array_equal(whole.rack_mm[1], rack)
    assert solve_motion(corner_of(A_ARMS, steered=False), travel[:, None], np.zeros(4)).shape == (3, 4)
    with pytest.raises(ValueError, match="broadcast"):
        solve_motion(corner, travel, rack)


@each_layout
@pytest.mark.parametrize("shape", [(130,), (13, 11), (1, 200), (3, 5, 10)])
def test_a_grid_solved_through_a_coarse_one_equals_its_poses_one_by_one(layout: Layout, shape: tuple[int, ...]) -> None:
    corner = corner_of(layout)
    random = np.random.default_rng(8)
    travel = random.uniform(-50.0, 50.0, shape)
    rack = random.uniform(-20.0, 20.0, shape[-1:]) * float(corner.steered)
    motion = solve_motion(corner, travel, rack)
    assert motion.residual_mm.max() <= 1e-9
    flat = motion.matrix("wheel").reshape(-1, 4, 4)
    for k in random.choice(travel.size, 6, replace=False):
        alone = solve_motion(corner, travel.flat[k], np.broadcast_to(rack, shape).flat[k])
        np.testing.assert_allclose(flat[k], alone.matrix("wheel"), atol=1e-8)


@each_layout
@pytest.mark.parametrize("travel", [0.0, 30.0])
def test_many_poses_that_are_all_the_same_are_solved(layout: Layout, travel: float) -> None:
    """A span without width has nothing to interpolate along."""
    corner = corner_of(layout)
    motion = solve_motion(corner, np.full(300, travel))
    assert motion.reached.all()
    alone = solve_motion(corner, travel).matrix("wheel")
    np.testing.assert_allclose(motion.matrix("wheel"), np.broadcast_to(alone, (300, 4, 4)), atol=1e-8)
    hair = solve_motion(corner, travel + np.linspace(0.0, 1e-13, 300))
    np.testing.assert_allclose(hair.matrix("wheel"), motion.matrix("wheel"), atol=1e-8)


@pytest.mark.parametrize("shape", [(0,), (0, 3), (4, 0)])
def test_no_poses_at_all_are_a_motion_too(shape: tuple[int, ...]) -> None:
    motion = solve_motion(corner_of(FIVE), np.zeros(shape))
    assert motion.shape == shape
    assert motion.matrix("toe_link").shape == (*shape, 4, 4)
    assert all(value.shape == shape for value in corner_readings(motion).values())


@each_layout
@pytest.mark.filterwarnings("error")
def test_what_is_not_finite_or_absurdly_far_is_not_reached_and_says_no_more(layout: Layout) -> None:
    corner = corner_of(layout)
    motion = solve_motion(corner, [np.nan, 10.0, np.inf, -np.inf, 1e9, -1e200, 1e308])
    assert motion.reached.tolist() == [False, True, False, False, False, False, False]
    assert np.isnan(motion.matrix("wheel")[~motion.reached, :3]).all()
    assert np.isnan(motion.twist("wheel")[~motion.reached]).all()
    assert np.isfinite(motion.matrix("wheel")[1]).all()
    far = solve_motion(corner, np.append(np.linspace(-20.0, 20.0, 150), [np.nan, 1e6]))
    assert far.reached.tolist() == [True] * 150 + [False] * 2


def test_names_that_are_not_there_are_named_with_the_nearest_that_is() -> None:
    motion = grid(corner_of(A_ARMS))
    with pytest.raises(MechanismError, match="did you mean 'lower_arm'"):
        motion.matrix("lower_arn")
    with pytest.raises(MechanismError, match="there is no input 'steer'; inputs: travel, rack"):
        motion.twist("knuckle", "steer")
    with pytest.raises(MechanismError, match="no rack"):
        solve_motion(corner_of(ARM), 0.0, [0.0, 3.0])
