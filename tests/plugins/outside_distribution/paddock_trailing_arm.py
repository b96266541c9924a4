"""A plain trailing arm held sideways by a lateral rod, as an outsider would add it. All numbers are invented."""

import numpy as np

from knucklepath.kinematics.corner import Reading
from knucklepath.kinematics.mechanism import Ball, FreeBody, HingedBody, Layout, Rod
from knucklepath.plugins import hookimpl
from knucklepath.plugins.overlays.glyphs import Line, Overlay

LAYOUT = Layout(
    id="trailing-arm",
    title="Trailing arm with lateral rods",
    description="A trailing arm ends in a ball joint at the knuckle; three rods hold the rest.",
    points={
        "arm": {
            "inner_pivot": "inner pivot on the chassis",
            "outer_pivot": "outer pivot on the chassis",
            "ball_joint": "ball joint at the knuckle",
        },
        "upper_rod": {"inboard": "end at the chassis", "outboard": "end at the knuckle"},
        "lower_rod": {"inboard": "end at the chassis", "outboard": "end at the knuckle"},
        "brake_rod": {"arm_end": "end at the trailing arm", "knuckle_end": "end at the knuckle"},
    },
    bodies=(HingedBody("arm", ("arm.inner_pivot", "arm.outer_pivot")), FreeBody("knuckle")),
    joints=(
        Ball("arm ball joint", "arm", "knuckle", "arm.ball_joint"),
        Rod("upper_rod", "chassis", "upper_rod.inboard", "knuckle", "upper_rod.outboard"),
        Rod("lower_rod", "chassis", "lower_rod.inboard", "knuckle", "lower_rod.outboard"),
        Rod("brake_rod", "arm", "brake_rod.arm_end", "knuckle", "brake_rod.knuckle_end"),
    ),
    example={
        "arm.inner_pivot": (430.0, 470.0, 290.0),
        "arm.outer_pivot": (430.0, 590.0, 290.0),
        "arm.ball_joint": (30.0, 640.0, 265.0),
        "upper_rod.inboard": (-60.0, 300.0, 390.0),
        "upper_rod.outboard": (-50.0, 650.0, 400.0),
        "lower_rod.inboard": (-60.0, 280.0, 190.0),
        "lower_rod.outboard": (-50.0, 660.0, 180.0),
        "brake_rod.arm_end": (240.0, 600.0, 320.0),
        "brake_rod.knuckle_end": (10.0, 640.0, 380.0),
        "wheel.centre": (0.0, 720.0, 290.0),
    },
)


def _arm_angle(motion):
    """Turn of the arm about its pivots, deg."""
    rotation = motion.rotation("arm")
    return np.degrees(np.arccos(np.clip((np.trace(rotation, axis1=-2, axis2=-1) - 1.0) / 2.0, -1.0, 1.0)))


def _pivot_line(state):
    """The arm's pivot axis, drawn out to the car's middle."""
    points = state.pose.corner.mechanism.points
    inner, outer = points["arm.inner_pivot"], points["arm.outer_pivot"]
    return [Line(np.stack((inner - (outer - inner) * 2.0, outer)), role="instant-axis")]


@hookimpl
def knucklepath_layouts():
    return [LAYOUT]


@hookimpl
def knucklepath_readings():
    def has_arm(corner):
        return "arm" in corner.mechanism.body_names and "brake_rod" in corner.mechanism.body_names

    return [Reading("arm_angle", "arm_angle_deg", "deg", "Arm angle", _arm_angle, has_arm)]


@hookimpl
def knucklepath_overlays():
    return [Overlay(id="arm-pivot-line", title="Arm pivot line", draw=_pivot_line)]
