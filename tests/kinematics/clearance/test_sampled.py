"""The smallest gap over a grid: the same as trying every pose, and honest about what it does not know."""

from __future__ import annotations

from dataclasses import dataclass

import fcl
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from manifold3d import Manifold, Mesh

from knucklepath.kinematics.clearance.boxes import build_tree
from knucklepath.kinematics.clearance.contact import nearest_on_triangle
from knucklepath.kinematics.clearance.pairs import Pair, PairError, pairs_to_check
from knucklepath.kinematics.clearance.primitives import ball, cylinder, lathe, merged
from knucklepath.kinematics.clearance.sampled import sampled_gaps
from knucklepath.kinematics.clearance.solids import RodStyle, Solid, generated_solids
from knucklepath.kinematics.clearance.traverse import distance
from knucklepath.kinematics.errors import MeshError, ReachError
from knucklepath.kinematics.motion import Motion, solve_motion
from knucklepath.kinematics.wheel import Corner, Wheel
from knucklepath.plugins.layouts.double_a_arm import LAYOUT


@dataclass(frozen=True)
class Rule:
    a: str
    b: str
    gap: float
    relief: float = 0.0


@pytest.fixture(scope="module")
def corner() -> Corner:
    wheel = Wheel(LAYOUT.example["wheel.centre"], 280.0, tyre_width=190.0, rim_diameter=330.0)
    return Corner(LAYOUT.mechanism(LAYOUT.example), wheel, steering_axis=LAYOUT.steering_axis)


@pytest.fixture(scope="module")
def motion(corner: Corner) -> Motion:
    return solve_motion(corner, np.linspace(-50.0, 60.0, 13)[:, None], np.linspace(-30.0, 30.0, 9)[None])


def box(low: tuple[float, float, float], high: tuple[float, float, float]) -> tuple[np.ndarray, np.ndarray]:
    vertices = np.array([[x, y, z] for x in (low[0], high[0]) for y in (low[1], high[1]) for z in (low[2], high[2])])
    quads = [(0, 1, 3, 2), (4, 6, 7, 5), (0, 4, 5, 1), (2, 3, 7, 6), (0, 2, 6, 4), (1, 5, 7, 3)]
    faces = np.array([t for a, b, c, d in quads for t in ((a, b, c), (a, c, d))], dtype=np.int32)
    return vertices, faces


def fcl_model(vertices: np.ndarray, faces: np.ndarray) -> fcl.CollisionObject:
    model = fcl.BVHModel()
    model.beginModel(len(vertices), len(faces))
    model.addSubModel(vertices, faces)
    model.endModel()
    return fcl.CollisionObject(model, fcl.Transform())


def test_the_gap_is_no_larger_than_that_of_any_pose_of_the_grid(corner: Corner, motion: Motion) -> None:
    solids = {solid.name: solid for solid in generated_solids(corner, RodStyle())}
    pairs = [Pair(solids["tyre"], solids[name], 5.0) for name in ("lower_arm", "upper_arm", "tie_rod")]
    gaps = {gap.between[1]: gap for gap in sampled_gaps(motion, pairs)}
    for pair in pairs:
        tyre, other = fcl_model(pair.a.vertices, pair.a.faces), fcl_model(pair.b.vertices, pair.b.faces)
        smallest = np.inf
        for index in np.ndindex(motion.shape):
            for item, body in ((tyre, "wheel"), (other, pair.b.body)):
                item.setTransform(fcl.Transform(motion.rotation(body)[index], motion.translation(body)[index]))
            smallest = min(smallest, fcl.distance(tyre, other, fcl.DistanceRequest(), fcl.DistanceResult()))
        found = gaps[pair.b.name]
        assert found.gap_mm <= smallest + 1e-9
        assert found.gap_mm > smallest - 3.0
        assert np.linalg.norm(found.point_a_mm - found.point_b_mm) == pytest.approx(found.gap_mm, abs=1e-9)


def test_many_pairs_at_once_give_what_each_gives_alone_in_any_order(corner: Corner, motion: Motion) -> None:
    """A part that moved in one pair stands still in the next; nothing of the one may be left in the other."""
    pairs = pairs_to_check(corner, generated_solids(corner, RodStyle()), ())
    assert {pair.a.name for pair in pairs} & {pair.b.name for pair in pairs}
    alone = {pair.a.name + pair.b.name: sampled_gaps(motion, [pair])[0] for pair in pairs}
    for order in (pairs, pairs[::-1]):
        for gap in sampled_gaps(motion, order):
            expected = alone["".join(gap.between)]
            assert gap.gap_mm == expected.gap_mm
            assert (gap.travel_mm, gap.rack_mm) == (expected.travel_mm, expected.rack_mm)


