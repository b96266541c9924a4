"""Six distances between two bodies in general position: the closure solver's hardest spatial test.

Source: P. Dietmaier, "The Stewart-Gough platform of general geometry can have 40 real postures", Advances in Robot
Kinematics, 1998 (title from memory): base, body and leg lengths are published, and that exactly 40 real poses close.
That the 40 poses lie on two closed circuits of 34 and 6 when the last leg is taken away is computed.
"""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.optimize import least_squares
from scipy.spatial.transform import Rotation

from knucklepath.kinematics.audit import mobility
from knucklepath.kinematics.closure import Closure
from knucklepath.kinematics.errors import MechanismError
from knucklepath.kinematics.following import trace_curve
from knucklepath.kinematics.mechanism import FreeBody, Mechanism, Rod
from knucklepath.kinematics.tree import State

Array = NDArray[np.float64]

BASE = np.array(
    [
        (0.0, 0.0, 0.0),
        (1.107915, 0.0, 0.0),
        (0.549094, 0.756063, 0.0),
        (0.735077, -0.223935, 0.525991),
        (0.514188, -0.526063, -0.368418),
        (0.590473, 0.094733, -0.205018),
    ]
)
BODY = np.array(
    [
        (0.0, 0.0, 0.0),
        (0.542805, 0.0, 0.0),
        (0.956919, -0.528915, 0.0),
        (0.665885, -0.353482, 1.402538),
        (0.478359, 1.158742, 0.107672),
        (-0.137087, -0.235121, 0.353913),
    ]
)
LENGTHS = np.array([1.0, 0.645275, 1.086284, 1.503439, 1.281933, 0.771071])
POSES = 40
STARTS = 100_000
#: Two solved poses differ by far more than this in some coordinate, two ends of one iteration by far less.
DISTINCT = 1e-4
#: Arclength step along a circuit: a tenth of what separates the two nearest poses.
STEP = 0.01


@cache
def assembled() -> tuple[Array, Array]:
    """Rotation (3, 3) and place (3,) of one assembled pose, by a general least-squares solver from a rough guess."""

    def gaps(x: Array) -> Array:
        return np.linalg.norm(Rotation.from_rotvec(x[:3]).apply(BODY) + x[3:] - BASE, axis=1) - LENGTHS

    found = least_squares(gaps, [0.6, 1.8, -1.8, 1.0, 0.0, 0.0], xtol=1e-15, ftol=1e-15, gtol=1e-15)
    assert np.abs(found.fun).max() < 1e-14
    return Rotation.from_rotvec(found.x[:3]).as_matrix(), found.x[3:]


def platform(legs: int = 6) -> Mechanism:
    """A free body on rods; the design position is the assembled pose, in the published unit of length."""
    rotation, place = assembled()
    points = {f"base.{i}": BASE[i] for i in range(legs)}
    points |= {f"body.{i}": rotation @ BODY[i] + place for i in range(legs)}
    rods = tuple(Rod(f"leg {i + 1}", "chassis", f"base.{i}", "platform", f"body.{i}") for i in range(legs))
    return Mechanism((FreeBody("platform"),), rods, (), points)


def placed(closure: Closure, state: State) -> tuple[Array, Array]:
    """Rotation (B, 3, 3) and place (B, 3) of the body's own published frame."""
    frame = closure.tree.frames(state)["platform"]
    rotation, place = assembled()
    origin = frame.locate(place[:, None]).T
    assert frame.rotation is not None
    return np.moveaxis(frame.rotation, -1, 0) @ rotation, origin


def leg_lengths(rotation: Array, place: Array) -> Array:
    """(B, 6), straight from the published points."""
    return np.linalg.norm(np.einsum("bij,lj->bli", rotation, BODY) + place[:, None] - BASE, axis=-1)


def coordinates(rotation: Array, place: Array) -> Array:
    return np.concatenate((rotation.reshape(len(rotation), 9), place), axis=1)


