"""The proof over the whole motion: true distances, no false proof, and the gaps that a grid of poses misses."""

from __future__ import annotations

from dataclasses import replace

import fcl
import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray
from scipy.spatial.transform import Rotation

from knucklepath.kinematics.clearance.boxes import build_tree, principal_axes
from knucklepath.kinematics.clearance.gap import relative_poses
from knucklepath.kinematics.clearance.grid import gap_grid
from knucklepath.kinematics.clearance.pairs import Pair, PairError, pairs_to_check
from knucklepath.kinematics.clearance.primitives import Mesh, ball, cylinder, lathe, merged
from knucklepath.kinematics.clearance.proved import proved_gaps
from knucklepath.kinematics.clearance.relief import without_spheres
from knucklepath.kinematics.clearance.sampled import sampled_gaps
from knucklepath.kinematics.clearance.solids import RodStyle, Solid, generated_solids
from knucklepath.kinematics.clearance.traverse import distance, distance_at_each
from knucklepath.kinematics.clearance.triangles import triangle_triangle
from knucklepath.kinematics.mechanism import Layout
from knucklepath.kinematics.motion import find_limit, solve_motion
from knucklepath.kinematics.wheel import Corner, Wheel
from knucklepath.plugins.layouts.double_a_arm import LAYOUT
from knucklepath.plugins.layouts.semi_trailing_arm import LAYOUT as ARM
from knucklepath.viewer.build import ClearanceRule

Array = NDArray[np.float64]
FAR = 1e300


@pytest.fixture(scope="module")
def corner() -> Corner:
    wheel = Wheel(LAYOUT.example["wheel.centre"], 280.0, tyre_width=190.0, rim_diameter=330.0)
    return Corner(LAYOUT.mechanism(LAYOUT.example), wheel, steering_axis=LAYOUT.steering_axis)


def fcl_distance(a: Mesh, b: Mesh, rotation: Array, shift: Array) -> float:
    objects = []
    for vertices, faces in (a, b):
        model = fcl.BVHModel()
        model.beginModel(len(vertices), len(faces))
        model.addSubModel(vertices, faces)
        model.endModel()
        objects.append(fcl.CollisionObject(model, fcl.Transform()))
    objects[1].setTransform(fcl.Transform(rotation, shift))
    return max(float(fcl.distance(*objects, fcl.DistanceRequest(), fcl.DistanceResult())), 0.0)


def soup(random: np.random.Generator, count: int, size: float) -> Mesh:
    """Triangles without any order: long, thin, small and large, some degenerate, some twice."""
    middles = random.uniform(-1.0, 1.0, (count, 1, 3)) * size
    corners = middles + random.normal(size=(count, 3, 3)) * size * 10.0 ** random.uniform(-3.0, 0.0, (count, 1, 1))
    corners[::7, 2] = corners[::7, 1]
    corners[1::7, 2] = (corners[1::7, 0] + corners[1::7, 1]) / 2.0
    corners = np.concatenate((corners, corners[:3]))
    return corners.reshape(-1, 3), np.arange(3 * len(corners), dtype=np.int32).reshape(-1, 3)


def sound(mesh: Mesh) -> Mesh:
    """Without triangles that have no area: the independent engine does not take them."""
    vertices, faces = mesh
    a, b, c = (vertices[faces[:, k]] for k in range(3))
    return vertices, np.ascontiguousarray(faces[np.linalg.norm(np.cross(b - a, c - a), axis=1) > 1e-9])


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_distances_of_nasty_meshes_equal_an_independent_engine(seed: int) -> None:
    random = np.random.default_rng(seed)
    a, b = (sound(soup(random, int(random.integers(8, 40)), 50.0)) for _ in range(2))
    rotation = Rotation.random(random_state=seed % 1000).as_matrix()
    shift = random.uniform(-150.0, 150.0, 3)
    value, on_a, on_b = distance(build_tree(*a), build_tree(*b), rotation, shift, FAR)
    assert value == pytest.approx(fcl_distance(a, b, rotation, shift), abs=1e-9)
    assert np.linalg.norm(on_a - on_b) == pytest.approx(value, abs=1e-9)