def test_the_points_lie_on_both_parts_at_the_pose(corner: Corner, motion: Motion) -> None:
    solids = {solid.name: solid for solid in generated_solids(corner, RodStyle())}
    (gap,) = sampled_gaps(motion, [Pair(solids["tyre"], solids["lower_arm"], 5.0)])
    pose = solve_motion(corner, gap.travel_mm, gap.rack_mm)
    for point, name in ((gap.point_a_mm, "tyre"), (gap.point_b_mm, "lower_arm")):
        body = solids[name].body
        moved = solids[name].vertices @ pose.rotation(body).T + pose.translation(body)
        speck = fcl_model(point + np.array([[0, 0, 0], [1e-7, 0, 0], [0, 1e-7, 0]]), np.array([[0, 1, 2]]))
        part = fcl_model(moved, solids[name].faces)
        assert fcl.distance(speck, part, fcl.DistanceRequest(), fcl.DistanceResult()) < 1e-5


def test_verdicts_and_order_worst_first(corner: Corner, motion: Motion) -> None:
    solids = {solid.name: solid for solid in generated_solids(corner, RodStyle())}
    hub = corner.wheel.centre
    wedge = Solid("wedge", "chassis", *box((-20, 600, 300), (20, 640, 520)))
    pairs = [
        Pair(solids["tyre"], solids["upper_arm"], 0.0),
        Pair(solids["tyre"], solids["lower_arm"], 400.0),
        Pair(solids["tyre"], wedge, 3.0),
    ]
    touching, tight, undecided = sampled_gaps(motion, pairs)
    assert (touching.verdict, touching.gap_mm, touching.between) == ("touching", 0.0, ("tyre", "wedge"))
    assert (tight.verdict, tight.between) == ("tight", ("tyre", "lower_arm"))
    assert (undecided.verdict, undecided.proven_gap_mm) == ("undecided", None)
    assert np.linalg.norm(touching.point_a_mm - hub) < 500.0


def test_touching_at_one_corner_of_the_motion_only_is_found(corner: Corner, motion: Motion) -> None:
    """A speck that the tyre reaches at full bump and one lock, and at no other pose of the grid."""
    tyre = next(solid for solid in generated_solids(corner, RodStyle()) if solid.name == "tyre")
    moved = (
        np.einsum("uvij,nj->uvni", motion.rotation("wheel"), tyre.vertices) + motion.translation("wheel")[:, :, None]
    )
    directions = np.random.default_rng(5).normal(size=(400, 3))
    directions /= np.linalg.norm(directions, axis=1, keepdims=True)
    reach = (moved @ directions.T).max(axis=2)
    others = reach.reshape(-1, len(directions)).copy()
    others[-1] = -np.inf
    ahead = reach[-1, -1] - others.max(axis=0)
    best = int(ahead.argmax())
    assert ahead[best] > 0.5
    tip = moved[-1, -1][int((moved[-1, -1] @ directions[best]).argmax())]
    speck = Solid("speck", "chassis", *ball(tip + directions[best] * 1.8, 2.0))
    (gap,) = sampled_gaps(motion, [Pair(tyre, speck, 1.0)])
    assert gap.verdict == "touching"
    assert (gap.travel_mm, gap.rack_mm) == (60.0, 30.0)
    (inner,) = sampled_gaps(motion[:-1, :-1], [Pair(tyre, speck, 1.0)])
    assert inner.verdict != "touching"


def test_a_part_wholly_inside_another_is_touching(corner: Corner, motion: Motion) -> None:
    hub = corner.wheel.centre
    shell = Solid("shell", "chassis", *ball(hub, 600.0))
    core = Solid("core", "knuckle", *ball(hub, 20.0))
    (gap,) = sampled_gaps(motion, [Pair(shell, core, 1.0)])
    assert gap.verdict == "touching"
    assert gap.gap_mm == 0.0
    assert "core lies wholly inside shell" in gap.note


