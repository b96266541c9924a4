"""What is said where a mechanism locks: what stands in line, and what follows from it."""

from __future__ import annotations

import numpy as np
import pytest

from knucklepath.kinematics.errors import MechanismError
from knucklepath.kinematics.following import solve
from knucklepath.kinematics.lockup import lock_reason
from knucklepath.kinematics.mechanism import (
    CoordinateInput,
    HingedBody,
    Mechanism,
    PointInput,
    Rod,
    SlidingBody,
)
from knucklepath.kinematics.motion import find_limit
from knucklepath.kinematics.wheel import Corner, Wheel
from knucklepath.plugins.layouts import double_a_arm, five_link, semi_trailing_arm, strut


def corner_of(module: object, **changed: tuple[float, float, float]) -> Corner:
    layout = module.LAYOUT  # type: ignore[attr-defined]
    points = {**layout.example, **{name.replace("__", "."): at for name, at in changed.items()}}
    mechanism = layout.mechanism(points, steered=layout.steers)
    return Corner(mechanism, Wheel(points["wheel.centre"], 280.0), layout.carrier, layout.steering_axis)


def reason(corner: Corner, input: str, towards: float) -> str:
    limit = find_limit(corner, input, towards)
    assert limit is not None
    assert limit.input == input
    return limit.reason


@pytest.mark.parametrize("module", [double_a_arm, strut, five_link], ids=lambda module: module.LAYOUT.id)
@pytest.mark.parametrize("towards", [900.0, -900.0])
def test_the_rack_runs_out_where_its_link_points_straight_at_the_steering_axis(module: object, towards: float) -> None:
    """The link's line meets the axis about which the knuckle turns with the wheel held: a common dead centre."""
    corner = corner_of(module)
    link = corner.mechanism.rods[-1]
    said = reason(corner, "rack", towards)
    in_line = f"{link.name} stands in line with knuckle at {link.point_b}"
    assert said == f"{in_line} and points straight at the axis about which knuckle turns: rack has no lever on it"
    # the same as a fact: the power of a force along the link on the knuckle's turn about that axis is next to nothing
    limit = find_limit(corner, "rack", towards)
    assert limit is not None
    near = solve(corner.mechanism, {"rack": limit.value_mm * 0.99999})
    rates = near.rates[:, near.closure.input_names.index("rack")]
    assert np.linalg.norm(rates[:3]) > 20.0 * np.linalg.norm(solve(corner.mechanism, {}).rates[:3, 1])


def test_an_arm_that_carries_the_wheel_runs_out_at_the_top_and_the_bottom_of_its_circle() -> None:
    corner = corner_of(semi_trailing_arm)
    about = "arm turns about the line through arm.inner_pivot and arm.outer_pivot, which carries the wheel centre level"
    assert reason(corner, "travel", 900.0) == f"{about}: the wheel centre is at the top of its path"
    assert reason(corner, "travel", -900.0) == f"{about}: the wheel centre is at the bottom of its path"


def test_a_knuckle_that_swings_past_its_arms_is_said_to_turn_about_an_axis_level_with_nothing_held() -> None:
    said = reason(corner_of(double_a_arm), "travel", 900.0)
    assert said.startswith("knuckle turns about the axis through (")
    assert said.endswith("which carries the wheel centre level: the wheel centre is at the top of its path")


def test_a_strut_that_runs_out_by_steering_itself_names_the_tie_rod() -> None:
    """At the end of bump the arm hardly moves; the knuckle only steers, and the tie rod cannot stop it."""
    assert reason(corner_of(strut), "travel", 900.0) == (
        "tie_rod stands in line with knuckle at tie_rod.outboard while lower_arm.ball_joint hardly moves: "
        "the wheel centre is at the top of its path"
    )


def planar_arms() -> Corner:
    """A four-bar in the front view, the wheel centre on the line of its coupler's lower joint: arms and knuckle."""
    points = {
        "upper_arm.front_pivot": (100.0, 300.0, 400.0),
        "upper_arm.rear_pivot": (-100.0, 300.0, 400.0),
        "upper_arm.ball_joint": (0.0, 500.0, 400.0),
        "lower_arm.front_pivot": (100.0, 300.0, 200.0),
        "lower_arm.rear_pivot": (-100.0, 300.0, 200.0),
        "lower_arm.ball_joint": (0.0, 600.0, 200.0),
        "tie_rod.inboard": (80.0, 300.0, 200.0),
        "tie_rod.outboard": (80.0, 600.0, 200.0),
        "wheel.centre": (0.0, 600.0, 200.0),
    }
    mechanism = double_a_arm.LAYOUT.mechanism(points, steered=False)
    return Corner(mechanism, Wheel(np.array(points["wheel.centre"]), 300.0))


