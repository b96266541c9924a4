"""A planar strut, published, against the three-dimensional layout extruded from it.

Source: P. E. Nikravesh, Planar Multibody Dynamics, 2nd ed., CRC Press 2018, model "MP_A": the inputs and the
pose are published (the printed page was not seen). Instant centre and rate at that pose are computed from the
published inputs by two independent planar solvers.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from knucklepath.kinematics.corner import front_instant_centre
from knucklepath.kinematics.motion import Motion
from knucklepath.kinematics.wheel import Corner

Planar = tuple[Corner, dict[str, float]]
AtTurn = Callable[[Corner, str, float], Motion]


@pytest.fixture
def published_pose(planar_strut: Planar, at_turn: AtTurn) -> Motion:
    """The pose at which the arm is level."""
    corner, angles = planar_strut
    return at_turn(corner, "lower_arm", -angles["lower_arm"])


def test_the_knuckle_stands_in_its_published_pose(
    planar_strut: Planar, published_pose: Motion, turn_about_x: Callable[[Motion, str], np.ndarray]
) -> None:
    corner, angles = planar_strut
    centre = published_pose.point("knuckle", corner.wheel.centre) / 1000.0
    # Four decimals are printed. Exact closure of the printed inputs gives 6.0821 rad, so the printed angle, the
    # end of a numerical assembly, is right to two in its last digit only.
    np.testing.assert_allclose(centre, [0.0, 0.5840, 0.3586], rtol=0.0, atol=0.51e-4)
    angle = angles["knuckle"] + turn_about_x(published_pose, "knuckle")
    assert angle == pytest.approx(6.0819 - 2 * np.pi, abs=2.5e-4)


def test_the_top_mount_stays_on_the_slide_axis_of_the_knuckle(planar_strut: Planar, published_pose: Motion) -> None:
    corner, _ = planar_strut
    top, lower = (corner.point(name) for name in ("strut.top_mount", "strut.axis_lower"))
    rotation, now = published_pose.rotation("knuckle"), published_pose.point("knuckle", lower)
    axis = rotation @ (top - lower) / np.linalg.norm(top - lower)
    np.testing.assert_allclose(np.cross(axis, top - now), 0.0, atol=1e-9)


def test_the_knuckle_turns_about_the_computed_instant_centre(published_pose: Motion) -> None:
    centre = front_instant_centre(published_pose) / 1000.0
    np.testing.assert_allclose(centre[1:], [-1.403019, 0.29], atol=1e-6)


def test_the_knuckle_turns_per_rise_by_one_over_the_swing_arm(published_pose: Motion) -> None:
    rate = published_pose.twist("knuckle")[0] * 1000.0
    assert rate == pytest.approx(0.5032715, abs=1e-7)
    centre, wheel = (
        front_instant_centre(published_pose),
        published_pose.point("wheel", published_pose.corner.wheel.centre),
    )
    assert rate == pytest.approx(1000.0 / (wheel[1] - centre[1]), rel=1e-12)