@pytest.mark.parametrize("flaw", ["none", "inside out", "repeated triangles", "sliver"])
def test_flaws_of_a_closed_mesh_do_not_hide_what_is_inside_it(flaw: str, corner: Corner, motion: Motion) -> None:
    hub = corner.wheel.centre
    vertices, faces = box((-600.0, -600.0, -600.0), (600.0, 600.0, 600.0))
    vertices = vertices + hub
    if flaw == "inside out":
        faces = faces[:, ::-1]
    elif flaw == "repeated triangles":
        faces = np.concatenate((faces, faces[:3], faces[:1]))
    elif flaw == "sliver":
        # an edge is split on one side, and a triangle without area joins its halves to the other side
        a, b, c = faces[0]
        middle = len(vertices)
        vertices = np.concatenate((vertices, [(vertices[a] + vertices[b]) / 2.0]))
        faces = np.concatenate((faces[1:], [[a, middle, c], [middle, b, c], [middle, a, b]]))
    shell = Solid("shell", "chassis", vertices, faces.astype(np.int32))
    core = Solid("core", "knuckle", *ball(hub, 20.0))
    for pair in (Pair(shell, core, 1.0), Pair(core, shell, 1.0)):
        (gap,) = sampled_gaps(motion, [pair])
        assert (gap.verdict, gap.gap_mm) == ("touching", 0.0)
        assert gap.note == "core lies wholly inside shell."


def pin_and_block(corner: Corner, low: float, high: float) -> tuple[tuple[np.ndarray, np.ndarray], ...]:
    """A small ball at the wheel centre, and a block of the chassis from ``low`` to ``high`` above it."""
    hub = corner.wheel.centre
    block = box((-300.0, -300.0, low), (300.0, 300.0, high))
    return ball(hub, 1.0), (block[0] + hub, block[1])


def test_a_piece_inside_at_some_sampled_poses_is_found_though_another_piece_comes_nearer(corner: Corner) -> None:
    """The ball steps over the block's surface from one pose to the next, and is farther from it than the feelers."""
    motion = solve_motion(corner, np.linspace(-50.0, 60.0, 23)[:, None], np.zeros((1, 1)))
    pin, block = pin_and_block(corner, 12.3, 32.3)
    at = corner.wheel.centre + [200.0, 0.0, -300.0]
    lowest = motion.point("wheel", at)[0, 0]
    moving = Solid("moving", "wheel", *merged([pin, ball(at, 5.0)]))
    fixed = Solid("fixed", "chassis", *merged([block, ball(lowest - [0.0, 0.0, 11.0], 5.0)]))
    assert min(abs(motion.travel_mm - 12.3).min(), abs(motion.travel_mm - 32.3).min()) > 2.0
    (gap,) = sampled_gaps(motion, [Pair(fixed, moving, 0.1)])
    assert gap.verdict == "touching"
    assert 12.3 < gap.travel_mm < 32.3
    assert "moving lies wholly inside fixed" in gap.note
    (below,) = sampled_gaps(motion[:12], [Pair(fixed, moving, 0.1)])
    assert below.verdict == "undecided"
    assert 0.1 < below.gap_mm < 1.0


def test_sharpening_that_steps_through_a_surface_knows_that_it_is_inside(corner: Corner) -> None:
    """From travel 5, 6 mm below the block, the first step that comes nearer to its surface is within it."""
    motion = solve_motion(corner, np.array([[-50.0], [5.0], [60.0]]), np.zeros((1, 1)))
    pin, block = pin_and_block(corner, 12.3, 45.0)
    (gap,) = sampled_gaps(motion, [Pair(Solid("block", "chassis", *block), Solid("pin", "wheel", *pin), 0.1)])
    assert gap.verdict == "touching"
    assert gap.note == "pin lies wholly inside block."
    assert 13.3 < gap.travel_mm < 44.0


@pytest.mark.parametrize("seed", range(12))
def test_the_point_of_touching_parts_lies_on_both(seed: int, corner: Corner, motion: Motion) -> None:
    place = np.random.default_rng(seed)
    hub = corner.wheel.centre
    reach = place.normal(size=(2, 3)) * 60.0
    bars = [cylinder(hub - way, hub + way + place.normal(size=3) * 10.0, 25.0) for way in reach]
    a, b = Solid("a", "chassis", *bars[0]), Solid("b", "wheel", *bars[1])
    (gap,) = sampled_gaps(motion, [Pair(a, b, 1.0)])
    assert gap.verdict == "touching"
    np.testing.assert_array_equal(gap.point_a_mm, gap.point_b_mm)
    pose = solve_motion(corner, gap.travel_mm, gap.rack_mm)
    for solid in (a, b):
        moved = solid.vertices @ pose.rotation(solid.body).T + pose.translation(solid.body)
        triangles = moved[solid.faces]
        nearest = min(
            float(np.linalg.norm(nearest_on_triangle(gap.point_a_mm, triangle) - gap.point_a_mm))
            for triangle in triangles
        )
        assert nearest < 1e-9


