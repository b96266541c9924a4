"""How fast the motion of a five-link is solved: ratios in one run, against other ways of doing it.

    python tests/benchmarks/bench_closure.py        (needs the extra "bench")

The others: ``scipy.optimize.root`` called pose by pose from the neighbouring pose, with and without the exact Jacobian,
its residual once written as one writes it (numpy and scipy's own rotations) and once tuned by hand; and the same Newton
iteration compiled per pose with numba, from the neighbouring pose, for poses alone and for poses and rates. All solve
the same 61 × 41 poses to a residual of 1e-9 mm, and ours finds the rates as well. Each ratio is the median of ratios of
neighbouring measurements, so that a busy machine slows both sides.
"""

from __future__ import annotations

import math
import statistics
import time
from collections.abc import Callable

import numpy as np
from numba import njit
from scipy.optimize import root
from scipy.spatial.transform import Rotation

from knucklepath.kinematics.corner import corner_readings
from knucklepath.kinematics.motion import solve_motion
from knucklepath.kinematics.wheel import Corner, Wheel
from knucklepath.plugins.layouts.five_link import LAYOUT

TRAVEL, RACK = np.linspace(-60.0, 60.0, 61), np.linspace(-30.0, 30.0, 41)
RESIDUAL = 1e-9
#: The loosest tolerance on scipy's unknowns that keeps every residual within 1e-9 mm.
XTOL = 1e-10
LINKS = ("upper_front", "upper_rear", "lower_front", "lower_rear", "toe_link")
HUB = np.array(LAYOUT.example["wheel.centre"])
INBOARD = np.array([LAYOUT.example[f"{link}.inboard"] for link in LINKS])
OUTBOARD = np.array([LAYOUT.example[f"{link}.outboard"] for link in LINKS])
ARMS = OUTBOARD - HUB
LENGTHS = np.linalg.norm(OUTBOARD - INBOARD, axis=1)
SQUARED, TWICE = LENGTHS**2, 2.0 * LENGTHS


@njit
def turn_by(vector, turn):  # type: ignore[no-untyped-def]
    """Turn a rotation by a small rotation vector on the left, in place."""
    x, y, z = vector[0, 0], vector[1, 0], vector[2, 0]
    squared = x * x + y * y + z * z
    if squared < 1e-8:
        first, second = 1.0 - squared / 6.0, 0.5 - squared / 24.0
    else:
        angle = np.sqrt(squared)
        first, second = np.sin(angle) / angle, (1.0 - np.cos(angle)) / squared
    rest = 1.0 - second * squared
    xx, xy, xz = rest + second * x * x, second * x * y - first * z, second * x * z + first * y
    yx, yy, yz = second * x * y + first * z, rest + second * y * y, second * y * z - first * x
    zx, zy, zz = second * x * z - first * y, second * y * z + first * x, rest + second * z * z
    for j in range(3):
        p, q, r = turn[0, j], turn[1, j], turn[2, j]
        turn[0, j] = xx * p + xy * q + xz * r
        turn[1, j] = yx * p + yy * q + yz * r
        turn[2, j] = zx * p + zy * q + zz * r


@njit
def equations(turn, place, travel, rack, arms, inboard, lengths, hub_z, right, jacobian):  # type: ignore[no-untyped-def]
    """The kernel's equations for this layout: five rods and the wheel centre's height; ``right`` is −residual."""
    worst = 0.0
    for k in range(5):
        ax = turn[0, 0] * arms[k, 0] + turn[0, 1] * arms[k, 1] + turn[0, 2] * arms[k, 2]
        ay = turn[1, 0] * arms[k, 0] + turn[1, 1] * arms[k, 1] + turn[1, 2] * arms[k, 2]
        az = turn[2, 0] * arms[k, 0] + turn[2, 1] * arms[k, 1] + turn[2, 2] * arms[k, 2]
        dx = place[0] + ax - inboard[k, 0]
        dy = place[1] + ay - inboard[k, 1]
        dz = place[2] + az - inboard[k, 2]
        if k == 4:
            dy -= rack
        length = lengths[k]
        open_by = (dx * dx + dy * dy + dz * dz - length * length) / (2.0 * length)
        right[k, 0] = -open_by
        worst = max(worst, abs(open_by))
        dx, dy, dz = dx / length, dy / length, dz / length
        jacobian[k, 0], jacobian[k, 1], jacobian[k, 2] = ay * dz - az * dy, az * dx - ax * dz, ax * dy - ay * dx
        jacobian[k, 3], jacobian[k, 4], jacobian[k, 5] = dx, dy, dz
    too_high = place[2] - hub_z - travel
    right[5, 0] = -too_high
    for i in range(5):
        jacobian[5, i] = 0.0
    jacobian[5, 5] = 1.0
    return max(worst, abs(too_high))