@settings(max_examples=25, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_distances_with_degenerate_triangles_equal_brute_force_over_points(seed: int) -> None:
    """No sample point of one mesh is nearer to a vertex of the other than the distance says."""
    random = np.random.default_rng(seed)
    a, b = (soup(random, 12, 30.0) for _ in range(2))
    shift = random.uniform(-80.0, 80.0, 3)
    value, _, _ = distance(build_tree(*a), build_tree(*b), np.eye(3), shift, FAR)
    weights = random.dirichlet((1.0, 1.0, 1.0), (200, 1))[:, 0]
    spread = [np.einsum("nk,tkj->ntj", weights, mesh[0][mesh[1]]).reshape(-1, 3) for mesh in (a, b)]
    apart = np.linalg.norm(spread[0][:, None] - (spread[1] + shift)[None, ::3], axis=2).min()
    assert value <= apart + 1e-9
    assert np.isfinite(value)


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_principal_axes_equal_lapack(seed: int) -> None:
    random = np.random.default_rng(seed)
    points = random.normal(size=(7, 3)) * 10.0 ** random.uniform(-6.0, 3.0, 3)
    matrix = points.T @ points
    axes = principal_axes(matrix)
    np.testing.assert_allclose(axes.T @ axes, np.eye(3), atol=1e-12)
    turned = axes.T @ matrix @ axes
    np.testing.assert_allclose(np.sort(np.diag(turned)), np.linalg.eigvalsh(matrix), atol=1e-12 * np.trace(matrix))
    np.testing.assert_array_equal(principal_axes(np.zeros((3, 3))), np.eye(3))


@settings(max_examples=25, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_the_tree_equals_brute_force_over_every_pair_of_triangles(seed: int) -> None:
    """Degenerate and repeated triangles included: the tree leaves out no pair that matters."""
    random = np.random.default_rng(seed)
    a, b = (soup(random, int(random.integers(1, 30)), 40.0) for _ in range(2))
    shift = random.uniform(-120.0, 120.0, 3)
    value, *_ = distance(build_tree(*a), build_tree(*b), np.eye(3), shift, FAR)
    room = [np.zeros(3) for _ in range(4)]
    squared = min(triangle_triangle(first, second + shift, FAR, *room) for first in a[0][a[1]] for second in b[0][b[1]])
    assert value == pytest.approx(np.sqrt(squared), abs=1e-9)


def test_nothing_is_proven_falsely_with_a_large_rack_and_long_thin_parts(corner: Corner) -> None:
    """The rack to within 8 mm of where it locks; needles a metre long."""
    travel, rack = (-70.0, 80.0), (-50.0, 50.0)
    assert solve_motion(corner, np.linspace(*travel, 9)[:, None], np.linspace(*rack, 9)[None]).reached.all()
    hub = corner.wheel.centre
    needle = Solid("needle", "wheel", *cylinder(hub + [-500.0, 30.0, 90.0], hub + [500.0, 20.0, 60.0], 0.4, 7))
    post = Solid("post", "chassis", *cylinder(hub + [180.0, -160.0, -500.0], hub + [200.0, -120.0, 500.0], 0.4, 7))
    (gap,) = proved_gaps(corner, [Pair(post, needle, 5.0)], travel, rack)
    assert gap.proven_gap_mm is not None
    random = np.random.default_rng(4)
    poses = random.uniform([travel[0], rack[0]], [travel[1], rack[1]], (10_000, 2))
    near = [gap.travel_mm, gap.rack_mm] + random.normal(size=(5_000, 2)) * 3.0
    poses[:5_000] = np.clip(near, [travel[0], rack[0]], [travel[1], rack[1]])
    motion = solve_motion(corner, poses[:, 0], poses[:, 1])
    rotations, shifts = relative_poses(motion, "chassis", "wheel")
    trees = [build_tree(solid.vertices, solid.faces) for solid in (post, needle)]
    values = distance_at_each(*trees, np.ascontiguousarray(rotations), np.ascontiguousarray(shifts))
    assert values.min() >= gap.proven_gap_mm - 1e-6
    assert gap.gap_mm <= values.min() + 0.0501


def test_a_limit_stops_the_search_without_changing_what_is_below_it() -> None:
    a, b = build_tree(*ball((0, 0, 0), 30.0)), build_tree(*ball((0, 0, 0), 20.0))
    exact, *_ = distance(a, b, np.eye(3), np.array([90.0, 5.0, 3.0]), FAR)
    assert distance(a, b, np.eye(3), np.array([90.0, 5.0, 3.0]), exact * 1.5)[0] == pytest.approx(exact, abs=1e-12)
    assert distance(a, b, np.eye(3), np.array([90.0, 5.0, 3.0]), exact * 0.5)[0] == pytest.approx(exact * 0.5)


def random_parts(random: np.random.Generator, corner: Corner) -> list[Pair]:
    """A pin on one body and a plate, a rod or a ball on another, not far from each other."""
    hub = corner.wheel.centre
    names = [name for name in (*corner.mechanism.body_names, "wheel") if name != "rack"]
    pairs = []
    while len(pairs) < 3:
        body_a, body_b = random.choice(names, 2, replace=False)
        if corner.body(body_a) == corner.body(body_b):
            continue
        at = hub + random.uniform(-150.0, 150.0, 3)
        along = random.normal(size=3)
        pin = cylinder(
            at, at + along / np.linalg.norm(along) * random.uniform(20.0, 400.0), random.uniform(0.5, 15.0), 9
        )
        at = at + random.normal(size=3) * 90.0
        shape = random.integers(3)
        if shape == 0:
            other = ball(at, random.uniform(3.0, 40.0), 10)
        elif shape == 1:
            other = lathe(at, random.normal(size=3), [(0, 0), (0, 60), (1, 60), (1, 0)], 9)
        else:
            other = merged([ball(at, 5.0, 8), cylinder(at, at + random.normal(size=3) * 100.0, 2.0, 7)])
        pairs.append(Pair(Solid("pin", str(body_a), *pin), Solid("other", str(body_b), *other), 5.0))
    return pairs


@pytest.mark.parametrize("seed", [1, 2])
def test_no_pose_of_ten_thousand_comes_nearer_than_proven(layout: Layout, seed: int) -> None:
    """Random parts on random geometry of every layout; half the poses crowd about the smallest gap found."""
    random = np.random.default_rng([seed, len(layout.id)])
    points = {name: np.array(at) + random.uniform(-20.0, 20.0, 3) for name, at in layout.example.items()}
    mechanism = layout.mechanism(points, steered=layout.steers)
    corner = Corner(mechanism, Wheel(points["wheel.centre"], 280.0), layout.carrier, layout.steering_axis)
    travel, rack = (-55.0, 60.0), (-30.0, 30.0) if layout.steers else (0.0, 0.0)
    for pair in random_parts(random, corner):
        (gap,) = proved_gaps(corner, [pair], travel, rack)
        assert gap.proven_gap_mm is not None, gap
        assert gap.gap_mm - 0.0501 <= gap.proven_gap_mm <= gap.gap_mm
        spread = random.uniform(size=(10_000, 2))
        near = np.array([gap.travel_mm, gap.rack_mm]) + random.normal(size=(5_000, 2)) * [3.0, 2.0]
        poses = np.array([travel[0], rack[0]]) + spread * [travel[1] - travel[0], rack[1] - rack[0]]
        poses[:5_000] = np.clip(near, [travel[0], rack[0]], [travel[1], rack[1]])
        motion = solve_motion(corner, poses[:, 0], poses[:, 1])
        rotations, shifts = relative_poses(motion, pair.a.body, pair.b.body)
        trees = [build_tree(solid.vertices, solid.faces) for solid in (pair.a, pair.b)]
        values = distance_at_each(*trees, np.ascontiguousarray(rotations), np.ascontiguousarray(shifts))
        assert values.min() >= gap.proven_gap_mm - 1e-6
        assert gap.gap_mm <= values.min() + 0.0501


def test_nothing_is_proven_falsely_close_to_a_lock_up(corner: Corner) -> None:
    """Near a dead centre the path bends sharply; the proof follows it there, or says that it cannot."""
    limit = find_limit(corner, "travel", -600.0)
    assert limit is not None
    low = limit.value_mm + 0.5
    tyre = next(solid for solid in generated_solids(corner, RodStyle()) if solid.name == "tyre")
    pin = Solid("pin", "upper_arm", *cylinder((-30.0, 480.0, 340.0), (-30.0, 540.0, 345.0), 6.0, 9))
    (gap,) = proved_gaps(corner, [Pair(tyre, pin, 1.0)], (low, 0.0))
    grid = gap_grid(
        corner, Pair(tyre, pin, 1.0), np.concatenate((low + np.geomspace(1e-3, 1.0, 300), [low])), np.zeros(1)
    )
    assert gap.proven_gap_mm is None or np.nanmin(grid) >= gap.proven_gap_mm - 1e-6


def test_a_motion_that_locks_is_sampled_and_says_so(corner: Corner) -> None:
    tyre, arm = (
        next(solid for solid in generated_solids(corner, RodStyle()) if solid.name == name)
        for name in ("tyre", "lower_arm")
    )
    (gap,) = proved_gaps(corner, [Pair(tyre, arm, 1.0)], (-600.0, 50.0))
    assert gap.proven_gap_mm is None
    assert gap.verdict != "clear"
    assert "locks within the motion" in gap.note


def speck_on_the_way(corner: Corner, travel: float, rack: float) -> tuple[Solid, Solid]:
    """Two small balls, one on the wheel and one on the chassis, that meet at one pose and at hardly any other."""
    pose = solve_motion(corner, travel, rack)
    tip = corner.wheel.centre + [210.0, -60.0, 130.0]
    met = pose.point("wheel", tip)
    return Solid("tip", "wheel", *ball(tip, 0.2, 12)), Solid("stop", "chassis", *ball(met, 0.2, 12))


def test_a_contact_between_the_poses_of_a_61_by_41_grid_is_found(corner: Corner) -> None:
    """The grid sees a gap that is large enough; the proof finds the touch in between."""
    low, high = (-50.0, 60.0), (-30.0, 30.0)
    between = (low[0] + 30.5 * (low[1] - low[0]) / 60.0, high[0] + 12.5 * (high[1] - high[0]) / 40.0)
    pair = Pair(*speck_on_the_way(corner, *between), 0.5)
    grid = gap_grid(corner, pair, np.linspace(*low, 61), np.linspace(*high, 41))
    assert grid.min() > pair.required_mm
    (gap,) = proved_gaps(corner, [pair], low, high)
    assert gap.verdict == "touching"
    assert gap.travel_mm == pytest.approx(between[0], abs=0.5)
    assert gap.rack_mm == pytest.approx(between[1], abs=0.5)


def test_verdicts_agree_with_the_sampled_search_where_that_is_right(corner: Corner) -> None:
    solids = {solid.name: solid for solid in generated_solids(corner, RodStyle())}
    pairs = [Pair(solids["tyre"], solids[name], need) for name, need in (("lower_arm", 5.0), ("tie_rod", 60.0))]
    travel, rack = np.linspace(-50.0, 60.0, 23), np.linspace(-30.0, 30.0, 15)
    sampled = sampled_gaps(solve_motion(corner, travel[:, None], rack[None]), pairs)
    proven = proved_gaps(corner, pairs, (-50.0, 60.0), (-30.0, 30.0))
    assert [gap.between for gap in proven] == [gap.between for gap in sampled]
    assert [gap.verdict for gap in proven] == ["tight", "clear"]
    for one, other in zip(proven, sampled, strict=True):
        assert one.gap_mm == pytest.approx(other.gap_mm, abs=0.05)


def test_parts_of_one_body_are_measured_once(corner: Corner) -> None:
    hub = corner.wheel.centre
    a, b = Solid("a", "knuckle", *ball(hub, 20.0)), Solid("b", "wheel", *ball(hub + [60.0, 0.0, 0.0], 20.0))
    (gap,) = proved_gaps(corner, [Pair(a, b, 10.0)], (-50.0, 60.0), (-30.0, 30.0))
    assert gap.evaluations == 1
    assert gap.verdict == "clear"
    assert gap.gap_mm == gap.proven_gap_mm == pytest.approx(19.0, abs=1.0)


def test_a_part_wholly_inside_another_is_touching_and_an_open_mesh_is_said_to_be_open(corner: Corner) -> None:
    hub = corner.wheel.centre
    core = Solid("core", "knuckle", *ball(hub, 10.0))
    vertices, faces = ball(hub, 500.0)
    shell, opened = Solid("shell", "chassis", vertices, faces), Solid("opened", "chassis", vertices, faces[1:])
    halved = Solid("halved", "chassis", vertices, faces[: len(faces) // 2])
    repeated = Solid("repeated", "chassis", vertices, np.concatenate((faces, faces[:3])))
    pairs = [Pair(solid, core, 1.0) for solid in (shell, opened, halved, repeated)]
    gaps = {gap.between[0]: gap for gap in proved_gaps(corner, pairs, (-50.0, 60.0), (-30.0, 30.0))}
    for name in ("shell", "opened", "repeated"):
        assert (gaps[name].verdict, gaps[name].gap_mm) == ("touching", 0.0)
        assert "wholly inside" in gaps[name].note
    assert gaps["halved"].verdict == "undecided", "half a shell does not tell inside from outside"
    assert "open mesh" in gaps["halved"].note
    assert gaps["halved"].proven_gap_mm == pytest.approx(gaps["halved"].gap_mm, abs=0.06)


def test_an_open_mesh_beside_another_part_is_still_proven_clear(corner: Corner) -> None:
    """A mesh with a hole winds hardly at all about what lies well outside it."""
    vertices, faces = ball(corner.wheel.centre, 30.0)
    far = Solid("far", "chassis", *ball(corner.wheel.centre + [0.0, -200.0, 0.0], 20.0))
    (gap,) = proved_gaps(corner, [Pair(Solid("hub", "knuckle", vertices, faces[2:]), far, 5.0)], (-50.0, 60.0))
    assert gap.verdict == "clear"
    assert "open mesh" in gap.note


def test_relief_counts_in_the_sampled_search_as_well(corner: Corner) -> None:
    joint = corner.point("lower_arm.ball_joint")
    arm = Solid("arm", "lower_arm", *cylinder(joint + [0.0, -150.0, 0.0], joint, 10.0))
    upright = Solid("upright", "knuckle", *cylinder(joint, joint + [0.0, 0.0, 120.0], 10.0))
    pairs = pairs_to_check(corner, (arm, upright), (ClearanceRule("arm", "upright", 2.0, 25.0),))
    (sampled,) = sampled_gaps(solve_motion(corner, np.linspace(-30.0, 30.0, 7)[:, None], [[0.0]]), pairs)
    (proven,) = proved_gaps(corner, pairs, (-30.0, 30.0))
    assert sampled.gap_mm == pytest.approx(proven.gap_mm, abs=0.06)
    assert "is ignored" in sampled.note


def test_a_layout_without_a_rack_is_proven_along_its_one_input() -> None:
    corner = Corner(ARM.mechanism(ARM.example, steered=False), Wheel(ARM.example["wheel.centre"], 280.0), "arm")
    tyre = next(solid for solid in generated_solids(corner, RodStyle()) if solid.name == "tyre")
    rail = Solid("rail", "chassis", *cylinder((200.0, 480.0, 500.0), (-200.0, 480.0, 520.0), 20.0))
    (gap,) = proved_gaps(corner, [Pair(tyre, rail, 5.0)], (-60.0, 60.0))
    grid = gap_grid(corner, Pair(tyre, rail, 5.0), np.linspace(-60.0, 60.0, 2001), np.zeros(1))
    assert gap.rack_mm == 0.0
    assert gap.proven_gap_mm is not None
    assert gap.proven_gap_mm <= grid.min() <= gap.gap_mm + 1e-3


def test_relief_about_a_joint_ignores_the_contact_there_and_nowhere_else(corner: Corner) -> None:
    joint = corner.point("lower_arm.ball_joint")
    arm = Solid("arm", "lower_arm", *cylinder(joint + [0.0, -150.0, 0.0], joint, 10.0))
    upright = Solid("upright", "knuckle", *cylinder(joint, joint + [0.0, 0.0, 120.0], 10.0))
    rule = ClearanceRule("arm", "upright", 2.0)
    (touching,) = proved_gaps(corner, pairs_to_check(corner, (arm, upright), (rule,)), (-30.0, 30.0), (-10.0, 10.0))
    assert touching.verdict == "touching"
    relieved = pairs_to_check(corner, (arm, upright), (replace(rule, relief=25.0),))
    (clear,) = proved_gaps(corner, relieved, (-30.0, 30.0), (-10.0, 10.0))
    assert clear.verdict == "clear"
    assert "within 25 mm of lower_arm.ball_joint is ignored" in clear.note
    other = Solid("other", "upper_arm", *ball((0.0, 450.0, 600.0), 5.0))
    with pytest.raises(PairError, match="share no joint"):
        pairs_to_check(corner, (other, arm), (ClearanceRule("other", "arm", 2.0, 25.0),))


def test_what_relief_leaves_lies_outside_the_sphere(corner: Corner) -> None:
    mesh = ball((0.0, 0.0, 0.0), 40.0)
    pair = Pair(Solid("a", "lower_arm", *mesh), Solid("b", "knuckle", *mesh), 0.0)
    relief = pairs_to_check(corner, (pair.a, pair.b), (ClearanceRule("a", "b", 0.0, 30.0),))[0].relief[0]
    vertices, faces = without_spheres(*mesh, [replace(relief, centre=np.array([40.0, 0.0, 0.0]))])
    middles = vertices[faces].mean(axis=1)
    assert np.linalg.norm(middles - [40.0, 0.0, 0.0], axis=1).min() > 29.0
    untouched = np.linalg.norm(mesh[0] - [40.0, 0.0, 0.0], axis=1) > 36.0
    left = {tuple(vertex) for vertex in vertices}
    assert all(tuple(vertex) in left for vertex in mesh[0][untouched])


def test_what_is_finished_survives_an_interruption(corner: Corner) -> None:
    solids = {solid.name: solid for solid in generated_solids(corner, RodStyle())}
    pairs = [Pair(solids["tyre"], solids[name], 5.0) for name in ("lower_arm", "upper_arm", "tie_rod")]
    finished: list[object] = []

    def stop_after_one(done: int, total: int) -> None:
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        proved_gaps(corner, pairs, (-50.0, 60.0), (-30.0, 30.0), progress=stop_after_one, finished=finished)  # type: ignore[arg-type]
    assert len(finished) >= 1


SLOW = [HealthCheck.too_slow]


@settings(max_examples=15, deadline=None, suppress_health_check=SLOW)
@given(st.integers(0, 2**32 - 1))
def test_a_tighter_requirement_never_turns_tight_into_clear(seed: int) -> None:
    random = np.random.default_rng(seed)
    corner = Corner(LAYOUT.mechanism(LAYOUT.example), Wheel(LAYOUT.example["wheel.centre"], 280.0))
    pair = random_parts(random, corner)[0]
    verdicts = [
        proved_gaps(corner, [replace(pair, required_mm=need)], (-20.0, 20.0), (-10.0, 10.0))[0].verdict
        for need in (0.0, 10.0, 1000.0)
    ]
    assert verdicts[2] in ("tight", "touching")
    assert (verdicts[0] == "touching") == (verdicts[1] == "touching") == (verdicts[2] == "touching")