def test_the_same_part_twice_touches_itself(corner: Corner, motion: Motion) -> None:
    part = ball(corner.wheel.centre, 20.0)
    (gap,) = sampled_gaps(motion, [Pair(Solid("one", "wheel", *part), Solid("two", "knuckle", *part), 1.0)])
    assert (gap.verdict, gap.gap_mm, gap.rack_mm) == ("touching", 0.0, 0.0)
    assert abs(gap.travel_mm) == np.abs(motion.travel_mm).min()


def test_the_pose_reported_is_a_local_minimum(corner: Corner, motion: Motion) -> None:
    """No pose near it brings the parts nearer by the tolerance, whichever way one goes."""
    solids = {solid.name: solid for solid in generated_solids(corner, RodStyle())}
    for name in ("lower_arm", "tie_rod"):
        (gap,) = sampled_gaps(motion, [Pair(solids["tyre"], solids[name], 5.0)], tolerance_mm=0.05)
        tyre, other = (fcl_model(solids[key].vertices, solids[key].faces) for key in ("tyre", name))
        turns = np.linspace(0.0, 2.0 * np.pi, 16, endpoint=False)
        for reach in (0.2, 1.0):
            travel = np.clip(gap.travel_mm + reach * np.cos(turns), -50.0, 60.0)
            rack = np.clip(gap.rack_mm + reach * np.sin(turns), -30.0, 30.0)
            near = solve_motion(corner, travel, rack)
            for k in range(len(turns)):
                for item, body in ((tyre, "wheel"), (other, name)):
                    item.setTransform(fcl.Transform(near.rotation(body)[k], near.translation(body)[k]))
                value = fcl.distance(tyre, other, fcl.DistanceRequest(), fcl.DistanceResult())
                assert value > gap.gap_mm - 0.05


def test_a_motion_that_cannot_be_reached_at_all_is_said_to_be_so(corner: Corner) -> None:
    locked = solve_motion(corner, [[900.0], [950.0]], [[0.0]])
    assert not locked.reached.any()
    solids = {solid.name: solid for solid in generated_solids(corner, RodStyle())}
    with pytest.raises(ReachError, match="none of the 2 poses"):
        sampled_gaps(locked, [Pair(solids["tyre"], solids["lower_arm"], 5.0)])
    half = solve_motion(corner, [[0.0], [900.0]], [[0.0]])
    (gap,) = sampled_gaps(half, [Pair(solids["tyre"], solids["lower_arm"], 5.0)])
    assert np.isfinite(gap.gap_mm)


def test_an_open_mesh_is_measured_and_said_to_be_open(corner: Corner, motion: Motion) -> None:
    vertices, faces = ball(corner.wheel.centre, 600.0)
    shell = Solid("shell", "chassis", vertices, faces[1:])
    core = Solid("core", "knuckle", *ball(corner.wheel.centre, 20.0))
    (gap,) = sampled_gaps(motion, [Pair(shell, core, 1.0)])
    assert gap.verdict == "undecided"
    assert gap.gap_mm > 400.0
    assert "open mesh" in gap.note


def test_degenerate_and_duplicate_triangles_change_nothing(corner: Corner, motion: Motion) -> None:
    vertices, faces = cylinder((0, 300, 700), (0, 700, 700), 20.0)
    clean = Solid("bar", "chassis", vertices, faces)
    spoilt = Solid(
        "bar", "chassis", vertices, np.concatenate((faces, faces[:5], [[3, 3, 3], [1, 1, 2]])).astype(np.int32)
    )
    tyre = next(solid for solid in generated_solids(corner, RodStyle()) if solid.name == "tyre")
    first, second = (sampled_gaps(motion, [Pair(tyre, bar, 1.0)])[0] for bar in (clean, spoilt))
    assert first.gap_mm == pytest.approx(second.gap_mm, abs=1e-9)


@pytest.mark.parametrize("fault", ["empty", "not finite", "only degenerate"])
def test_a_mesh_without_triangles_or_sense_is_refused(fault: str, corner: Corner, motion: Motion) -> None:
    vertices, faces = ball((0, 0, 0), 10.0)
    if fault == "empty":
        faces = faces[:0]
    elif fault == "not finite":
        vertices = vertices.copy()
        vertices[0, 0] = np.nan
    else:
        faces = np.repeat(faces[:, :1], 3, axis=1)
    other = Solid("other", "chassis", *ball((900, 0, 0), 10.0))
    with pytest.raises(MeshError, match="bad"):
        sampled_gaps(motion, [Pair(Solid("bad", "knuckle", vertices, faces), other, 1.0)])


