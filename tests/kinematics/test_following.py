"""Where mechanisms lock: found, explained, and never crossed."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import brentq, least_squares, minimize
from scipy.spatial.transform import Rotation

from knucklepath.kinematics.closure import Closure, Evaluation
from knucklepath.kinematics.corner import corner_readings
from knucklepath.kinematics.errors import MechanismError
from knucklepath.kinematics.following import follow, solve
from knucklepath.kinematics.mechanism import (
    Ball,
    CoordinateInput,
    FreeBody,
    HingedBody,
    Mechanism,
    PointInput,
    PointOnLine,
    Rod,
    SlidingBody,
)
from knucklepath.kinematics.motion import find_limit, solve_motion
from knucklepath.kinematics.tree import State
from knucklepath.kinematics.wheel import Corner, Wheel
from knucklepath.plugins.layouts import double_a_arm, five_link, semi_trailing_arm, strut


def corner_of(layout_module: object) -> Corner:
    layout = layout_module.LAYOUT  # type: ignore[attr-defined]
    mechanism = layout.mechanism(layout.example, steered=layout.steers)
    return Corner(mechanism, Wheel(layout.example["wheel.centre"], 280.0), layout.carrier, layout.steering_axis)


def test_a_swinging_arm_locks_where_it_stands_upright() -> None:
    """A semi-trailing arm on a level axis lifts the wheel centre by its lever at most: a closed form."""
    points = {
        "arm.inner_pivot": (400.0, 200.0, 300.0),
        "arm.outer_pivot": (400.0, 600.0, 300.0),
        "wheel.centre": (0.0, 700.0, 260.0),
    }
    mechanism = semi_trailing_arm.LAYOUT.mechanism(points, steered=False)
    corner = Corner(mechanism, Wheel(np.array(points["wheel.centre"]), 280.0), "arm")
    lever = np.hypot(400.0, 40.0)
    limit = find_limit(corner, "travel", 600.0)
    assert limit is not None
    assert limit.value_mm == pytest.approx(lever + 40.0, abs=0.01)
    limit = find_limit(corner, "travel", -600.0)
    assert limit is not None
    assert limit.value_mm == pytest.approx(-(lever - 40.0), abs=0.01)
    assert find_limit(corner, "travel", 400.0) is None


def test_the_limit_of_a_double_a_arm_equals_an_independent_search() -> None:
    """Greatest wheel travel of the closed linkage, sought by swinging the lower arm with scipy's least squares."""
    corner = corner_of(double_a_arm)
    points = corner.mechanism.points

    def turned(name: str, angle: float) -> np.ndarray:
        first, second = points[f"{name}.front_pivot"], points[f"{name}.rear_pivot"]
        axis = (second - first) / np.linalg.norm(second - first)
        arm = points[f"{name}.ball_joint"] - first
        across = np.cross(axis, arm)
        along = axis * (axis @ arm)
        return first + along + np.cos(angle) * (arm - along) + np.sin(angle) * across

    upper, lower = points["upper_arm.ball_joint"], points["lower_arm.ball_joint"]
    tie_in, tie_out, wheel = points["tie_rod.inboard"], points["tie_rod.outboard"], points["wheel.centre"]
    known = [(upper, lower), (upper, tie_out), (lower, tie_out), (upper, wheel), (lower, wheel), (tie_out, wheel)]
    lengths = [np.linalg.norm(a - b) for a, b in known]
    tie = np.linalg.norm(tie_in - tie_out)

    def height(angle: float, start: np.ndarray) -> tuple[float, np.ndarray]:
        def residual(x: np.ndarray) -> np.ndarray:
            up, low, out, hub = turned("upper_arm", x[0]), turned("lower_arm", angle), x[1:4], x[4:7]
            pairs = [(up, low), (up, out), (low, out), (up, hub), (low, hub), (out, hub)]
            apart = [np.linalg.norm(a - b) - length for (a, b), length in zip(pairs, lengths, strict=True)]
            return np.array([*apart, np.linalg.norm(tie_in - out) - tie])

        found = least_squares(residual, start, xtol=1e-15, ftol=1e-15, gtol=1e-15)
        return (float(found.x[6] - wheel[2]) if found.cost < 1e-16 else np.nan), found.x

    sign = 1.0 if turned("lower_arm", 0.01)[2] > lower[2] else -1.0
    state, best, angle, step = np.concatenate(([0.0], tie_out, wheel)), 0.0, 0.0, 0.02
    while step > 1e-5:
        value, new = height(sign * (angle + step), state)
        if value > best:
            best, angle, state = value, angle + step, new
        else:
            step /= 2.0
    limit = find_limit(corner, "travel", 2.0 * best)
    assert limit is not None
    assert limit.value_mm == pytest.approx(best, abs=0.02)