@cache
def multistart() -> tuple[State, NDArray[np.intp]]:
    """The distinct poses that Newton's method finds from random starts, and how often each was found."""
    closure = Closure(platform())
    random = np.random.default_rng(1998)
    start = closure.tree.design(STARTS)
    turns = np.moveaxis(Rotation.random(STARTS, random).as_matrix(), 0, -1)[None]
    places = random.uniform(-1.5, 2.0, (1, 3, STARTS))
    ended = closure.correct(State(turns, places, start.scalars), {}, most_steps=60)
    found = ended.state.take(ended.converged)
    rows = coordinates(*placed(closure, found))
    distinct: list[int] = []
    belongs = np.full(len(rows), -1)
    while (belongs < 0).any():
        first = int(np.flatnonzero(belongs < 0)[0])
        belongs[np.abs(rows - rows[first]).max(axis=1) < DISTINCT] = len(distinct)
        distinct.append(first)
    return found.take(np.array(distinct)), np.bincount(belongs)


def test_newton_finds_exactly_the_forty_published_poses() -> None:
    poses, times = multistart()
    assert poses.count == POSES
    # no pose was found by a lucky chance, so that a forty-first is not to be expected
    assert times.min() >= 10


def test_every_pose_keeps_the_published_lengths() -> None:
    closure = Closure(platform())
    rotation, place = placed(closure, multistart()[0])
    np.testing.assert_allclose(leg_lengths(rotation, place), np.broadcast_to(LENGTHS, (POSES, 6)), rtol=0.0, atol=1e-10)
    np.testing.assert_allclose(
        rotation @ np.swapaxes(rotation, 1, 2), np.broadcast_to(np.eye(3), rotation.shape), atol=1e-12
    )


def test_the_forty_poses_are_distinct_by_far_more_than_their_residual() -> None:
    rows = coordinates(*placed(Closure(platform()), multistart()[0]))
    apart = np.abs(rows[:, None] - rows).max(axis=-1)[~np.eye(POSES, dtype=bool)]
    assert apart.min() > 10 * STEP


def test_the_pose_computed_elsewhere_is_among_them() -> None:
    # computed from the published data with a general-purpose least-squares solver; eight digits
    rotation = Rotation.from_quat([0.22113338, 0.6772235, -0.65232149, 0.25873738]).as_matrix()
    sample = np.append(rotation.reshape(9), [0.9989012, -0.04156432, -0.02165171])
    rows = coordinates(*placed(Closure(platform()), multistart()[0]))
    assert np.abs(rows - sample).max(axis=1).min() < 1e-7


def test_six_legs_leave_no_freedom_and_five_leave_one() -> None:
    six, five = mobility(platform()), mobility(platform(5))
    assert (six.by_count, six.by_rank) == (0, 0)
    assert (five.by_count, five.by_rank) == (1, 1)


def circuit(start: int) -> tuple[frozenset[int], float]:
    """Follow the curve of five legs from one of the poses: which poses close the sixth leg on it, and its length."""
    poses, _ = multistart()
    six, five = Closure(platform()), Closure(platform(5))
    curve, arclength, closed = trace_curve(platform(5), carried(poses.take(np.array([start])), six, five), STEP)
    assert closed
    sixth = leg_lengths(*placed(five, curve))[:, 5] - LENGTHS[5]
    # the start itself is a zero, whose sign is rounding: its crossing is between the last point and the second
    crossings = np.flatnonzero(np.sign(sixth[1:]) != np.sign(np.roll(sixth[1:], -1))) + 1
    ended = six.correct(carried(curve.take(crossings), five, six), {})
    assert ended.converged.all()
    rows = coordinates(*placed(six, poses))
    met = [int(np.abs(rows - row).max(axis=1).argmin()) for row in coordinates(*placed(six, ended.state))]
    assert len(met) == len(set(met)), "one pose was met twice: the step is too long"
    return frozenset(met), float(arclength[-1])


def carried(state: State, given: Closure, wanted: Closure) -> State:
    """The same poses in the coordinates of another platform, whose body has another reference point."""
    reference = wanted.tree.links["platform"].reference
    return State(state.turns, given.tree.frames(state)["platform"].locate(reference)[None], state.scalars)


def test_without_its_last_leg_the_platform_runs_on_two_circuits_of_34_and_6_poses() -> None:
    first, _ = circuit(0)
    rest = sorted(set(range(POSES)) - first)
    second, _ = circuit(rest[0])
    assert sorted((len(first), len(second))) == [6, 34]
    assert first | second == set(range(POSES))


def test_a_curve_is_not_traced_from_a_pose_with_open_joints() -> None:
    poses, _ = multistart()
    # the coordinates of the six-legged platform mean another pose of the five-legged one
    with pytest.raises(MechanismError, match="solved pose"):
        trace_curve(platform(5), poses.take(np.array([0])), STEP)