@njit
def eliminate(matrix, right):  # type: ignore[no-untyped-def]
    """Gaussian elimination with partial pivoting, 6 × 6 with any number of right sides, in place."""
    sides = right.shape[1]
    for k in range(6):
        pivot = k
        for i in range(k + 1, 6):
            if abs(matrix[i, k]) > abs(matrix[pivot, k]):
                pivot = i
        if pivot != k:
            for j in range(k, 6):
                matrix[k, j], matrix[pivot, j] = matrix[pivot, j], matrix[k, j]
            for j in range(sides):
                right[k, j], right[pivot, j] = right[pivot, j], right[k, j]
        for i in range(k + 1, 6):
            factor = matrix[i, k] / matrix[k, k]
            for j in range(k + 1, 6):
                matrix[i, j] -= factor * matrix[k, j]
            for j in range(sides):
                right[i, j] -= factor * right[k, j]
    for i in range(5, -1, -1):
        for side in range(sides):
            value = right[i, side]
            for j in range(i + 1, 6):
                value -= matrix[i, j] * right[j, side]
            right[i, side] = value / matrix[i, i]


@njit
def newton_per_pose(travels, racks, arms, inboard, lengths, hub, places, turns, rates):  # type: ignore[no-untyped-def]
    """Newton from the neighbouring pose; ``rates`` is filled unless it is empty."""
    right, jacobian, two = np.empty((6, 1)), np.empty((6, 6)), np.empty((6, 2))
    turn, place = np.empty((3, 3)), np.empty(3)
    row_turn, row_place = np.eye(3), hub.copy()
    worst_of_all = 0.0
    for i in range(len(travels)):
        turn[:], place[:] = row_turn, row_place
        for j in range(len(racks)):
            worst = 1.0
            for _ in range(12):
                worst = equations(turn, place, travels[i], racks[j], arms, inboard, lengths, hub[2], right, jacobian)
                if worst <= 1e-10:
                    break
                eliminate(jacobian, right)
                turn_by(right, turn)
                for k in range(3):
                    place[k] += right[3 + k, 0]
            worst_of_all = max(worst_of_all, worst)
            if j == 0:
                row_turn[:], row_place[:] = turn, place
            turns[i, j], places[i, j] = turn, place
            if rates.size:
                # the toe link's inboard end moves along y with the rack: −∂residual/∂rack is its direction's y
                two[:] = 0.0
                two[5, 0], two[4, 1] = 1.0, jacobian[4, 4]
                eliminate(jacobian, two)
                rates[i, j] = two
    return worst_of_all


def compiled_grid(with_rates: bool) -> tuple[np.ndarray, np.ndarray]:
    shape = (len(TRAVEL), len(RACK))
    places, turns = np.empty((*shape, 3)), np.empty((*shape, 3, 3))
    rates = np.empty((*shape, 6, 2) if with_rates else (0, 0, 6, 2))
    worst = newton_per_pose(TRAVEL, RACK, ARMS, INBOARD, LENGTHS, HUB, places, turns, rates)
    assert worst <= RESIDUAL
    return places, rates


def written_turn(vector: np.ndarray) -> np.ndarray:
    return Rotation.from_rotvec(vector).as_matrix()


def written(turn: np.ndarray, place: np.ndarray, travel: float, rack: float, with_jacobian: bool) -> object:
    """The same equations in numpy, as one writes them for scipy."""
    arms = ARMS @ turn.T
    apart = place + arms - INBOARD
    apart[4, 1] -= rack
    residual = np.append(((apart * apart).sum(axis=1) - SQUARED) / TWICE, place[2] - HUB[2] - travel)
    if not with_jacobian:
        return residual
    along = apart / LENGTHS[:, None]
    jacobian = np.zeros((6, 6))
    jacobian[:5, :3], jacobian[:5, 3:], jacobian[5, 5] = np.cross(arms, along), along, 1.0
    return residual, jacobian


def tuned_turn(vector: np.ndarray) -> np.ndarray:
    x, y, z = vector.tolist()
    squared = x * x + y * y + z * z
    if squared < 1e-8:
        first, second = 1.0 - squared / 6.0, 0.5 - squared / 24.0
    else:
        angle = math.sqrt(squared)
        first, second = math.sin(angle) / angle, (1.0 - math.cos(angle)) / squared
    rest = 1.0 - second * squared
    return np.array(
        (
            (rest + second * x * x, second * x * y - first * z, second * x * z + first * y),
            (second * x * y + first * z, rest + second * y * y, second * y * z - first * x),
            (second * x * z - first * y, second * y * z + first * x, rest + second * z * z),
        )
    )