@pytest.mark.parametrize(
    "module", [double_a_arm, strut, five_link, semi_trailing_arm], ids=lambda module: module.LAYOUT.id
)
def test_starts_from_the_coarse_grid_are_so_good_that_one_newton_step_is_enough(
    module: object, monkeypatch: pytest.MonkeyPatch
) -> None:
    corner = corner_of(module)
    seen: list[float] = []
    evaluate = Closure.evaluate

    def watched(closure: Closure, state: State, *others: object) -> Evaluation:
        found = evaluate(closure, state, *others)  # type: ignore[arg-type]
        if state.count == 31 * 21:
            seen.append(float(found.error.max()))
        return found

    monkeypatch.setattr(Closure, "evaluate", watched)
    rack = np.linspace(-25.0, 25.0, 21) * float(corner.steered)
    motion = solve_motion(corner, np.linspace(-60.0, 60.0, 31)[:, None], rack)
    assert motion.reached.all()
    start, end = seen
    assert start < 1e-3
    assert end <= 1e-10


@pytest.mark.parametrize("sense", [1.0, -1.0])
def test_the_limits_of_a_five_link_equal_an_optimiser_that_seeks_the_highest_and_lowest_wheel_centre(
    sense: float,
) -> None:
    """Five lengths held, the wheel centre as high or low as it goes: sequential quadratic programming from scipy."""
    corner = corner_of(five_link)
    points = corner.mechanism.points
    links = [rod.name for rod in corner.mechanism.rods]
    inboard = np.array([points[f"{link}.inboard"] for link in links])
    arms = np.array([points[f"{link}.outboard"] - points["wheel.centre"] for link in links])
    lengths = np.linalg.norm(inboard - arms - points["wheel.centre"], axis=1)
    limit = find_limit(corner, "travel", sense * 900.0)
    assert limit is not None
    near = solve_motion(corner, 0.9 * limit.value_mm)
    turned, hub = Rotation.from_matrix(near.rotation("knuckle")), near.point("knuckle", points["wheel.centre"])

    def open_by(x: np.ndarray) -> np.ndarray:
        ends = (Rotation.from_rotvec(x[:3]) * turned).apply(arms) + hub + 100.0 * x[3:]
        return (np.linalg.norm(ends - inboard, axis=1) - lengths) / 100.0

    found = minimize(
        lambda x: -sense * x[5],
        np.zeros(6),
        method="SLSQP",
        constraints={"type": "eq", "fun": open_by},
        options={"ftol": 1e-13, "maxiter": 500},
    )
    assert np.abs(open_by(found.x)).max() < 1e-7
    highest = hub[2] + 100.0 * found.x[5] - points["wheel.centre"][2]
    assert limit.value_mm == pytest.approx(highest, abs=0.01)


