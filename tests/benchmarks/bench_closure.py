"""How fast the motion of a five-link is solved: ratios in one run, against two other ways of doing it.

    python tests/benchmarks/bench_closure.py        (needs the extra "bench")

The others: ``scipy.optimize.root`` called pose by pose from the neighbouring pose, with and without the exact Jacobian;
and the same Newton iteration compiled per pose with numba, also from the neighbouring pose. All solve the same 61 × 41
poses to the same residual, 1e-9 mm.
"""

from __future__ import annotations

import statistics
import time
from collections.abc import Callable

import numpy as np
from numba import njit
from scipy.optimize import root

from knucklepath.kinematics.corner import corner_readings
from knucklepath.kinematics.frames import rotation_from_vector
from knucklepath.kinematics.motion import solve_motion
from knucklepath.kinematics.wheel import Corner, Wheel
from knucklepath.plugins.layouts.five_link import LAYOUT

TRAVEL, RACK = np.linspace(-60.0, 60.0, 61), np.linspace(-30.0, 30.0, 41)
RESIDUAL = 1e-9
LINKS = ("upper_front", "upper_rear", "lower_front", "lower_rear", "toe_link")
HUB = np.array(LAYOUT.example["wheel.centre"])
INBOARD = np.array([LAYOUT.example[f"{link}.inboard"] for link in LINKS])
OUTBOARD = np.array([LAYOUT.example[f"{link}.outboard"] for link in LINKS])
ARMS = OUTBOARD - HUB
LENGTHS = np.linalg.norm(OUTBOARD - INBOARD, axis=1)


@njit
def turn_matrix(vector: np.ndarray) -> np.ndarray:
    angle = np.sqrt((vector * vector).sum())
    first = 1.0 - angle * angle / 6.0 if angle < 1e-4 else np.sin(angle) / angle
    second = 0.5 - angle * angle / 24.0 if angle < 1e-4 else (1.0 - np.cos(angle)) / (angle * angle)
    x, y, z = vector
    skew = np.array([[0.0, -z, y], [z, 0.0, -x], [-y, x, 0.0]])
    return np.eye(3) + first * skew + second * (skew @ skew)


@njit
def equations(turn, place, travel, rack, arms, inboard, lengths, hub_z, residual, jacobian):  # type: ignore[no-untyped-def]
    """The kernel's equations for this layout: five rods and the wheel centre's height."""
    worst = 0.0
    for k in range(5):
        arm = np.empty(3)
        for i in range(3):
            arm[i] = turn[i, 0] * arms[k, 0] + turn[i, 1] * arms[k, 1] + turn[i, 2] * arms[k, 2]
        dx = place[0] + arm[0] - inboard[k, 0]
        dy = place[1] + arm[1] - inboard[k, 1] - (rack if k == 4 else 0.0)
        dz = place[2] + arm[2] - inboard[k, 2]
        length = lengths[k]
        residual[k] = (dx * dx + dy * dy + dz * dz - length * length) / (2.0 * length)
        dx, dy, dz = dx / length, dy / length, dz / length
        jacobian[k, 0] = arm[1] * dz - arm[2] * dy
        jacobian[k, 1] = arm[2] * dx - arm[0] * dz
        jacobian[k, 2] = arm[0] * dy - arm[1] * dx
        jacobian[k, 3], jacobian[k, 4], jacobian[k, 5] = dx, dy, dz
    residual[5] = place[2] - hub_z - travel
    for i in range(6):
        jacobian[5, i] = 1.0 if i == 5 else 0.0
        worst = max(worst, abs(residual[i]))
    return worst


@njit
def eliminate(matrix, right):  # type: ignore[no-untyped-def]
    """Gaussian elimination with partial pivoting, in place."""
    n = len(right)
    for k in range(n):
        pivot = k
        for i in range(k + 1, n):
            if abs(matrix[i, k]) > abs(matrix[pivot, k]):
                pivot = i
        if pivot != k:
            for j in range(k, n):
                matrix[k, j], matrix[pivot, j] = matrix[pivot, j], matrix[k, j]
            right[k], right[pivot] = right[pivot], right[k]
        for i in range(k + 1, n):
            factor = matrix[i, k] / matrix[k, k]
            for j in range(k + 1, n):
                matrix[i, j] -= factor * matrix[k, j]
            right[i] -= factor * right[k]
    for i in range(n - 1, -1, -1):
        for j in range(i + 1, n):
            right[i] -= matrix[i, j] * right[j]
        right[i] /= matrix[i, i]


