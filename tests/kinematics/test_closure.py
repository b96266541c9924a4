"""Joint equations: exact derivatives for every joint between every kind of body, and Newton's method on them."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest

from knucklepath.kinematics.closure import Closure
from knucklepath.kinematics.following import solve
from knucklepath.kinematics.mechanism import (
    Ball,
    CoordinateInput,
    Fixed,
    FreeBody,
    Hinge,
    HingedBody,
    Joint,
    Mechanism,
    PointInput,
    PointOnLine,
    Rod,
    SlidingBody,
)
from knucklepath.kinematics.motion import solve_motion
from knucklepath.kinematics.tree import State
from knucklepath.kinematics.wheel import Corner, Wheel
from knucklepath.plugins.layouts import double_a_arm, five_link

#: Every kind of body, and chains of them: hinged on hinged, sliding on free, hinged on sliding on free.
BODIES = (
    HingedBody("arm", ("arm.a", "arm.b")),
    HingedBody("rocker", ("rocker.a", "rocker.b"), parent="arm"),
    SlidingBody("rack", "rack.axis", input="rack"),
    HingedBody("crank", ("crank.a", "crank.b"), input="turn"),
    HingedBody("pawl", ("pawl.a", "pawl.b"), parent="crank"),
    FreeBody("block"),
    SlidingBody("slider", ("slider.top", "slider.low"), parent="block"),
    HingedBody("flap", ("flap.a", "flap.b"), parent="slider"),
    FreeBody("other"),
)
PAIRS = (
    ("block", "chassis"),
    ("chassis", "block"),
    ("arm", "block"),
    ("rocker", "block"),
    ("slider", "other"),
    ("flap", "rocker"),
    ("block", "flap"),
    ("rack", "other"),
    ("rack", "chassis"),
    ("pawl", "slider"),
    ("arm", "rocker"),
)
JOINTS = {
    "rod": lambda a, b: Rod("joint", a, "p", b, "q"),
    "ball": lambda a, b: Ball("joint", a, b, "p"),
    "point on line": lambda a, b: PointOnLine("joint", a, "on_line", b, ("p", "q")),
    "hinge": lambda a, b: Hinge("joint", a, b, ("p", "q")),
    "fixed": lambda a, b: Fixed("joint", a, b, "p"),
}


def points(variants: tuple[int, ...] = ()) -> dict[str, np.ndarray]:
    random = np.random.default_rng(7)
    names = [f"{body}.{end}" for body in ("arm", "rocker", "crank", "pawl", "flap") for end in "ab"]
    made = {name: random.uniform(-300.0, 300.0, 3) for name in (*names, "slider.top", "slider.low", "p", "q", "tip")}
    if variants:
        made = {name: at + random.uniform(-10.0, 10.0, (*variants, 3)) for name, at in made.items()}
    return {**made, "on_line": made["p"] + 0.3 * (made["q"] - made["p"]), "rack.axis": np.array([0.0, 1.0, 0.0])}


def mechanism(joint: Joint | None, variants: tuple[int, ...] = ()) -> Mechanism:
    inputs = (
        PointInput("lift", "flap", "tip", (1.0, -2.0, 2.0)),
        CoordinateInput("rack", "rack"),
        CoordinateInput("turn", "crank"),
    )
    return Mechanism(BODIES, (joint,) if joint else (), inputs, points(variants))


def somewhere(closure: Closure, count: int, seed: int = 11) -> State:
    """Poses far from design, every coordinate moved."""
    tree, random = closure.tree, np.random.default_rng(seed)
    step = random.normal(size=(tree.unknowns, count)) * 50.0 / tree.scale[: tree.unknowns, None]
    state = tree.advance(tree.design(count), step)
    return tree.with_driven(state, {"rack": random.normal(size=count) * 20.0, "turn": random.normal(size=count) * 0.3})


def moved(closure: Closure, state: State, column: int, step: float) -> State:
    """The state with one coordinate moved, the driven ones as well."""
    tree = closure.tree
    if column < tree.unknowns:
        return tree.advance(state, step * np.eye(tree.unknowns)[:, [column]])
    name = tree.driven[column - tree.unknowns]
    values = {item.name: state.scalars[tree.links[item.body].slot] for item in closure.mechanism.inputs[1:]}
    return tree.with_driven(state, {**values, name: values[name] + step})


@pytest.mark.parametrize("pair", PAIRS, ids="-".join)
@pytest.mark.parametrize("kind", JOINTS)
def test_the_jacobian_equals_central_differences(kind: str, pair: tuple[str, str]) -> None:
    closure = Closure(mechanism(JOINTS[kind](*pair)))
    state = somewhere(closure, 3)
    exact = closure.evaluate(state, {}).jacobian
    for column, scale in enumerate(closure.tree.scale):
        step = 1e-3 / scale
        ahead, behind = (closure.evaluate(moved(closure, state, column, side), {}).residual for side in (step, -step))
        difference = (ahead - behind) / (2.0 * step)
        np.testing.assert_allclose(exact[:, column] / scale, difference / scale, atol=1e-7, err_msg=f"column {column}")


@pytest.mark.parametrize("kind", JOINTS)
def test_a_joint_is_closed_at_the_design_position(kind: str) -> None:
    closure = Closure(mechanism(JOINTS[kind]("rocker", "flap")))
    assert closure.evaluate(closure.tree.design(2), {}).error.max() < 1e-12


def test_a_point_a_hair_off_its_line_is_closed_at_design_all_the_same() -> None:
    made = points()
    hair = np.cross(made["q"] - made["p"], [0.0, 0.0, 1.0])
    made["on_line"] = made["on_line"] + 5e-4 * hair / np.linalg.norm(hair)
    joint = PointOnLine("joint", "block", "on_line", "chassis", ("p", "q"))
    closure = Closure(Mechanism(BODIES, (joint,), (), made))
    assert closure.evaluate(closure.tree.design(1), {}).error.max() < 1e-12


def test_residuals_are_in_millimetres() -> None:
    """A block moved by 0.3 mm opens a ball joint by that, and a rod along its length by that."""
    apart = np.array([0.1, -0.2, 0.2])
    for kind in ("ball", "fixed", "hinge"):
        closure = Closure(mechanism(JOINTS[kind]("block", "chassis")))
        state = closure.tree.design(1)
        state.places[closure.tree.links["block"].slot] += apart[:, None]
        np.testing.assert_allclose(closure.evaluate(state, {}).residual[:3, 0], apart, atol=1e-12)
    closure = Closure(mechanism(JOINTS["rod"]("block", "chassis")))
    made = points()
    along = (made["p"] - made["q"]) / np.linalg.norm(made["p"] - made["q"])
    state = closure.tree.design(1)
    state.places[closure.tree.links["block"].slot] += 0.3 * along[:, None]
    assert closure.evaluate(state, {}).residual[0, 0] == pytest.approx(0.3, rel=1e-3)


def test_a_point_input_measures_along_its_direction_whatever_the_directions_length() -> None:
    closure = Closure(mechanism(None))
    state = closure.tree.design(1)
    for slot in range(2):
        state.places[slot] += np.array([[3.0], [0.0], [0.0]])
    row = closure.rows["input lift"].start
    assert closure.evaluate(state, {}).residual[row, 0] == pytest.approx(1.0)
    assert closure.evaluate(state, {"lift": np.array([1.0])}).residual[row, 0] == pytest.approx(0.0, abs=1e-12)


@pytest.mark.parametrize("kind", JOINTS)
def test_geometry_variants_have_the_equations_of_each_geometry_alone(kind: str) -> None:
    whole = mechanism(JOINTS[kind]("flap", "rocker"), (4,))
    closure = Closure(whole, (4,))
    step = np.random.default_rng(2).normal(size=(closure.tree.unknowns, 4)) * 0.1
    state = closure.tree.advance(closure.tree.design(4), step)
    together = closure.evaluate(state, {})
    for k in range(4):
        at = {name: value[k] if value.ndim > 1 else value for name, value in whole.points.items()}
        alone = Closure(whole.with_points(at))
        single = alone.evaluate(alone.tree.advance(alone.tree.design(1), step[:, [k]]), {})
        # turning equations are weighted with the mechanism's size, which differs a little between variants
        weight = alone._size / closure._size
        rows = slice(0, 2 if kind == "point on line" else min(3, together.residual.shape[0] - 1))
        np.testing.assert_allclose(together.residual[rows, k], single.residual[rows, 0], atol=1e-10)
        np.testing.assert_allclose(together.jacobian[rows, :, k], single.jacobian[rows, :, 0], atol=1e-10)
        turning = slice(rows.stop, -1)
        np.testing.assert_allclose(weight * together.residual[turning, k], single.residual[turning, 0], atol=1e-9)
        np.testing.assert_allclose(weight * together.jacobian[turning, :, k], single.jacobian[turning, :, 0], atol=1e-9)


def test_some_of_the_variants_have_the_equations_and_the_branch_that_they_have_among_all() -> None:
    layout = double_a_arm.LAYOUT
    random = np.random.default_rng(9)
    variants = {name: np.array(at) + random.uniform(-10.0, 10.0, (5, 3)) for name, at in layout.example.items()}
    closure = Closure(layout.mechanism(variants), (5,))
    chosen = np.array([3, 0])
    some = closure.for_poses(chosen)
    inputs = {"travel": np.linspace(-8.0, 8.0, 5), "rack": np.linspace(3.0, -3.0, 5)}
    whole = closure.correct(closure.tree.design(5), inputs)
    part = some.correct(closure.tree.design(5).take(chosen), {name: value[chosen] for name, value in inputs.items()})
    np.testing.assert_array_equal(part.state.places, whole.state.places[..., chosen])
    np.testing.assert_array_equal(part.rates, whole.rates[..., chosen])
    np.testing.assert_array_equal(some.at_design.determinant, closure.at_design.determinant[chosen])


def corner(mechanism: Mechanism) -> Corner:
    return Corner(mechanism, Wheel(mechanism.points["wheel.centre"], 280.0))


def grid(mechanism: Mechanism) -> np.ndarray:
    travel, rack = np.linspace(-50.0, 50.0, 5)[:, None], np.linspace(-25.0, 25.0, 3)[None]
    motion = solve_motion(corner(mechanism), travel, rack)
    assert motion.reached.all()
    assert motion.residual_mm.max() <= 1e-9
    return motion.matrix("knuckle")


def test_a_hinge_joint_carries_an_arm_as_a_hinged_body_does() -> None:
    layout = double_a_arm.LAYOUT
    made = layout.mechanism(layout.example)
    bodies = tuple(FreeBody("lower_arm") if body.name == "lower_arm" else body for body in made.bodies)
    pivots = Hinge("lower pivots", "lower_arm", "chassis", ("lower_arm.front_pivot", "lower_arm.rear_pivot"))
    other = Mechanism(bodies, (pivots, *made.joints), made.inputs, made.points)
    np.testing.assert_allclose(grid(other), grid(made), atol=1e-8)


def test_a_body_welded_on_moves_as_the_one_it_is_welded_to() -> None:
    layout = five_link.LAYOUT
    made = layout.mechanism(layout.example)
    bodies = (*made.bodies, FreeBody("caliper"))
    other = Mechanism(
        bodies, (*made.joints, Fixed("bolts", "caliper", "knuckle", "upper_rear.outboard")), made.inputs, made.points
    )
    travel = np.linspace(-50.0, 50.0, 7)
    motion = solve_motion(corner(other), travel, 12.0)
    assert motion.residual_mm.max() <= 1e-9
    np.testing.assert_allclose(motion.matrix("caliper"), motion.matrix("knuckle"), atol=1e-8)
    np.testing.assert_allclose(grid(other), grid(made), atol=1e-8)


def test_a_chain_of_hinged_bodies_reaches_where_the_cosine_rule_puts_it() -> None:
    """Two bars in a plane, the second hinged on the first, its end held on a slide: a textbook triangle."""
    first, second = 90.0, 140.0
    # the slide stands where the elbow is square, so that the chain is nowhere near stretched
    end = np.hypot(first, second)
    at = np.array([first**2 / end, first * second / end, 0.0])
    up = np.array([0.0, 0.0, 1.0])
    chain = Mechanism(
        bodies=(
            HingedBody("upper", ("o", "o.up")),
            HingedBody("fore", ("e", "e.up"), parent="upper"),
            SlidingBody("hand", "x", input="push"),
        ),
        joints=(PointOnLine("grip", "hand", "h", "fore", ("h", "h.up")),),
        inputs=(CoordinateInput("push", "hand"),),
        points={
            "o": np.zeros(3),
            "o.up": up,
            "e": at,
            "e.up": at + up,
            "h": np.array([end, 0.0, 0.0]),
            "h.up": np.array([end, 0.0, 1.0]),
            "x": np.array([1.0, 0.0, 0.0]),
        },
    )
    push = np.linspace(-60.0, 50.0, 12)
    solution = solve(chain, {"push": push})
    assert solution.reached.all()
    reach = end + push
    shoulder = np.arccos((first**2 + reach**2 - second**2) / (2.0 * first * reach))
    elbow = np.arccos((first**2 + second**2 - reach**2) / (2.0 * first * second))
    np.testing.assert_allclose(solution.state.scalars[0], shoulder - shoulder[0] + solution.state.scalars[0, 0])
    np.testing.assert_allclose(solution.state.scalars[0] + np.arctan2(at[1], at[0]), shoulder, atol=1e-10)
    np.testing.assert_allclose(np.abs(solution.state.scalars[1]), np.abs(elbow - np.pi / 2.0), atol=1e-10)


def test_newton_leaves_converged_poses_alone_and_doubles_the_digits_of_the_others() -> None:
    layout = double_a_arm.LAYOUT
    closure = Closure(layout.mechanism(layout.example))
    zero = {"travel": np.zeros(2), "rack": np.zeros(2)}
    step = np.zeros((closure.tree.unknowns, 2))
    step[:, 1] = 2.0 / closure.tree.scale[: closure.tree.unknowns]
    start = closure.tree.advance(closure.tree.design(2), step)
    errors = [closure.correct(start, zero, steps).error for steps in range(4)]
    assert [error[0] for error in errors] == [0.0] * 4
    opened = [error[1] for error in errors]
    assert opened[0] > 0.1
    for before, after in pairwise(opened):
        assert after < 0.1 * before**2 + 1e-11
    done = closure.correct(start, zero)
    assert done.converged.all()
    assert done.moved[0] == 0.0
    np.testing.assert_allclose(done.state.places[..., 1], done.state.places[..., 0], atol=1e-8)


def test_the_work_space_is_written_over_and_not_needed_afterwards() -> None:
    layout = five_link.LAYOUT
    closure = Closure(layout.mechanism(layout.example))
    inputs = {"travel": np.array([5.0, 10.0]), "rack": np.array([1.0, -2.0])}
    done = closure.correct(closure.tree.design(2), inputs)
    fresh = closure.evaluate(done.state, inputs)
    space = closure._workspace(2)
    space.jacobian[:] = np.nan
    again = closure.evaluate(done.state, inputs, space)
    np.testing.assert_array_equal(again.jacobian, fresh.jacobian)
    np.testing.assert_array_equal(again.residual, fresh.residual)
    np.testing.assert_array_equal(done.error, fresh.error)


def test_a_step_never_turns_a_body_by_more_than_it_can_be_trusted() -> None:
    closure = Closure(mechanism(None))
    tree = closure.tree
    far = tree.advance(tree.design(1), np.full((tree.unknowns, 1), 100.0))
    angle = np.arccos((np.trace(far.turns[0, ..., 0]) - 1.0) / 2.0)
    assert angle == pytest.approx(1.0)
    assert far.scalars[tree.links["arm"].slot, 0] == 1.0
    assert far.scalars[tree.links["slider"].slot, 0] == 100.0
