"""What a proof over the whole motion costs, against a loop over a grid of poses: ratios in one run.

    python tests/benchmarks/bench_clearance.py        (needs the extra "test")

Parts of about 20,000 triangles: a tyre, and a tube as an arm's leg, once where the smallest gap lies in a corner of the
motion and once where it lies inside. The loop is ``trimesh.collision.CollisionManager`` at 61 × 41 poses. The isotropic
bound, for comparison, takes off a cell's whole displacement instead of what of it runs along the gap.
"""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np
import trimesh

from knucklepath.kinematics.clearance.boxes import build_tree
from knucklepath.kinematics.clearance.course import evaluate, tiles
from knucklepath.kinematics.clearance.gap import relative_poses
from knucklepath.kinematics.clearance.grid import gap_grid
from knucklepath.kinematics.clearance.pairs import Pair, pairs_to_check
from knucklepath.kinematics.clearance.primitives import lathe, tyre_ring
from knucklepath.kinematics.clearance.proof import Search
from knucklepath.kinematics.clearance.proved import proved_gaps
from knucklepath.kinematics.clearance.solids import Solid
from knucklepath.kinematics.clearance.traverse import distance
from knucklepath.kinematics.motion import solve_motion
from knucklepath.kinematics.wheel import Corner, Wheel
from knucklepath.plugins.layouts.double_a_arm import LAYOUT
from knucklepath.viewer.project import load_project

LOW, HIGH = np.array([-50.0, -30.0]), np.array([60.0, 30.0])
TOLERANCE = 0.05


def fine_tube(a: np.ndarray, b: np.ndarray, radius: float, rings: int = 160, sides: int = 64) -> Solid:
    """A tube of even triangles, about 20,000 if not said otherwise, on the lower arm."""
    length = float(np.linalg.norm(b - a))
    along = np.linspace(0.0, length, rings)
    profile = [(0.0, 0.0), *((float(at), radius) for at in along), (length, 0.0)]
    return Solid("leg", "lower_arm", *lathe(a, b - a, profile, sides))


def timed(function: Callable[[], object]) -> tuple[float, object]:
    function()
    start = time.perf_counter()
    value = function()
    return time.perf_counter() - start, value


def isotropic(search: Search, poses: Callable[[np.ndarray, np.ndarray], np.ndarray], need: float) -> int:
    """Evaluations of a proof that bounds a cell by the farthest any point moves in it."""
    box = search.b.centre[0] + np.array([[x, y, z] for x in (-1, 1) for y in (-1, 1) for z in (-1, 1)]) * np.abs(
        search.b.half[0] @ search.b.axes[0]
    )
    waiting, count = [(LOW, HIGH)], 0
    while waiting and count < 60_000:
        low, high = waiting.pop()
        count += 1
        u, v = np.meshgrid(*(np.linspace(low[k], high[k], 3) for k in range(2)), indexing="ij")
        values = poses(u.ravel(), v.ravel())
        places = np.einsum("nij,kj->nki", values[:, :9].reshape(-1, 3, 3), box) + values[:, None, 9:]
        moved = np.linalg.norm(places - places[4], axis=2).max()
        apart, *_ = distance(search.a, search.b, values[4, :9].reshape(3, 3).copy(), values[4, 9:].copy(), 1e300)
        if apart - moved >= need:
            continue
        axis = int(np.argmax((high - low) / (HIGH - LOW)))
        middle = (low[axis] + high[axis]) / 2.0
        upper, lower = low.copy(), high.copy()
        upper[axis] = lower[axis] = middle
        waiting += [(low, lower), (upper, high)]
    return count