def tuned(turn: np.ndarray, place: np.ndarray, travel: float, rack: float, with_jacobian: bool) -> object:
    """The same again, with every numpy call that can be saved saved."""
    arms = ARMS @ turn.T
    apart = place + arms - INBOARD
    apart[4, 1] -= rack
    residual = np.empty(6)
    residual[:5] = ((apart * apart).sum(axis=1) - SQUARED) / TWICE
    residual[5] = place[2] - HUB[2] - travel
    if not with_jacobian:
        return residual
    along = apart / LENGTHS[:, None]
    jacobian = np.zeros((6, 6))
    jacobian[:5, 0] = arms[:, 1] * along[:, 2] - arms[:, 2] * along[:, 1]
    jacobian[:5, 1] = arms[:, 2] * along[:, 0] - arms[:, 0] * along[:, 2]
    jacobian[:5, 2] = arms[:, 0] * along[:, 1] - arms[:, 1] * along[:, 0]
    jacobian[:5, 3:], jacobian[5, 5] = along, 1.0
    return residual, jacobian


def scipy_grid(by_hand: bool, with_jacobian: bool) -> np.ndarray:
    function, turn_of = (tuned, tuned_turn) if by_hand else (written, written_turn)
    places, turns = np.empty((len(TRAVEL), len(RACK), 3)), np.empty((len(TRAVEL), len(RACK), 3, 3))
    row_turn, row_place = np.eye(3), HUB
    for i, travel in enumerate(TRAVEL):
        turn, place = row_turn, row_place
        for j, rack in enumerate(RACK):

            def moved(step, turn=turn, place=place, travel=travel, rack=rack):  # type: ignore[no-untyped-def]
                return function(turn_of(step[:3]) @ turn, place + step[3:], travel, rack, with_jacobian)

            step = root(moved, np.zeros(6), jac=with_jacobian, method="hybr", options={"xtol": XTOL}).x
            turn, place = turn_of(step[:3]) @ turn, place + step[3:]
            turns[i, j], places[i, j] = turn, place
            if j == 0:
                row_turn, row_place = turn, place
    ends = np.einsum("...ij,kj->...ki", turns, ARMS) + places[..., None, :]
    ends[..., 4, 1] -= RACK
    assert np.abs(np.linalg.norm(ends - INBOARD, axis=-1) - LENGTHS).max() <= RESIDUAL
    return places


def seconds(function: Callable[[], object]) -> float:
    start = time.perf_counter()
    function()
    return time.perf_counter() - start


def paired(other: Callable[[], object], ours: Callable[[], object], repeats: int) -> tuple[float, float]:
    """Median time of ``other``, and the median of its ratio to ours measured just before and after."""
    other()
    times, ratios = [], []
    for _ in range(repeats):
        before, between, after = seconds(ours), seconds(other), seconds(ours)
        times.append(between)
        ratios.append(between / (0.5 * (before + after)))
    return statistics.median(times), statistics.median(ratios)


def main() -> None:
    corner = Corner(LAYOUT.mechanism(LAYOUT.example), Wheel(HUB, 300.0))

    def ours() -> object:
        return solve_motion(corner, TRAVEL[:, None], RACK[None])

    motion = solve_motion(corner, TRAVEL[:, None], RACK[None])
    assert motion.reached.all()
    assert motion.residual_mm.max() <= RESIDUAL
    expected = motion.point("knuckle", HUB)
    places, rates = compiled_grid(True)
    np.testing.assert_allclose(places, expected, atol=1e-7)
    np.testing.assert_allclose(rates[..., 3:, 1], motion.velocity("knuckle", HUB, "rack"), atol=1e-7)
    np.testing.assert_allclose(scipy_grid(True, False), expected, atol=1e-7)
    kept = {key: value for key, value in motion.__dict__.items() if key in ("corner", "solution")}

    def readings() -> object:
        motion.__dict__.clear()
        motion.__dict__.update(kept)
        return corner_readings(motion)

    poses = expected[..., 0].size
    solve = statistics.median(seconds(ours) for _ in range(31))
    print(f"five-link, {poses} poses; medians of one run")
    print(f"  ours, poses and rates                  {solve * 1e3:8.2f} ms   {solve / poses * 1e6:6.2f} µs a pose")
    print("  scipy root, pose by pose:                             ours is faster by (goal: 150)")
    for by_hand, how in ((False, "as written"), (True, "tuned by hand")):
        for with_jacobian, what in ((True, "exact Jacobian"), (False, "differences")):
            value, ratio = paired(lambda h=by_hand, j=with_jacobian: scipy_grid(h, j), ours, 3)  # type: ignore[misc]
            print(f"    {how + ', ' + what:36} {value * 1e3:8.1f} ms   {ratio:6.0f}")
    print("  Newton compiled per pose:                             ours takes of it (goal: 2.5)")
    for with_rates, what in ((False, "poses alone"), (True, "poses and rates")):
        value, ratio = paired(lambda r=with_rates: compiled_grid(r), ours, 41)  # type: ignore[misc]
        print(f"    {what:36} {value * 1e3:8.2f} ms   {1.0 / ratio:6.2f}")
    value, ratio = paired(readings, ours, 41)
    print(f"  all readings of the grid               {value * 1e3:8.2f} ms   {ratio:6.2f} of the solve (goal: 1)")


if __name__ == "__main__":
    main()
