"""The mobility audit names what is free, and what is one too many."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from knucklepath.kinematics.audit import audit, mobility
from knucklepath.kinematics.errors import MechanismError
from knucklepath.kinematics.mechanism import (
    CoordinateInput,
    Fixed,
    FreeBody,
    HingedBody,
    Layout,
    Mechanism,
    PointInput,
    Rod,
)
from knucklepath.plugins.layouts import double_a_arm, five_link, semi_trailing_arm, strut

A_ARMS, FIVE, STRUT, ARM = double_a_arm.LAYOUT, five_link.LAYOUT, strut.LAYOUT, semi_trailing_arm.LAYOUT


def mechanism(layout: Layout, steered: bool = True, **points: tuple[float, float, float]) -> Mechanism:
    changed = {name.replace("__", "."): at for name, at in points.items()}
    return layout.mechanism({**layout.example, **changed}, steered=steered and layout.steers)


@pytest.mark.parametrize("layout", [A_ARMS, FIVE, STRUT, ARM], ids=lambda layout: layout.id)
@pytest.mark.parametrize("steered", [True, False])
def test_count_and_rank_agree_with_the_inputs_of_every_layout(layout: Layout, steered: bool) -> None:
    counted = audit(mechanism(layout, steered))
    assert counted.by_count == counted.by_rank == counted.inputs
    assert counted.inputs == 1 + (steered and layout.steers)


def test_without_its_tie_rod_the_knuckle_turns_about_its_ball_joints() -> None:
    with pytest.raises(MechanismError, match="knuckle turns about its own ball joints") as caught:
        audit(mechanism(replace(A_ARMS, joints=A_ARMS.joints[:2])))
    assert caught.value.body == "knuckle"


def test_without_its_ball_joint_an_arm_turns_about_its_pivots() -> None:
    with pytest.raises(MechanismError, match=r"upper_arm turns about the line through upper_arm\.front_pivot"):
        audit(mechanism(replace(A_ARMS, joints=A_ARMS.joints[1:])))


def test_a_strut_without_its_top_mount_slides() -> None:
    with pytest.raises(MechanismError, match="strut slides along"):
        audit(mechanism(replace(STRUT, joints=STRUT.joints[1:])))


def test_four_links_leave_a_freedom_and_a_sixth_is_one_too_many() -> None:
    with pytest.raises(MechanismError, match="keeps a freedom that no input sets: knuckle screws"):
        audit(mechanism(replace(FIVE, joints=FIVE.joints[:4])))
    sixth = Rod("sixth", "chassis", "lower_front.inboard", "knuckle", "upper_rear.outboard")
    with pytest.raises(MechanismError, match=r"one joint is too many: .*sixth .*1 freedom by count for 2 inputs"):
        audit(mechanism(replace(FIVE, joints=(*FIVE.joints, sixth))))


def test_of_what_holds_one_motion_twice_the_rods_are_named_for_they_can_go() -> None:
    """A brace beside the tie rod: nobody takes away a ball joint to be rid of it."""
    brace = Rod("brace", "chassis", "lower_arm.rear_pivot", "knuckle", "wheel.centre")
    with pytest.raises(MechanismError, match=r"one joint is too many: tie_rod or brace \(1 freedom by count") as caught:
        audit(mechanism(replace(A_ARMS, joints=(*A_ARMS.joints, brace))))
    assert caught.value.joint == "brace"
    assert "ball joint" not in str(caught.value)


def test_two_links_in_one_line_hold_the_same_motion() -> None:
    same = {
        "upper_front__inboard": FIVE.example["upper_rear.inboard"],
        "upper_front__outboard": FIVE.example["upper_rear.outboard"],
    }
    with pytest.raises(MechanismError, match="upper_front and upper_rear hold one and the same motion"):
        audit(mechanism(FIVE, **same))


def test_a_rod_on_a_body_that_cannot_move_is_named() -> None:
    link = Rod("link", "chassis", "arm.inner_pivot", "arm", "wheel.centre")
    with pytest.raises(MechanismError, match="one joint is too many: link"):
        audit(mechanism(replace(ARM, joints=(link,))))


def test_an_upright_axis_cannot_raise_the_wheel() -> None:
    points = {"arm__inner_pivot": (300.0, 600.0, 200.0), "arm__outer_pivot": (300.0, 600.0, 400.0)}
    with pytest.raises(MechanismError, match="Travel does not move with it"):
        audit(mechanism(ARM, **points))


def test_a_mechanism_without_joints_has_all_its_freedoms() -> None:
    loose = Mechanism((FreeBody("block"),), (), (PointInput("lift", "block", "tip"),), {"tip": np.array([0, 0, 1.0])})
    assert mobility(loose).by_rank == 6
    driven = Mechanism(
        (HingedBody("crank", ("p", "q")),), (), (CoordinateInput("turn", "crank"),), {"p": (0, 0, 0), "q": (0, 0, 1)}
    )
    assert audit(driven).by_rank == 1


def test_a_knuckle_that_is_held_at_its_wheel_centre_alone_has_its_freedom_counted_all_the_same() -> None:
    """Welded to the arm at the very point that it is described by: no arm to turn on, and yet it turns."""
    made = ARM.mechanism(ARM.example)
    bodies = (*made.bodies, FreeBody("knuckle"))
    weld = Fixed("weld", "arm", "knuckle", "wheel.centre")
    counted = audit(Mechanism(bodies, (weld,), (PointInput("travel", "knuckle", "wheel.centre"),), made.points))
    assert counted.by_count == counted.by_rank == 1


def test_variants_are_audited_one_at_a_time() -> None:
    variants = {name: np.array(at) + np.zeros((3, 1)) for name, at in FIVE.example.items()}
    with pytest.raises(MechanismError, match="one geometry at a time"):
        audit(FIVE.mechanism(variants))
