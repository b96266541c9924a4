"""A semi-trailing arm against its closed form.

The pivot axis is level and swept by θ in plan; the arm turns by φ from zero camber and toe. Turning the spin axis
(0, 1, 0) about (sin θ, cos θ, 0) by Rodrigues' formula gives

    |camber| = asin(sin θ sin φ),   tan |toe| = sin θ cos θ (1 − cos φ) / (cos²θ + sin²θ cos φ).

Source: derived from the rotation matrix (closed form); that the sweep lies between 10° and 25°, and that such an arm
leans the wheel's top inboard and toes in as it rises, is common practice.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from knucklepath.kinematics.audit import audit
from knucklepath.kinematics.corner import corner_readings
from knucklepath.kinematics.mechanism import Fixed, FreeBody, Hinge, PointInput
from knucklepath.kinematics.motion import Motion, solve_motion
from knucklepath.kinematics.wheel import Corner, Wheel
from knucklepath.plugins.layouts import semi_trailing_arm

CENTRE = np.array([-40.0, 720.0, 310.0])


def arm_turned(sweep: float, turn: np.ndarray, built: str = "hinged body") -> Motion:
    """A corner with an arm swept by ``sweep`` (rad), at the travel that turns the arm by ``turn`` (rad).

    The wheel centre stands level with the axis, so it rises by its distance from the axis times sin φ. ``built`` tells
    how: the layout's "hinged body", a free body on a "hinge joint", or a free body "fixed" to the arm.
    """
    along = np.array([np.sin(sweep), np.cos(sweep), 0.0])
    pivot = np.array([350.0, 180.0, 310.0])
    points = {"arm.inner_pivot": pivot, "arm.outer_pivot": pivot + 370.0 * along, "wheel.centre": CENTRE}
    distance = np.linalg.norm(np.cross(along, CENTRE - pivot))
    mechanism, carrier = semi_trailing_arm.LAYOUT.mechanism(points), "arm"
    if built != "hinged body":
        carrier = "hub"
        joint = Hinge("pivots", "hub", "chassis", ("arm.inner_pivot", "arm.outer_pivot"))
        mechanism = replace(
            mechanism,
            bodies=(FreeBody("hub"),) if built == "hinge joint" else (*mechanism.bodies, FreeBody("hub")),
            joints=(joint,) if built == "hinge joint" else (Fixed("weld", "hub", "arm", "arm.outer_pivot"),),
            inputs=(PointInput("travel", "hub", "wheel.centre"),),
        )
    audit(mechanism)
    corner = Corner(mechanism, Wheel(CENTRE, loaded_radius=300.0), carrier=carrier, axle="rear")
    return solve_motion(corner, distance * np.sin(turn))


@pytest.mark.parametrize(
    ("sweep", "turn", "camber", "toe"),
    [
        (15.0, 10.0, 2.5759380, 0.2178335),
        (15.0, 30.0, 7.4354722, 1.9356866),
        (12.0, 10.0, 2.0690270, 0.1771381),
        (12.0, 30.0, 5.9670117, 1.5697922),
    ],
)
def test_the_wheel_leans_and_toes_as_the_closed_form_says(sweep: float, turn: float, camber: float, toe: float) -> None:
    motion = arm_turned(np.radians(sweep), np.radians([turn, -turn]))
    assert motion.reached.all()
    readings = corner_readings(motion)
    np.testing.assert_allclose(readings["camber_deg"], [-camber, camber], rtol=0.0, atol=0.501e-7)
    np.testing.assert_allclose(readings["toe_deg"], [toe, toe], rtol=0.0, atol=0.501e-7)


@pytest.mark.parametrize("built", ["hinged body", "hinge joint", "fixed"])
@pytest.mark.parametrize("sweep", np.radians([10.0, 18.0, 25.0]))
def test_the_closed_form_holds_over_the_whole_swing(sweep: float, built: str) -> None:
    turn = np.radians(np.linspace(-60.0, 60.0, 121))
    readings = corner_readings(arm_turned(sweep, turn, built))
    camber = -np.degrees(np.arcsin(np.sin(sweep) * np.sin(turn)))
    toe = np.degrees(
        np.arctan2(
            np.sin(sweep) * np.cos(sweep) * (1.0 - np.cos(turn)),
            np.cos(sweep) ** 2 + np.sin(sweep) ** 2 * np.cos(turn),
        )
    )
    np.testing.assert_allclose(readings["camber_deg"], camber, rtol=0.0, atol=1e-10)
    np.testing.assert_allclose(readings["toe_deg"], toe, rtol=0.0, atol=1e-10)


def test_the_instant_axis_is_the_pivot_axis_at_every_pose() -> None:
    motion = arm_turned(np.radians(15.0), np.radians([-40.0, -5.0, 0.0, 5.0, 40.0]))
    inner, outer = (motion.corner.point(f"arm.{end}_pivot") for end in ("inner", "outer"))
    along = (outer - inner) / np.linalg.norm(outer - inner)
    screw = motion.screw()
    np.testing.assert_allclose(np.cross(screw.direction, along), 0.0, atol=1e-12)
    np.testing.assert_allclose(np.cross(screw.point - inner, along), 0.0, atol=1e-9)
    np.testing.assert_allclose(screw.pitch_mm_per_rad, 0.0, atol=1e-9)