@pytest.mark.parametrize("module", [double_a_arm, strut, five_link], ids=lambda module: module.LAYOUT.id)
def test_geometry_variants_lock_where_each_locks_alone(module: object) -> None:
    corner = corner_of(module)
    random = np.random.default_rng(6)
    limit = find_limit(corner, "travel", -900.0)
    assert limit is not None
    variants = {
        name: at if name == "rack.axis" else at + random.uniform(-15.0, 15.0, (6, 1, 3))
        for name, at in corner.mechanism.points.items()
    }
    together = replace(corner, mechanism=corner.mechanism.with_points(variants))
    travel = limit.value_mm * np.linspace(0.6, 1.3, 8)
    motion = solve_motion(together, travel)
    assert motion.shape == (6, 8)
    assert motion.reached.any()
    assert not motion.reached.all()
    for k in range(6):
        alone = {name: at[k, 0] if at.ndim > 1 else at for name, at in variants.items()}
        single = replace(corner, mechanism=corner.mechanism.with_points(alone))
        locks = find_limit(single, "travel", -900.0)
        assert locks is not None
        sure = np.abs(travel - locks.value_mm) > 0.02
        np.testing.assert_array_equal(motion.reached[k, sure], (travel > locks.value_mm)[sure])


@pytest.mark.parametrize("module", [double_a_arm, strut, five_link], ids=lambda module: module.LAYOUT.id)
def test_a_path_out_to_the_limit_and_back_ends_where_it_began(module: object) -> None:
    """Step by step along the path, each from the last, almost into the dead centre and home on the same branch."""
    corner = corner_of(module)
    limit = find_limit(corner, "travel", 900.0)
    assert limit is not None
    closure = Closure(corner.mechanism)
    state, at = closure.tree.design(1), 0.0
    for target in limit.value_mm * np.array([0.5, 0.9, 0.999, 0.7, 0.2, 0.0]):
        begin, end = ({"travel": np.array([value]), "rack": np.zeros(1)} for value in (at, target))
        done, share = follow(closure, state, begin, end)
        assert share[0] == 1.0
        assert done.error[0] <= 1e-9
        state, at = done.state, target
    np.testing.assert_allclose(state.turns[..., 0], closure.tree.design(1).turns[..., 0], atol=1e-9)
    np.testing.assert_allclose(state.places, closure.tree.design(1).places, atol=1e-8)


def test_how_much_of_the_way_was_made_is_told_for_poses_out_of_reach() -> None:
    corner = corner_of(double_a_arm)
    limit = find_limit(corner, "travel", 900.0)
    assert limit is not None
    solution = solve(corner.mechanism, {"travel": np.array([2.0, 0.5]) * limit.value_mm})
    assert solution.reached.tolist() == [False, True]
    np.testing.assert_allclose(solution.share, [0.5, 1.0], atol=1e-4)
    # the state is that of the last pose on the way
    height = solution.state.places[0, 2] - corner.mechanism.points["wheel.centre"][2]
    np.testing.assert_allclose(height, np.array([1.0, 0.5]) * limit.value_mm, atol=0.01)
    assert abs(solution.determinant[0]) < 0.05


@pytest.mark.parametrize("module", [double_a_arm, strut, five_link], ids=lambda module: module.LAYOUT.id)
@pytest.mark.parametrize("towards", [900.0, -900.0])
def test_poses_beyond_a_limit_are_not_reached_and_those_before_it_are(module: object, towards: float) -> None:
    corner = corner_of(module)
    limit = find_limit(corner, "travel", towards)
    assert limit is not None
    assert limit.input == "travel"
    assert limit.reason
    sign = np.sign(towards)
    around = limit.value_mm + sign * np.array([-5.0, -0.02, 0.02, 5.0])
    motion = solve_motion(corner, around)
    assert motion.reached.tolist() == [True, True, False, False]
    readings = corner_readings(motion)
    assert np.isnan(readings["camber_deg"][2:]).all()
    assert np.isfinite(readings["camber_deg"][:2]).all()
    assert np.isnan(motion.matrix("knuckle")[3, :3]).all()
    assert abs(motion.closeness[1]) < 0.1


def test_a_fine_grid_across_a_limit_marks_the_same_poses_as_one_by_one() -> None:
    corner = corner_of(double_a_arm)
    limit = find_limit(corner, "travel", -900.0)
    assert limit is not None
    travel = np.linspace(1.2 * limit.value_mm, 20.0, 200)
    together = solve_motion(corner, travel)
    alone = np.array([bool(solve_motion(corner, value).reached) for value in travel[::13]])
    np.testing.assert_array_equal(together.reached[::13], alone)
    np.testing.assert_array_equal(together.reached, travel > limit.value_mm - 0.01)