@njit
def newton_per_pose(travels, racks, arms, inboard, lengths, hub, places, turns):  # type: ignore[no-untyped-def]
    residual, jacobian = np.empty(6), np.empty((6, 6))
    worst_of_all = 0.0
    row_turn, row_place = np.eye(3), hub.copy()
    for i in range(len(travels)):
        turn, place = row_turn.copy(), row_place.copy()
        for j in range(len(racks)):
            worst = 1.0
            for _ in range(12):
                worst = equations(turn, place, travels[i], racks[j], arms, inboard, lengths, hub[2], residual, jacobian)
                if worst <= 1e-10:
                    break
                for k in range(6):
                    residual[k] = -residual[k]
                eliminate(jacobian, residual)
                turn = turn_matrix(residual[:3]) @ turn
                place = place + residual[3:]
            worst_of_all = max(worst_of_all, worst)
            if j == 0:
                row_turn, row_place = turn.copy(), place.copy()
            turns[i, j], places[i, j] = turn, place
    return worst_of_all


def compiled_grid() -> np.ndarray:
    places, turns = np.empty((len(TRAVEL), len(RACK), 3)), np.empty((len(TRAVEL), len(RACK), 3, 3))
    worst = newton_per_pose(TRAVEL, RACK, ARMS, INBOARD, LENGTHS, HUB, places, turns)
    assert worst <= RESIDUAL
    return places


def plain_equations(turn: np.ndarray, place: np.ndarray, travel: float, rack: float) -> tuple[np.ndarray, np.ndarray]:
    """The same equations in numpy, as one writes them for scipy."""
    arms = ARMS @ turn.T
    apart = place + arms - INBOARD
    apart[4, 1] -= rack
    residual = np.append(((apart * apart).sum(axis=1) - LENGTHS**2) / (2.0 * LENGTHS), place[2] - HUB[2] - travel)
    along = apart / LENGTHS[:, None]
    jacobian = np.zeros((6, 6))
    jacobian[:5, :3], jacobian[:5, 3:], jacobian[5, 5] = np.cross(arms, along), along, 1.0
    return residual, jacobian


def scipy_grid(with_jacobian: bool) -> np.ndarray:
    places = np.empty((len(TRAVEL), len(RACK), 3))
    row_turn, row_place = np.eye(3), HUB.copy()
    for i, travel in enumerate(TRAVEL):
        turn, place = row_turn, row_place
        for j, rack in enumerate(RACK):

            def function(step: np.ndarray, turn=turn, place=place, travel=travel, rack=rack) -> object:  # type: ignore[no-untyped-def]
                both = plain_equations(rotation_from_vector(step[:3]) @ turn, place + step[3:], travel, rack)
                return both if with_jacobian else both[0]

            found = root(function, np.zeros(6), jac=with_jacobian, method="hybr", options={"xtol": 1e-13})
            turn, place = rotation_from_vector(found.x[:3]) @ turn, place + found.x[3:]
            assert np.abs(plain_equations(turn, place, travel, rack)[0]).max() <= RESIDUAL
            places[i, j] = place
            if j == 0:
                row_turn, row_place = turn, place
    return places


def seconds(function: Callable[[], object], repeats: int) -> float:
    function()
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        function()
        times.append(time.perf_counter() - start)
    return statistics.median(times)


def main() -> None:
    corner = Corner(LAYOUT.mechanism(LAYOUT.example), Wheel(HUB, 300.0))

    def ours() -> np.ndarray:
        motion = solve_motion(corner, TRAVEL[:, None], RACK[None])
        assert motion.reached.all()
        assert motion.residual_mm.max() <= RESIDUAL
        return motion.point("knuckle", HUB)

    np.testing.assert_allclose(compiled_grid(), ours(), atol=1e-7)
    np.testing.assert_allclose(scipy_grid(True), ours(), atol=1e-6)
    motion = solve_motion(corner, TRAVEL[:, None], RACK[None])
    kept = dict(motion.__dict__)

    def readings() -> object:
        motion.__dict__.clear()
        motion.__dict__.update(kept)
        return corner_readings(motion)

    solve = seconds(lambda: solve_motion(corner, TRAVEL[:, None], RACK[None]), 31)
    compiled = seconds(compiled_grid, 31)
    read = seconds(readings, 31)
    with_jacobian, without = seconds(lambda: scipy_grid(True), 3), seconds(lambda: scipy_grid(False), 3)
    poses = len(TRAVEL) * len(RACK)
    print(f"five-link, {poses} poses; medians of one run")
    print(f"  ours                         {solve * 1e3:9.2f} ms  {solve / poses * 1e6:7.2f} µs a pose, rates included")
    for name, value in (("exact Jacobian ", with_jacobian), ("its differences", without)):
        print(f"  scipy root, {name}  {value * 1e3:9.2f} ms  {value / solve:7.0f} times ours (goal: 150)")
    print(f"  Newton compiled per pose     {compiled * 1e3:9.2f} ms  ours is {solve / compiled:.2f} of it (goal: 2.5)")
    print(f"  all readings                 {read * 1e3:9.2f} ms  {read / solve:7.2f} of the solve (goal: 1)")


if __name__ == "__main__":
    main()
