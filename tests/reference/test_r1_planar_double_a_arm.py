"""A planar double A-arm, published, against the three-dimensional layout extruded from it.

Source: P. E. Nikravesh, Planar Multibody Dynamics, 2nd ed., CRC Press 2018, model "AA": the inputs and the pose
are published (the printed page was not seen). Instant centre and rate at that pose are computed from the
published inputs by two independent planar solvers.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from knucklepath.kinematics.corner import corner_readings, front_instant_centre
from knucklepath.kinematics.motion import Motion
from knucklepath.kinematics.wheel import Corner

Planar = tuple[Corner, dict[str, float]]
AtTurn = Callable[[Corner, str, float], Motion]

#: The published figures carry four decimals (m and rad).
PRINTED = 1e-4
LOWER_ARM_ANGLE = -0.0367


@pytest.fixture
def published_pose(planar_double_a_arm: Planar, at_turn: AtTurn) -> Motion:
    corner, angles = planar_double_a_arm
    return at_turn(corner, "lower_arm", LOWER_ARM_ANGLE - angles["lower_arm"])


@pytest.mark.parametrize(
    ("body", "y", "z", "angle"),
    [
        ("lower_arm", 0.4398, 0.2512, -0.0367),
        ("knuckle", 0.6817, 0.3498, 0.0783),
        ("upper_arm", 0.4463, 0.4308, 6.5222 - 2.0 * np.pi),
    ],
)
def test_every_body_stands_in_its_published_pose(
    planar_double_a_arm: Planar,
    published_pose: Motion,
    turn_about_x: Callable[[Motion, str], np.ndarray],
    body: str,
    y: float,
    z: float,
    angle: float,
) -> None:
    corner, angles = planar_double_a_arm
    points = corner.mechanism.points
    # published poses are of the bodies' own origins: on the arms, between pivot and ball joint
    origin = {
        "lower_arm": points["lower_arm.ball_joint"] * (0.24 / 0.42)
        + points["lower_arm.front_pivot"] * np.array([0.0, 0.18 / 0.42, 0.18 / 0.42]),
        "upper_arm": 0.5
        * (points["upper_arm.front_pivot"] * np.array([0.0, 1.0, 1.0]) + points["upper_arm.ball_joint"]),
        "knuckle": corner.wheel.centre,
    }[body]
    np.testing.assert_allclose(published_pose.point(body, origin) / 1000.0, [0.0, y, z], atol=PRINTED)
    assert angles[body] + turn_about_x(published_pose, body) == pytest.approx(angle, abs=PRINTED)


def test_the_knuckle_turns_about_the_computed_instant_centre(published_pose: Motion) -> None:
    centre = front_instant_centre(published_pose) / 1000.0
    np.testing.assert_allclose(centre[1:], [-0.194898, 0.274499], atol=1e-6)
    screw = published_pose.screw()
    np.testing.assert_allclose(np.abs(screw.direction), [1.0, 0.0, 0.0], atol=1e-12)
    np.testing.assert_allclose(screw.point[1:] / 1000.0, centre[1:], atol=1e-12)
    assert screw.pitch_mm_per_rad == pytest.approx(0.0, abs=1e-9)


def test_the_knuckle_turns_per_rise_by_one_over_the_swing_arm(published_pose: Motion) -> None:
    rate = published_pose.twist("knuckle")[0] * 1000.0
    assert rate == pytest.approx(1.1407968, abs=1e-7)
    centre, wheel = (
        front_instant_centre(published_pose),
        published_pose.point("wheel", published_pose.corner.wheel.centre),
    )
    assert rate == pytest.approx(1000.0 / (wheel[1] - centre[1]), rel=1e-12)


def test_the_readings_of_a_planar_corner_stay_in_the_plane(published_pose: Motion) -> None:
    readings = corner_readings(published_pose)
    for column in ("toe_deg", "caster_deg", "wheelbase_change_mm", "contact_x_mm"):
        assert readings[column] == pytest.approx(0.0, abs=1e-10), column