turn = st.floats(-3.0, 3.0, allow_nan=False)


@settings(max_examples=25, deadline=None)
@given(st.tuples(turn, turn, turn), st.tuples(st.floats(-90, 90), st.floats(-90, 90), st.floats(-90, 90)))
def test_distances_equal_an_independent_engine(direction: tuple[float, ...], shift: tuple[float, ...]) -> None:
    """manifold3d's smallest gap between closed meshes is an independent answer."""
    axis = np.array(direction) if np.linalg.norm(direction) > 0.1 else np.array([0.0, 0.0, 1.0])
    cone = lathe((0, 0, 0), (0, 0, 1), [(0, 0), (0, 25), (40, 8), (40, 0)], 16)
    pin = lathe(shift, axis, [(0, 0), (0, 6), (70, 6), (70, 0)], 12)
    solids = [
        Manifold(Mesh(np.asarray(vertices, dtype=np.float32), np.asarray(faces, dtype=np.uint32)))
        for vertices, faces in (cone, pin)
    ]
    expected = solids[0].min_gap(solids[1], 500.0)
    wheel = Wheel(LAYOUT.example["wheel.centre"], 280.0)
    still = solve_motion(Corner(LAYOUT.mechanism(LAYOUT.example), wheel), [[0.0]], [[0.0]])
    (gap,) = sampled_gaps(still, [Pair(Solid("cone", "chassis", *cone), Solid("pin", "knuckle", *pin), 1.0)])
    assert gap.gap_mm == pytest.approx(expected, abs=2e-4)
    own, *_ = distance(build_tree(*cone), build_tree(*pin), np.eye(3), np.zeros(3), 1e300)
    assert own == pytest.approx(expected, abs=2e-4)


def test_pairs_come_from_names_bodies_and_patterns(corner: Corner) -> None:
    solids = generated_solids(corner, RodStyle())

    def names(*rules: Rule) -> set[frozenset[str]]:
        return {frozenset((pair.a.name, pair.b.name)) for pair in pairs_to_check(corner, solids, rules)}

    everything = names()
    assert frozenset(("tyre", "lower_arm")) in everything
    assert frozenset(("rim", "tie_rod")) in everything
    for joined in (("knuckle", "lower_arm"), ("tie_rod", "rack"), ("tyre", "rim"), ("tyre", "knuckle")):
        assert frozenset(joined) not in everything
    assert names(Rule("tyre", "*", 5.0)) == {pair for pair in everything if "tyre" in pair}
    assert names(Rule("tyre", "knuckle", 2.0)) == {frozenset(("tyre", "knuckle"))}
    (pair,) = pairs_to_check(corner, solids, (Rule("tyre", "lower_arm", 3.0), Rule("lower_arm", "tyre", 8.0)))
    assert pair.required_mm == 8.0
    both = pairs_to_check(corner, solids, (Rule("tyre", "*", 9.0), Rule("tyre", "tie_rod", 4.0)))
    assert {pair.required_mm for pair in both if "tie_rod" in (pair.a.name, pair.b.name)} == {4.0}


def test_an_unknown_name_is_met_with_the_nearest(corner: Corner) -> None:
    solids = generated_solids(corner, RodStyle())
    with pytest.raises(PairError, match="did you mean 'lower_arm'"):
        pairs_to_check(corner, solids, (Rule("tyre", "lower_arn", 1.0),))
    hidden = generated_solids(corner, RodStyle(20.0, {"knuckle": None}))
    with pytest.raises(PairError, match="nothing stands on 'knuckle'"):
        pairs_to_check(corner, hidden, (Rule("tyre", "knuckle", 1.0),))


def test_a_body_with_several_pieces_is_seen_whole(corner: Corner, motion: Motion) -> None:
    far, near = cylinder((0, 0, 900), (0, 100, 900), 5.0), cylinder((0, 600, 560), (0, 700, 560), 5.0)
    tyre = next(solid for solid in generated_solids(corner, RodStyle()) if solid.name == "tyre")
    alone, together = (
        sampled_gaps(motion, [Pair(tyre, Solid("frame", "chassis", *mesh), 0.0)])[0].gap_mm
        for mesh in (near, merged([far, near]))
    )
    assert alone == pytest.approx(together, abs=0.05)
