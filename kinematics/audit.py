"""The mobility audit: does the mechanism have just the freedom that its inputs set?

Counts (Grübler and Kutzbach) and takes the rank of the exact Jacobian at the design position; what is still
free, or one too many, is named in words. Knows no layout.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.closure import Closure
from knucklepath.kinematics.errors import MechanismError
from knucklepath.kinematics.frames import RATE_FLOOR
from knucklepath.kinematics.mechanism import Ball, CoordinateInput, HingedBody, Mechanism, Rod

Array = NDArray[np.float64]

#: Singular values below this share of the greatest count as zero: columns are scaled to mm per mm.
RANK_SHARE = 1e-7
#: Parts of a null vector below this share of its greatest part count as nothing.
TAKES_PART = 1e-4
#: Distance (mm, per mm of the body's size) within which a point counts as lying on an axis.
ON_AXIS_SHARE = 1e-5
#: Freedoms of each joint between two rigid bodies, for the count by Grübler and Kutzbach.
ROD_FREEDOMS = 6


@dataclass(frozen=True)
class Mobility:
    """What the audit counted.

    by_count : 6(N − 1 − J) + Σf, a rod's idle spin left out; by_rank : freedom found by the rank of the Jacobian;
    inputs : freedoms that the declared inputs set; idle_spins : rods that can spin about themselves.
    """

    by_count: int
    by_rank: int
    inputs: int
    idle_spins: int


def mobility(mechanism: Mechanism) -> Mobility:
    """Count the mechanism's freedom, by count and by rank.

    By count: 6(N − 1 − J) + Σf (Grübler–Kutzbach) with each rod a body between two ball joints; its idle spin
    is then taken off again. By rank: coordinates less the rank of the joint equations.
    """
    closure = Closure(mechanism)
    bodies, joints = len(mechanism.bodies) + len(mechanism.rods) + 1, 0
    freedoms = 0
    for body in mechanism.bodies:
        if body.unknowns == 1:
            joints += 1
            freedoms += 1
    for joint in mechanism.joints:
        joints += 2 if isinstance(joint, Rod) else 1
        freedoms += ROD_FREEDOMS if isinstance(joint, Rod) else 6 - joint.equations
    spins = len(mechanism.rods)
    by_count = 6 * (bodies - 1 - joints) + freedoms - spins
    driven = sum(isinstance(item, CoordinateInput) for item in mechanism.inputs)
    jacobian = _joint_rows(closure)
    by_rank = closure.tree.unknowns + driven - _rank(jacobian) if jacobian.size else closure.tree.columns
    return Mobility(by_count, by_rank, len(mechanism.inputs), spins)


def audit(mechanism: Mechanism) -> Mobility:
    """Check that the inputs set every freedom and that no joint is one too many.

    Raises
    ------
    MechanismError : naming the body that is still free and the motion it has, or the joint that is surplus; or the
        points carry geometry variants.
    """
    if mechanism.is_batched:
        raise MechanismError("the audit takes one geometry at a time, not variants")
    counted = mobility(mechanism)
    closure = Closure(mechanism)
    square = closure.scaled_jacobian(closure.tree.design(1))
    rank = _rank(square) if square.size else 0
    surplus = closure.equations - rank
    free = closure.tree.unknowns - rank
    if free:
        raise _still_free(closure, square, counted, free, surplus)
    if surplus:
        raise _one_too_many(closure, square, counted, surplus)
    return counted


def _joint_rows(closure: Closure) -> Array:
    """Scaled Jacobian of the joints alone, with the columns that inputs set directly."""
    evaluation = closure.evaluate(closure.tree.design(1), {})
    rows = sum(joint.equations for joint in closure.mechanism.joints)
    return np.asarray(evaluation.jacobian[:rows, :, 0] / closure.tree.scale)


def _rank(matrix: Array) -> int:
    values = np.linalg.svd(matrix, compute_uv=False)
    return int((values > RANK_SHARE * values[0]).sum()) if len(values) and values[0] > 0 else 0


def _still_free(closure: Closure, square: Array, counted: Mobility, free: int, surplus: int) -> MechanismError:
    """Build the error for a freedom that no input sets: which body, which motion."""
    alone = _free_alone(closure)
    if alone:
        bodies = list(alone)
        described = [_describe(closure, name, motion) for name, motion in alone.items()]
    else:
        null = np.linalg.svd(square)[2][-free:]
        motion = _simplest(null) / closure.tree.scale[: closure.tree.unknowns]
        bodies = [
            link.name
            for link in closure.tree.links.values()
            if link.column < closure.tree.unknowns and _moves(closure, link.name, motion)
        ]
        described = [_describe(closure, name, motion) for name in bodies]
    count = "a freedom" if free == 1 else f"{free} freedoms"
    text = f"the mechanism keeps {count} that no input sets: {'; '.join(described[:3])}"
    if surplus:
        double = _surplus_joints(closure, square, surplus)
        if double == ["input travel"]:
            text += ". Travel does not move with it: the wheel centre would have to rise"
        else:
            text += f"; {' and '.join(double)} hold one and the same motion"
    return MechanismError(text + ". Add or move a joint so that it is stopped", body=bodies[0] if bodies else None)


def _free_alone(closure: Closure) -> dict[str, Array]:
    """Bodies that the joints let move while every other body stands still, and how (unknowns,)."""
    joints = _joint_rows(closure)[:, : closure.tree.unknowns]
    scale = closure.tree.scale[: closure.tree.unknowns]
    found: dict[str, Array] = {}
    for name, link in closure.tree.links.items():
        if link.column >= closure.tree.unknowns:
            continue
        columns = slice(link.column, link.column + (6 if link.kind == "free" else 1))
        own = joints[:, columns]
        _, values, right = np.linalg.svd(own)
        greatest = max(float(np.abs(joints).max(initial=0.0)), 1e-300)
        rank = int((values > RANK_SHARE * greatest).sum())
        if rank < own.shape[1]:
            motion = np.zeros(closure.tree.unknowns)
            motion[columns] = _simplest(right[rank:])
            found[name] = motion / scale
    return found


def _simplest(null: Array) -> Array:
    """Row-reduce a null-space basis and take the vector with the fewest parts."""
    basis = null.copy()
    rows = len(basis)
    used: list[int] = []
    for row in range(rows):
        rest = np.abs(basis[row])
        rest[used] = 0.0
        column = int(rest.argmax())
        used.append(column)
        basis[row] /= basis[row, column]
        for other in range(rows):
            if other != row:
                basis[other] -= basis[other, column] * basis[row]
    parts = (np.abs(basis) > TAKES_PART * np.abs(basis).max(axis=1, keepdims=True)).sum(axis=1)
    return np.asarray(basis[int(parts.argmin())])


def _twist(closure: Closure, body: str, motion: Array) -> tuple[Array, Array]:
    rates = np.zeros((closure.tree.columns, 1))
    rates[: closure.tree.unknowns, 0] = motion
    frames = closure.tree.frames(closure.tree.design(1))
    angular, velocity = closure.tree.twist(body, frames, rates)
    return angular[:, 0], velocity[:, 0]


def _moves(closure: Closure, body: str, motion: Array) -> bool:
    angular, velocity = _twist(closure, body, motion)
    size = np.abs(motion * closure.tree.scale[: closure.tree.unknowns]).max()
    span = closure.tree.scale.max()
    return bool(np.abs(angular).max() * span > TAKES_PART * size or np.abs(velocity).max() > TAKES_PART * size)


def _describe(closure: Closure, body: str, motion: Array) -> str:
    """Say what a body does: "lower_arm turns about its own ball joints", or about an axis, or slides."""
    angular, velocity = _twist(closure, body, motion)
    rate = float(np.linalg.norm(angular))
    if rate * closure.tree.scale.max() < RATE_FLOOR + TAKES_PART * float(np.linalg.norm(velocity)):
        return f"{body} slides along {_direction(velocity)}"
    held = closure.mechanism.attachments(body)
    own = closure.mechanism.body(body)
    if isinstance(own, HingedBody):
        held = (*own.axis, *held)
    still = []
    for name in held:
        point = closure.tree.points[name][:, 0]
        speed = np.linalg.norm(velocity + np.cross(angular, point))
        if speed < ON_AXIS_SHARE * rate * closure.tree.scale.max():
            still.append(name)
    if len(still) >= 2:
        balls = {joint.at for joint in closure.mechanism.joints if isinstance(joint, Ball)}
        if set(still) <= balls:
            return f"{body} turns about its own ball joints ({' and '.join(still)})"
        return f"{body} turns about the line through {still[0]} and {still[1]}"
    if len(still) == 1:
        return f"{body} turns about {still[0]}, axis along {_direction(angular)}"
    point = np.cross(angular, velocity) / rate**2
    pitch = float(angular @ velocity) / rate**2
    how = "turns" if abs(pitch) < 1e-6 * closure.tree.scale.max() else "screws"
    where = ", ".join(f"{value:.1f}" for value in point)
    return f"{body} {how} about the axis through ({where}) mm along {_direction(angular)}"


def _direction(vector: Array) -> str:
    unit = vector / np.linalg.norm(vector)
    largest = int(np.abs(unit).argmax())
    unit = unit * np.sign(unit[largest])
    if np.abs(np.delete(unit, largest)).max() < 1e-6:
        return "xyz"[largest]
    return "(" + ", ".join(f"{value + 0.0:.3f}" for value in unit) + ")"


def _one_too_many(closure: Closure, square: Array, counted: Mobility, surplus: int) -> MechanismError:
    """Build the error for joints that hold what others hold already; rods are named first, as what can go alone."""
    names = _surplus_joints(closure, square, surplus)
    joints = [joint for joint in closure.mechanism.joints if joint.name in names]
    rods = [joint.name for joint in joints if joint.equations == 1]
    listed = rods or [joint.name for joint in joints] or names
    what = "one joint is too many" if surplus == 1 else f"{surplus} joint equations are too many"
    which = listed[0] if len(listed) == 1 else ", ".join(listed[:-1]) + " or " + listed[-1]
    freedoms = f"{counted.by_count} freedom{'' if counted.by_count == 1 else 's'} by count"
    return MechanismError(
        f"{what}: {which} ({freedoms} for {counted.inputs} input{'' if counted.inputs == 1 else 's'}). "
        "Take one away, or give the mechanism another body to move",
        joint=listed[-1],
    )


def _surplus_joints(closure: Closure, square: Array, surplus: int) -> list[str]:
    """Joints and inputs whose equations take part in a dependency."""
    left = np.linalg.svd(square)[0][:, -surplus:]
    weight = np.abs(left).max(axis=1)
    least = TAKES_PART * weight.max()
    return [name for name, rows in closure.rows.items() if weight[rows].max() > least]
