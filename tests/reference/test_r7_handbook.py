"""Relations of the handbooks, on corners whose answer is known beforehand.

Each test names its source; "common practice" is a fact of the trade without one. Wherever a relation speaks of a
rate, the rate is taken here from poses that lie apart (a central difference of sixth order), so that it owes nothing
to the solver's own derivatives.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray

from knucklepath.kinematics.audit import audit, mobility
from knucklepath.kinematics.corner import corner_readings, front_instant_centre, jacking_force, side_instant_centre
from knucklepath.kinematics.errors import MechanismError
from knucklepath.kinematics.mechanism import FreeBody, PointOnLine, Rod
from knucklepath.kinematics.motion import Motion, solve_motion
from knucklepath.kinematics.wheel import Corner, Vehicle, Wheel
from knucklepath.plugins.layouts import double_a_arm, five_link, semi_trailing_arm, strut

Array = NDArray[np.float64]
Planar = tuple[Corner, dict[str, float]]

#: Central difference of sixth order: offsets and weights; its error goes with the sixth power of the step (mm).
OFFSETS = np.array([-3.0, -2.0, -1.0, 1.0, 2.0, 3.0])
WEIGHTS = np.array([-1.0, 9.0, -45.0, 45.0, -9.0, 1.0]) / 60.0
STEP = 2.0


def per_rise_of_contact(corner: Corner, column: str, travel: float = 0.0) -> float:
    """Change of a reading per mm of rise of the contact point, from solved poses only."""
    readings = corner_readings(solve_motion(corner, travel + STEP * OFFSETS))
    return float((WEIGHTS @ readings[column]) / (WEIGHTS @ readings["contact_z_mm"]))


@pytest.fixture(params=["double A-arm", "strut"])
def planar_corner(request: pytest.FixtureRequest, planar_double_a_arm: Planar, planar_strut: Planar) -> Corner:
    return {"double A-arm": planar_double_a_arm, "strut": planar_strut}[request.param][0]


@pytest.mark.parametrize("travel", [-30.0, 0.0, 40.0])
def test_camber_changes_per_rise_of_the_contact_by_one_over_the_swing_arm(planar_corner: Corner, travel: float) -> None:
    # W. F. and D. L. Milliken, Race Car Vehicle Dynamics, SAE 1995, ch. 17 (from memory). In our sign camber falls as
    # the wheel rises about a centre inboard of it.
    length = float(corner_readings(solve_motion(planar_corner, travel))["fvsa_length_mm"])
    rate = np.radians(per_rise_of_contact(planar_corner, "camber_deg", travel))
    assert -rate * length == pytest.approx(1.0, abs=1e-9)


def test_for_one_millimetre_the_swing_arm_turns_by_the_angle_of_its_rise(planar_corner: Corner) -> None:
    # Common practice: degrees of camber for one unit of travel are atan(1/FVSA). It is the rate's first order, so over
    # a whole millimetre it holds to the change that the swing arm itself undergoes.
    readings = corner_readings(solve_motion(planar_corner, [0.0, -0.5, 0.5]))
    rise = readings["contact_z_mm"][2] - readings["contact_z_mm"][1]
    lean = readings["camber_deg"][1] - readings["camber_deg"][2]
    assert lean / rise == pytest.approx(np.degrees(np.arctan(1.0 / readings["fvsa_length_mm"][0])), rel=1e-5)


def test_the_roll_centre_stands_at_half_the_track_times_the_slope_of_the_contact_path(planar_corner: Corner) -> None:
    # Roll-centre height of a symmetric axle (from memory): (track/2)(dy/dz of the contact point).
    readings = corner_readings(solve_motion(planar_corner, 0.0))
    slope = per_rise_of_contact(planar_corner, "half_track_change_mm")
    assert readings["roll_centre_height_mm"] == pytest.approx(readings["contact_y_mm"] * slope, abs=1e-6)
    # The same height by construction: where the line from contact to instant centre meets the car's middle.
    centre = front_instant_centre(solve_motion(planar_corner, 0.0))
    contact = np.array([readings["contact_y_mm"], readings["contact_z_mm"]])
    towards = centre[1:] - contact
    assert readings["roll_centre_height_mm"] == pytest.approx(-contact[0] * towards[1] / towards[0], rel=1e-12)


def arms_aimed_at(centre_y: float, centre_z: float) -> Corner:
    """A planar double A-arm whose arms both point at (y, z) in front view; the ground is z = 0."""
    centre = np.array([centre_y, centre_z])
    points: dict[str, Array] = {}
    for arm, ball in (("lower_arm", np.array([700.0, 150.0])), ("upper_arm", np.array([655.0, 430.0]))):
        pivot = ball + (centre - ball) * (300.0 / np.hypot(*(centre - ball)))
        points[f"{arm}.ball_joint"] = np.append(0.0, ball)
        points[f"{arm}.front_pivot"], points[f"{arm}.rear_pivot"] = np.append(150.0, pivot), np.append(-150.0, pivot)
    for end, of in (("inboard", "rear_pivot"), ("outboard", "ball_joint")):
        points[f"tie_rod.{end}"] = points[f"lower_arm.{of}"] * np.array([0.0, 1.0, 1.0]) - np.array([120.0, 0.0, 0.0])
    points["wheel.centre"] = np.array([0.0, 760.0, 300.0])
    wheel = Wheel(points["wheel.centre"], loaded_radius=300.0)
    return Corner(double_a_arm.LAYOUT.mechanism(points), wheel, steering_axis=double_a_arm.LAYOUT.steering_axis)


@pytest.mark.parametrize(("height", "goes"), [(120.0, 1.0), (60.0, 1.0), (0.0, 0.0), (-60.0, -1.0), (-120.0, -1.0)])
def test_the_contact_moves_outward_in_bump_when_the_instant_centre_is_above_ground(height: float, goes: float) -> None:
    # Common practice: outward with the centre inboard and above ground, inward with it below, and at first order not
    # at all with it on the ground. The amount is height over length of the swing arm.
    corner = arms_aimed_at(-900.0, height)
    readings = corner_readings(solve_motion(corner, 0.0))
    assert readings["front_centre_y_mm"] == pytest.approx(-900.0, abs=1e-8)
    assert readings["front_centre_z_mm"] == pytest.approx(height, abs=1e-8)
    slope = per_rise_of_contact(corner, "half_track_change_mm")
    assert slope == pytest.approx(height / (760.0 + 900.0), abs=1e-9)
    assert np.sign(np.round(slope, 9)) == goes


def test_arms_that_are_parallel_have_their_centre_at_infinity_and_a_roll_centre_all_the_same() -> None:
    # Common practice: with level parallel arms of one length the contact rises straight and the roll centre is on the
    # ground.
    corner = arms_aimed_at(0.0, 0.0)
    level = {
        name: np.array([x, ball[1] - 300.0, ball[2]])
        for arm in ("lower_arm", "upper_arm")
        for ball in (corner.point(f"{arm}.ball_joint"),)
        for name, x in ((f"{arm}.front_pivot", 150.0), (f"{arm}.rear_pivot", -150.0))
    }
    rod = corner.point("tie_rod.outboard") - np.array([0.0, 300.0, 0.0])
    parallel = replace(corner, mechanism=corner.mechanism.with_points({**level, "tie_rod.inboard": rod}))
    readings = corner_readings(solve_motion(parallel, 0.0))
    assert np.isinf(readings["fvsa_length_mm"])
    assert readings["roll_centre_height_mm"] == pytest.approx(0.0, abs=1e-10)
    assert readings["camber_rate_deg_per_mm"] == pytest.approx(0.0, abs=1e-12)


@pytest.mark.parametrize(("force", "lifts"), [((0.0, -1000.0, 0.0), 1.0), ((0.0, 1000.0, 0.0), -1.0)])
def test_a_side_force_jacks_by_its_slope(force: tuple[float, float, float], lifts: float) -> None:
    # Jacking (from memory): |F_z| = |F_y| dy/dz, F_x likewise. On the outer wheel of a bend the road pushes inward;
    # with the roll centre above ground that lifts the body (common practice).
    corner = arms_aimed_at(-900.0, 120.0)
    slope = per_rise_of_contact(corner, "half_track_change_mm")
    assert jacking_force(solve_motion(corner, 0.0), force) == pytest.approx(lifts * 1000.0 * slope, abs=1e-6)


def arm_behind(angle_deg: float, axle: str, shaft: bool) -> Corner:
    """A wheel on an arm whose pivot runs straight across, so the pivot is the side-view instant centre.

    The line from the contact point (torque held by the knuckle) or from the wheel centre (drive shaft) to the pivot
    rises by ``angle_deg`` toward the other axle.
    """
    contact = np.array([0.0, 700.0, 0.0])
    centre = contact + np.array([0.0, 0.0, 300.0])
    reach = 900.0 * (-1.0 if axle == "front" else 1.0)
    start = centre if shaft else contact
    pivot = start + np.array([reach, -200.0, 900.0 * np.tan(np.radians(angle_deg))])
    points = {"arm.inner_pivot": pivot, "arm.outer_pivot": pivot + np.array([0.0, 150.0, 0.0]), "wheel.centre": centre}
    return Corner(
        semi_trailing_arm.LAYOUT.mechanism(points),
        Wheel(centre, loaded_radius=300.0),
        carrier="arm",
        axle="front" if axle == "front" else "rear",
        vehicle=Vehicle(2550.0, 600.0, front_brake_share=0.6, front_drive_share=0.6),
    )


@pytest.mark.parametrize(
    ("axle", "shaft", "column", "share"),
    [
        ("front", False, "anti_dive_percent", 0.6),
        ("rear", False, "anti_lift_percent", 0.4),
        ("rear", True, "anti_squat_percent", 0.4),
        ("front", True, "anti_lift_drive_percent", 0.6),
    ],
)
@pytest.mark.parametrize("angle", [5.5993, 12.0, -4.0])
def test_anti_dive_and_its_kin(axle: str, shaft: bool, column: str, share: float, angle: float) -> None:
    # From memory: 100 · share · tan α · wheelbase / centre-of-gravity height, α toward the other axle.
    motion = solve_motion(arm_behind(angle, axle, shaft), 0.0)
    pivot = motion.corner.point("arm.inner_pivot")
    np.testing.assert_allclose(side_instant_centre(motion)[[0, 2]], pivot[[0, 2]], atol=1e-9)
    worked = 100.0 * share * np.tan(np.radians(angle)) * 2550.0 / 600.0
    assert corner_readings(motion)[column] == pytest.approx(worked, rel=1e-9)


def test_the_worked_figure_of_anti_dive() -> None:
    # Worked value (from memory): share 0.6, wheelbase 2550, height 600, α = 5.5993° give 25 %.
    readings = corner_readings(solve_motion(arm_behind(5.5993, "front", shaft=False), 0.0))
    assert readings["anti_dive_percent"] == pytest.approx(25.0, abs=5e-4)


def links_only(count: int) -> Corner:
    """The five-link example with some of its links, or with a sixth."""
    layout = five_link.LAYOUT
    mechanism = layout.mechanism(layout.example, steered=False)
    sixth = Rod("sixth", "chassis", "sixth.inboard", "knuckle", "sixth.outboard")
    extra = {"sixth.inboard": np.array([20.0, 380.0, 330.0]), "sixth.outboard": np.array([-70.0, 690.0, 300.0])}
    whole = replace(mechanism, joints=(*mechanism.joints, sixth), points={**mechanism.points, **extra})
    return Corner(
        replace(whole, joints=whole.joints[:count]),
        Wheel(np.array(layout.example["wheel.centre"]), loaded_radius=300.0),
    )


def test_five_links_leave_the_knuckle_one_freedom() -> None:
    # Common practice: five links that carry tension or compression restrain a knuckle to one degree of freedom.
    counted = audit(links_only(5).mechanism)
    assert (counted.by_count, counted.by_rank, counted.inputs) == (1, 1, 1)


def test_four_links_leave_two_freedoms_and_six_none() -> None:
    four, six = mobility(links_only(4).mechanism), mobility(links_only(6).mechanism)
    assert (four.by_count, four.by_rank) == (2, 2)
    assert (six.by_count, six.by_rank) == (0, 0)
    with pytest.raises(MechanismError, match="knuckle") as free:
        audit(links_only(4).mechanism)
    assert free.value.body == "knuckle"
    with pytest.raises(MechanismError, match="too many"):
        audit(links_only(6).mechanism)


def assert_same_motion(one: Motion, other: Motion, body: str = "knuckle") -> None:
    assert one.reached.all()
    assert other.reached.all()
    np.testing.assert_allclose(other.rotation(body), one.rotation(body), rtol=0.0, atol=1e-11)
    np.testing.assert_allclose(
        other.point("wheel", other.corner.wheel.centre),
        one.point("wheel", one.corner.wheel.centre),
        rtol=0.0,
        atol=1e-8,
    )


TRAVEL, RACK = np.linspace(-60.0, 60.0, 9)[:, None], np.array([-20.0, 0.0, 20.0])


def test_an_a_arm_counts_as_two_links(spatial_double_a_arm: Corner, spatial_double_a_arm_as_five_links: Corner) -> None:
    # Common practice. Two A-arms and a tie rod are 2 + 2 + 1 links, and move the knuckle alike.
    arms, links = spatial_double_a_arm, spatial_double_a_arm_as_five_links
    assert len(links.mechanism.rods) == 2 + 2 + 1
    assert mobility(arms.mechanism).by_rank == mobility(links.mechanism).by_rank == 2
    assert_same_motion(solve_motion(arms, TRAVEL, RACK), solve_motion(links, TRAVEL, RACK))


def test_a_strut_counts_as_two_links() -> None:
    # Common practice. A point of the chassis on a line of the knuckle takes two equations, as two links do: with an
    # A-arm in two legs and a tie rod they are 2 + 2 + 1, and move the knuckle as the sliding strut does.
    layout = strut.LAYOUT
    sliding = layout.mechanism(layout.example)
    legs = tuple(
        Rod(f"{end} leg", "chassis", f"lower_arm.{end}_pivot", "knuckle", "lower_arm.ball_joint")
        for end in ("front", "rear")
    )
    mount = PointOnLine("strut", "chassis", "strut.top_mount", "knuckle", ("strut.axis_lower", "strut.top_mount"))
    tie_rod = next(rod for rod in sliding.rods if rod.name == "tie_rod")
    rack = next(body for body in sliding.bodies if body.name == "rack")
    reduced = replace(sliding, bodies=(rack, FreeBody("knuckle")), joints=(*legs, mount, tie_rod))
    assert sum(joint.equations for joint in reduced.joints) == 5
    assert audit(reduced).by_rank == 2
    wheel = Wheel(np.array(layout.example["wheel.centre"]), loaded_radius=300.0)
    assert_same_motion(
        solve_motion(Corner(sliding, wheel, steering_axis=layout.steering_axis), TRAVEL, RACK),
        solve_motion(Corner(reduced, wheel, steering_axis=layout.steering_axis), TRAVEL, RACK),
    )


def test_rates_agree_with_differences_of_solved_poses(spatial_double_a_arm: Corner) -> None:
    # The exact rates against the same central difference, on a corner that is not planar.
    rates = corner_readings(solve_motion(spatial_double_a_arm, 25.0, 8.0))
    readings = corner_readings(solve_motion(spatial_double_a_arm, 25.0 + STEP * OFFSETS, 8.0))
    for column, rate in (("camber_deg", "camber_rate_deg_per_mm"), ("toe_deg", "toe_rate_deg_per_mm")):
        assert rates[rate] == pytest.approx(float(WEIGHTS @ readings[column]) / STEP, rel=1e-8)