def compare(name: str, corner: Corner, tyre: Solid, leg: Solid) -> None:
    def poses(u: np.ndarray, v: np.ndarray) -> np.ndarray:
        motion = solve_motion(corner, u, v)
        rotation, shift = relative_poses(motion, leg.body, tyre.body)
        return np.concatenate((rotation.reshape(-1, 9), shift), axis=1)

    trees = [build_tree(solid.vertices, solid.faces) for solid in (leg, tyre)]
    course = tiles(poses, LOW, HIGH, float(np.linalg.norm(tyre.vertices, axis=1).max()))

    def prove() -> Search:
        search = Search(*trees, tiles(poses, LOW, HIGH, 1000.0))
        search.seed()
        assert search.prove(lambda: 5.0)
        return search

    def smallest() -> Search:
        search = Search(*trees, tiles(poses, LOW, HIGH, 1000.0))
        search.seed()
        search.descend(TOLERANCE)
        assert search.prove(lambda: search.best - TOLERANCE)
        return search

    def loop() -> float:
        manager = trimesh.collision.CollisionManager()
        manager.add_object("leg", trimesh.Trimesh(leg.vertices, leg.faces, process=False))
        other = trimesh.collision.CollisionManager()
        other.add_object("tyre", trimesh.Trimesh(tyre.vertices, tyre.faces, process=False))
        motion = solve_motion(corner, np.linspace(-50, 60, 61)[:, None], np.linspace(-30, 30, 41)[None])
        still, moving = motion.matrix(leg.body).reshape(-1, 4, 4), motion.matrix(tyre.body).reshape(-1, 4, 4)
        best = np.inf
        for here, there in zip(still, moving, strict=True):
            manager.set_transform("leg", here)
            other.set_transform("tyre", there)
            best = min(best, manager.min_distance_other(other))
        return best

    loop_time, grid_best = timed(loop)
    prove_time, proof = timed(prove)
    small_time, found = timed(smallest)
    assert isinstance(proof, Search)
    assert isinstance(found, Search)
    assert isinstance(grid_best, float)
    print(f"{name}: {len(leg.faces):,} and {len(tyre.faces):,} triangles; {len(course)} tiles")
    print(f"  loop over 2,501 poses        {loop_time * 1e3:8.0f} ms, smallest {grid_best:.4f} mm")
    proofs = ("gap of 5 mm proven     ", prove_time, proof), ("smallest gap to 0.05 mm", small_time, found)
    for what, spent, search in proofs:
        ratio = loop_time / spent
        print(f"  {what}      {spent * 1e3:8.1f} ms, {search.evaluations} evaluations: {ratio:.1f} times faster")
    print(f"  which is {found.best:.4f} mm at travel {found.pose[0]:+.1f}, rack {found.pose[1]:+.1f}")

    def from_tiles(u: np.ndarray, v: np.ndarray) -> np.ndarray:
        out = np.empty((len(u), 12))
        for tile in course:
            here = (u >= tile.low[0]) & (u <= tile.high[0]) & (v >= tile.low[1]) & (v <= tile.high[1])
            out[here] = evaluate(tile, u[here], v[here])
        return out

    for slack in (1.0, 0.25, TOLERANCE):
        need = found.best - slack
        directional = Search(*trees, course)
        assert directional.prove(lambda need=need: need)
        other = isotropic(found, from_tiles, need)
        least = "at least " if other >= 60_000 else ""
        print(
            f"  gap less {slack} mm proven: {directional.evaluations} evaluations, isotropic {least}{other}:"
            f" {least}{other / directional.evaluations:.0f} times as many"
        )


def tube_with_its_minimum_inside(corner: Corner, tyre: Solid) -> Solid:
    """A tube, found by trying with coarse meshes, whose smallest gap to the tyre lies well inside the motion."""
    random = np.random.default_rng(7)
    wheel = corner.wheel
    coarse = Solid("tyre", "wheel", *tyre_ring(wheel.centre, wheel.spin_axis, 280.0, 190.0, 165.0, 24))
    travel, rack = np.linspace(-50.0, 60.0, 12), np.linspace(-30.0, 30.0, 9)
    for _ in range(3000):
        start = corner.wheel.centre + random.normal(size=3) * 220.0
        end = start + random.normal(size=3) * 120.0
        values = gap_grid(corner, Pair(fine_tube(start, end, 12.0, 2, 8), coarse, 5.0), travel, rack)
        i, j = np.unravel_index(int(values.argmin()), values.shape)
        if 1 < i < 10 and 1 < j < 7 and 7.0 < values.min() < 60.0:
            return fine_tube(start, end, 12.0)
    raise SystemExit("no such tube found")


def demo() -> None:
    project = load_project("assets/hill_climb_front")
    pairs: tuple[Pair, ...] = pairs_to_check(project.corner, project.solids(), project.clearances)
    lock = project.rack_each_way or 0.0
    spent, gaps = timed(lambda: proved_gaps(project.corner, pairs, (-project.rebound, project.bump), (-lock, lock)))
    assert isinstance(gaps, list)
    print(f"the demo's {len(pairs)} pairs, {sum(gap.evaluations for gap in gaps)} evaluations: {spent:.2f} s")


def main() -> None:
    wheel = Wheel(LAYOUT.example["wheel.centre"], 280.0, tyre_width=190.0, rim_diameter=330.0)
    corner = Corner(LAYOUT.mechanism(LAYOUT.example), wheel, steering_axis=LAYOUT.steering_axis)
    tyre = Solid("tyre", "wheel", *tyre_ring(wheel.centre, wheel.spin_axis, 280.0, 190.0, 165.0, 520))
    ball_joint = corner.point("lower_arm.ball_joint")
    compare(
        "smallest gap in a corner", corner, tyre, fine_tube(corner.point("lower_arm.front_pivot"), ball_joint, 10.0)
    )
    compare("smallest gap inside", corner, tyre, tube_with_its_minimum_inside(corner, tyre))
    demo()


if __name__ == "__main__":
    main()