def test_an_arm_in_line_with_the_knuckle_is_named_with_its_ball_joint() -> None:
    """The wheel centre sits on the lower ball joint: it can fall until upper arm and knuckle are stretched straight.

    Closed form: then the joint is |upper arm| + |knuckle| from the upper pivot, and |lower arm| from the lower one.
    """
    corner = planar_arms()
    limit = find_limit(corner, "travel", -250.0)
    assert limit is not None
    upper, knuckle, lower, apart = 200.0, np.hypot(100.0, 200.0), 300.0, 200.0
    reach = upper + knuckle
    # height of the joint below the upper pivot, from the triangle of the two pivots and the joint
    below = (reach**2 + apart**2 - lower**2) / (2.0 * apart)
    assert limit.value_mm == pytest.approx(apart - below, abs=0.01)
    assert limit.reason.startswith("upper_arm stands in line with knuckle at upper_arm.ball_joint")


def test_a_crank_and_its_rod_stand_in_line_at_the_pin() -> None:
    pin = np.array([50.0, 0.0, 0.0])
    points = {
        "o": np.zeros(3),
        "o.up": np.array([0.0, 0.0, 1.0]),
        "pin": pin / np.sqrt(2.0) + np.array([0.0, 50.0, 0.0]) / np.sqrt(2.0),
        "slide": np.array([1.0, 0.0, 0.0]),
    }
    points["head"] = np.array([points["pin"][0] + np.sqrt(130.0**2 - points["pin"][1] ** 2), 0.0, 0.0])
    mechanism = Mechanism(
        bodies=(HingedBody("crank", ("o", "o.up")), SlidingBody("piston", "slide", input="push")),
        joints=(Rod("conrod", "crank", "pin", "piston", "head"),),
        inputs=(CoordinateInput("push", "piston"),),
        points=points,
    )
    nearly = solve(mechanism, {"push": 179.999 - points["head"][0]})
    assert nearly.reached
    assert lock_reason(nearly, "push", 1.0) == (
        "conrod stands in line with crank at pin and points straight at the axis about which crank turns: "
        "piston has no lever on it"
    )


def test_a_point_that_is_no_wheel_and_no_height_is_spoken_of_by_its_name() -> None:
    points = {"a": np.zeros(3), "b": np.array([1.0, 0.0, 0.0]), "tip": np.array([0.0, 100.0, 0.0])}
    swing = Mechanism(
        (HingedBody("boom", ("a", "b")),), (), (PointInput("out", "boom", "tip", (0.0, 1.0, 1.0)),), points
    )
    nearly = solve(swing, {"out": 100.0 * (1.0 - np.sqrt(0.5)) - 0.01})
    assert nearly.reached
    assert lock_reason(nearly) == (
        "boom turns about the line through a and b, which carries tip across its direction of travel: "
        "tip is at the end of its path"
    )


def test_where_nothing_is_in_line_no_dead_centre_is_made_up() -> None:
    corner = corner_of(double_a_arm)
    assert lock_reason(solve(corner.mechanism, {"travel": 0.0})) == "no pose beyond it closes every joint"


def test_a_tie_rod_that_ends_on_the_steering_axis_is_named() -> None:
    lower, upper = (np.array(double_a_arm.LAYOUT.example[f"{arm}.ball_joint"]) for arm in ("lower_arm", "upper_arm"))
    on_it = lower + 0.4 * (upper - lower) + np.array([0.05, 0.0, 0.0])
    corner = corner_of(double_a_arm, tie_rod__outboard=tuple(on_it))
    said = lock_reason(solve(corner.mechanism, {"travel": 0.0}))
    assert said.startswith("tie_rod ends on the axis about which knuckle turns: ")


def test_limits_are_sought_for_one_geometry_at_a_time() -> None:
    layout = five_link.LAYOUT
    variants = {name: np.array(at) + np.zeros((3, 1)) for name, at in layout.example.items()}
    corner = Corner(layout.mechanism(variants), Wheel(layout.example["wheel.centre"], 280.0))
    with pytest.raises(MechanismError, match="one geometry at a time"):
        find_limit(corner, "travel", 900.0)


def test_a_knuckle_on_parallel_equal_arms_slides_over_the_top() -> None:
    """It never turns: its arms stand upright there, and it goes level."""
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
    corner = Corner(double_a_arm.LAYOUT.mechanism(points), Wheel(np.array(points["wheel.centre"]), 300.0))
    limit = find_limit(corner, "travel", 500.0)
    assert limit is not None
    assert limit.value_mm == pytest.approx(300.0, abs=0.01)
    assert limit.reason.startswith("knuckle slides along (0.00, -1.00")
    assert limit.reason.endswith("which carries the wheel centre level: the wheel centre is at the top of its path")