def test_a_held_input_that_cannot_be_reached_gives_its_own_limit() -> None:
    corner = corner_of(double_a_arm)
    rack = find_limit(corner, "rack", 600.0)
    assert rack is not None
    assert rack.input == "rack"
    held = find_limit(corner, "travel", 10.0, rack_mm=600.0)
    assert held is not None
    assert held.input == "rack"
    assert held.value_mm == pytest.approx(rack.value_mm, abs=0.02)


def crank_slider(crank: float, rod: float) -> Mechanism:
    """A crank in the plane z = 0, driven by the slider's displacement."""
    points = {
        "axle.a": (0.0, 0.0, 0.0),
        "axle.b": (0.0, 0.0, 1.0),
        "pin": (crank / np.sqrt(2.0), crank / np.sqrt(2.0), 0.0),
        "slide": (1.0, 0.0, 0.0),
    }
    points["head"] = (points["pin"][0] + np.sqrt(rod**2 - points["pin"][1] ** 2), 0.0, 0.0)
    return Mechanism(
        bodies=(HingedBody("crank", ("axle.a", "axle.b")), SlidingBody("head", "slide", input="push")),
        joints=(Rod("rod", "crank", "pin", "head", "head"),),
        inputs=(CoordinateInput("push", "head"),),
        points={name: np.array(at) for name, at in points.items()},
    )


def test_a_crank_slider_locks_at_its_dead_centre() -> None:
    mechanism = crank_slider(50.0, 130.0)
    start = mechanism.points["head"][0]
    pushes = np.linspace(-150.0, 60.0, 43)
    solution = solve(mechanism, {"push": pushes})
    reach = (start + pushes < 180.0) & (start + pushes > 80.0)
    np.testing.assert_array_equal(solution.reached, reach)
    angle = np.arctan2(1.0, 1.0) + solution.state.scalars[0]
    for push, turned in zip(pushes[reach], angle[reach], strict=True):
        where = start + push
        exact = brentq(lambda a, w=where: (w - 50 * np.cos(a)) ** 2 + (50 * np.sin(a)) ** 2 - 130**2, 1e-9, np.pi)
        assert turned == pytest.approx(exact, abs=1e-9)


def test_a_point_on_a_line_carries_a_strut_as_a_sliding_body_does() -> None:
    """Two ways to say one thing: a body that slides in the knuckle, or a point that stays on the knuckle's line."""
    layout = strut.LAYOUT
    corner = corner_of(strut)
    bodies = tuple(body for body in layout.bodies if body.name != "strut")
    line = PointOnLine("top mount", "chassis", "strut.top_mount", "knuckle", ("strut.top_mount", "strut.axis_lower"))
    mechanism = Mechanism(bodies, (line, *layout.joints[1:]), corner.mechanism.inputs, corner.mechanism.points)
    other = Corner(mechanism, corner.wheel)
    travel, rack = np.linspace(-50.0, 50.0, 5)[:, None], np.linspace(-25.0, 25.0, 3)[None]
    first, second = solve_motion(corner, travel, rack), solve_motion(other, travel, rack)
    np.testing.assert_allclose(first.matrix("knuckle"), second.matrix("knuckle"), atol=1e-9)


def test_equations_and_unknowns_that_do_not_match_are_refused() -> None:
    loose = Mechanism(
        (FreeBody("block"),),
        (Ball("pin", "chassis", "block", "at"),),
        (PointInput("travel", "block", "tip"),),
        {"at": np.zeros(3), "tip": np.array([100.0, 0.0, 0.0])},
    )
    with pytest.raises(MechanismError, match="6 unknowns stand against 4 equations"):
        solve(loose, {"travel": 1.0})
    with pytest.raises(MechanismError, match="no input 'lift'"):
        solve(loose, {"lift": 1.0})
