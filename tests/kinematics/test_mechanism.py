"""A mechanism is checked when it is made: what makes no sense is refused by name."""

from __future__ import annotations

import numpy as np
import pytest

from knucklepath.kinematics.errors import MechanismError
from knucklepath.kinematics.mechanism import (
    Ball,
    CoordinateInput,
    Fixed,
    FreeBody,
    Hinge,
    HingedBody,
    Mechanism,
    PointInput,
    PointOnLine,
    Rod,
    SlidingBody,
)
from knucklepath.plugins.layouts import double_a_arm, five_link, semi_trailing_arm, strut

A_ARMS, STRUT = double_a_arm.LAYOUT, strut.LAYOUT
PQ = {"p": np.zeros(3), "q": np.array([100.0, 0.0, 0.0]), "r": np.array([0.0, 100.0, 0.0])}


def mechanism(layout: object = A_ARMS, **points: tuple[float, float, float]) -> Mechanism:
    changed = {name.replace("__", "."): at for name, at in points.items()}
    return layout.mechanism({**layout.example, **changed})  # type: ignore[attr-defined]


WRONG = {
    "two bodies of one name": (
        lambda: Mechanism((FreeBody("a"), FreeBody("a")), (), (), {}),
        "two bodies are called 'a'",
    ),
    "parent after child": (
        lambda: Mechanism((HingedBody("a", ("p", "q"), parent="b"), FreeBody("b")), (), (), {"p": 0, "q": 1}),
        "hangs on 'b', which is not declared before it",
    ),
    "unknown body": (
        lambda: Mechanism((FreeBody("a"),), (Ball("pin", "a", "b", "p"),), (), {"p": (0, 0, 0)}),
        "joint 'pin' ties an unknown body 'b'",
    ),
    "body tied to itself": (
        lambda: Mechanism((FreeBody("a"),), (Ball("pin", "a", "a", "p"),), (), {"p": (0, 0, 0)}),
        "ties 'a' to itself",
    ),
    "point not given": (
        lambda: Mechanism((FreeBody("a"),), (Ball("pin", "a", "chassis", "p"),), (), {}),
        "'pin' needs the point p",
    ),
    "point not finite": (
        lambda: Mechanism((FreeBody("a"),), (Ball("pin", "a", "chassis", "p"),), (), {"p": (0, np.nan, 0)}),
        "the point p must be three finite numbers",
    ),
    "axis without length": (
        lambda: mechanism(A_ARMS, upper_arm__front_pivot=A_ARMS.example["upper_arm.rear_pivot"]),
        "'upper_arm' has no axis",
    ),
    "rod without length": (
        lambda: mechanism(A_ARMS, tie_rod__outboard=A_ARMS.example["tie_rod.inboard"]),
        "'tie_rod' has no length",
    ),
    "ball joint on the axis": (
        lambda: mechanism(A_ARMS, upper_arm__ball_joint=(-25.0, 332.5, 321.0)),
        "'upper_arm' turns without moving it",
    ),
    "missing hardpoint": (
        lambda: A_ARMS.mechanism({"wheel.centre": (0, 1, 2)}),
        "layout 'double-a-arm' needs the point upper_arm.front_pivot",
    ),
    "rack without direction": (
        lambda: A_ARMS.mechanism(A_ARMS.example, rack_axis=(0.0, 0.0, 0.0)),
        "the rack's axis has no direction",
    ),
    "point of two numbers": (
        lambda: Mechanism((FreeBody("a"),), (Ball("pin", "a", "chassis", "p"),), (), {"p": (0.0, 1.0)}),
        "the point p must be three finite numbers",
    ),
    "two joints of one name": (
        lambda: Mechanism(
            (FreeBody("a"),), (Ball("pin", "a", "chassis", "p"), Ball("pin", "a", "chassis", "q")), (), PQ
        ),
        "two joints are called 'pin'",
    ),
    "two rods of one name": (
        lambda: Mechanism((FreeBody("a"),), (Rod("r", "a", "p", "chassis", "q"),) * 2, (), PQ),
        "two bodies are called 'r'",
    ),
    "rod named like a body": (
        lambda: Mechanism((FreeBody("a"),), (Rod("a", "a", "p", "chassis", "q"),), (), PQ),
        "two bodies are called 'a'",
    ),
    "joint on a rod": (
        lambda: Mechanism(
            (FreeBody("a"),), (Rod("r", "a", "p", "chassis", "q"), Ball("pin", "r", "chassis", "p")), (), PQ
        ),
        "joint 'pin' ties an unknown body 'r'",
    ),
    "line without length": (
        lambda: Mechanism((FreeBody("a"),), (PointOnLine("s", "a", "p", "chassis", ("q", "q")),), (), PQ),
        "'s' has no length",
    ),
    "point off its line": (
        lambda: Mechanism((FreeBody("a"),), (PointOnLine("s", "a", "r", "chassis", ("p", "q")),), (), PQ),
        "r does not lie on the line through p and q, on which 's' is to keep it",
    ),
    "hinge joint without length": (
        lambda: Mechanism((FreeBody("a"),), (Hinge("h", "a", "chassis", ("p", "p")),), (), PQ),
        "'h' has no length",
    ),
    "slide without direction": (
        lambda: Mechanism((SlidingBody("a", "p"),), (), (), PQ),
        "p has no direction, so 'a' cannot slide",
    ),
    "two inputs of one name": (
        lambda: Mechanism((FreeBody("a"),), (), (PointInput("lift", "a", "p"), PointInput("lift", "a", "q")), PQ),
        "two inputs are called 'lift'",
    ),
    "input on no body": (
        lambda: Mechanism((FreeBody("a"),), (), (PointInput("lift", "hub", "p"),), PQ),
        "'lift' is to move 'hub', which is no moving body; moving bodies: a",
    ),
    "input on the chassis": (
        lambda: Mechanism((FreeBody("a"),), (), (PointInput("lift", "chassis", "p"),), PQ),
        "'lift' is to move 'chassis', which is no moving body",
    ),
    "input without direction": (
        lambda: Mechanism((FreeBody("a"),), (), (PointInput("lift", "a", "p", (0.0, 0.0, 0.0)),), PQ),
        "'lift' needs a direction",
    ),
    "input whose direction is not a number": (
        lambda: Mechanism((FreeBody("a"),), (), (PointInput("lift", "a", "p", (0.0, np.nan, 1.0)),), PQ),
        "'lift' needs a direction",
    ),
    "coordinate of a free body": (
        lambda: Mechanism((FreeBody("a"),), (), (CoordinateInput("turn", "a"),), PQ),
        "'turn' is to set the coordinate of 'a', which is free",
    ),
    "coordinate set twice": (
        lambda: Mechanism(
            (HingedBody("a", ("p", "q")),), (), (CoordinateInput("turn", "a"), CoordinateInput("wind", "a")), PQ
        ),
        "two inputs set the coordinate of 'a'",
    ),
}


@pytest.mark.parametrize("case", WRONG)
def test_a_declaration_that_makes_no_sense_is_refused_by_name(case: str) -> None:
    build, message = WRONG[case]
    with pytest.raises(MechanismError, match=message):
        build()


def test_bodies_share_points_where_a_joint_holds_them() -> None:
    corner = mechanism(A_ARMS)
    assert corner.shared_points("lower_arm", "knuckle") == ("lower_arm.ball_joint",)
    assert corner.shared_points("tie_rod", "rack") == ("tie_rod.inboard",)
    assert corner.shared_points("upper_arm", "chassis") == ("upper_arm.front_pivot", "upper_arm.rear_pivot")
    assert corner.shared_points("upper_arm", "lower_arm") == ()


def test_every_joint_knows_its_equations_and_points() -> None:
    joints = (
        Rod("rod", "a", "p", "chassis", "q"),
        Ball("ball", "a", "chassis", "p"),
        PointOnLine("line", "a", "p", "chassis", ("p", "q")),
        Hinge("hinge", "a", "chassis", ("p", "q")),
        Fixed("weld", "a", "chassis", "p"),
    )
    assert [joint.equations for joint in joints] == [1, 3, 2, 5, 6]
    assert [set(joint.points) for joint in joints] == [{"p", "q"}, {"p"}, {"p", "q"}, {"p", "q"}, {"p"}]


def test_data_are_frozen() -> None:
    made = mechanism()
    with pytest.raises(AttributeError):
        made.bodies = ()  # type: ignore[misc]
    with pytest.raises(TypeError):
        made.points["wheel.centre"] = np.zeros(3)  # type: ignore[index]


def test_points_are_replaced_by_name_and_only_known_ones() -> None:
    made = mechanism()
    moved = made.with_points({"wheel.centre": (1.0, 650.0, 230.0)})
    assert moved.points["wheel.centre"].tolist() == [1.0, 650.0, 230.0]
    assert made.points["wheel.centre"].tolist() == [0.0, 650.0, 230.0]
    assert not moved.is_batched
    assert made.with_points({"wheel.centre": np.zeros((4, 3)) + [0.0, 650.0, 230.0]}).is_batched
    with pytest.raises(MechanismError, match=r"there is no point 'wheel\.center'"):
        made.with_points({"wheel.center": (0.0, 0.0, 0.0)})


def test_bodies_are_found_by_name() -> None:
    made = mechanism()
    assert made.body("knuckle") == FreeBody("knuckle")
    assert made.body_names == ("chassis", "upper_arm", "lower_arm", "rack", "knuckle", "tie_rod")
    with pytest.raises(MechanismError, match="there is no body 'knuckel'"):
        made.body("knuckel")


def test_neighbours_share_a_joint_and_rods_are_bodies_among_them() -> None:
    pairs = mechanism().neighbours()
    assert frozenset(("upper_arm", "chassis")) in pairs
    assert frozenset(("upper_arm", "knuckle")) in pairs
    assert frozenset(("rack", "tie_rod")) in pairs
    assert frozenset(("rack", "knuckle")) not in pairs
    assert frozenset(("strut", "knuckle")) in mechanism(STRUT).neighbours()


def test_an_axle_without_a_rack_holds_its_tie_rod_on_the_chassis() -> None:
    fixed = A_ARMS.mechanism(A_ARMS.example, steered=False)
    assert "rack" not in fixed.body_names
    assert fixed.rods[0].body_a == "chassis"
    assert [item.name for item in fixed.inputs] == ["travel"]


def test_the_racks_axis_is_a_direction_of_any_length() -> None:
    long = A_ARMS.mechanism(A_ARMS.example, rack_axis=(0.0, 250.0, 0.0))
    np.testing.assert_array_equal(long.points["rack.axis"], [0.0, 1.0, 0.0])


@pytest.mark.parametrize("module", [double_a_arm, strut, five_link, semi_trailing_arm])
def test_every_layout_names_the_points_that_it_needs(module: object) -> None:
    layout = module.LAYOUT  # type: ignore[attr-defined]
    assert set(layout.example) == {*layout.point_names, "wheel.centre"}
    for name in layout.point_names:
        given = {point: at for point, at in layout.example.items() if point != name}
        with pytest.raises(MechanismError, match=f"needs the point {name}"):
            layout.mechanism(given)
