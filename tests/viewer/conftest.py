"""A project that uses every key of the file, with its meshes. All numbers are invented."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from knucklepath.kinematics.clearance.primitives import cylinder, tyre_ring
from knucklepath.viewer.exports.stl import binary_stl

FULL_PROJECT = """\
title  = "Gravel-hill single-seater, front axle"
layout = "double-a-arm"
axle   = "front"
units  = "mm"

[points.upper_arm]
front_pivot = [130.0, 330.0, 300.0]
rear_pivot  = [-150.0, 325.0, 285.0]
ball_joint  = [-12.0, 560.0, 315.0]
[points.lower_arm]
front_pivot = [160.0, 250.0, 115.0]
rear_pivot  = [-170.0, 255.0, 120.0]
ball_joint  = [6.0, 610.0, 105.0]
[points.tie_rod]
inboard  = [95.0, 270.0, 140.0]
outboard = [80.0, 600.0, 135.0]

[wheel]
centre = [0.0, 640.0, 205.0]
camber_deg = -1.5
toe_deg = 0.2
loaded_radius = 255.0
tyre_radius = 260.0
tyre_width = 180.0
rim_diameter = 330.0

[travel]
bump = 60.0
rebound = 50.0

[rack]
each_way = 35.0
axis = [0.0, 1.0, 0.0]

[spring]
chassis = [-20.0, 300.0, 420.0]
moving  = [-15.0, 520.0, 125.0]
on      = "lower_arm"
shortest = 190.0
longest  = 420.0
rate_n_per_mm = 45.0
preload_n = 600.0

[rods]
diameter = 20.0
[rods.tie_rod]
diameter = 16.0

[vehicle]
wheelbase = 2450.0
centre_of_gravity_height = 310.0
front_brake_share = 0.6
front_drive_share = 0.0

[[parts]]
name  = "knuckle casting"
mesh  = "parts/knuckle.stl"
on    = "knuckle"
units = "mm"
placement = [1,0,0,0, 0,1,0,0, 0,0,1,0]
colour = "#7f8c8d"

[[parts]]
name  = "tyre"
mesh  = "parts/tyre.stl"
on    = "wheel"

[[clearances]]
between = ["tyre", "lower_arm"]
gap = 8.0

[[loads]]
name = "right-hand bend, outer wheel"
contact_force = [0.0, -2600.0, 3100.0]
aligning_moment = 0.0
torque_reaction = "knuckle"
"""


@pytest.fixture
def full_project(tmp_path: Path) -> Path:
    """Write a project that uses every key, in a folder of its own, and return its file."""
    folder = tmp_path / "gravel"
    (folder / "parts").mkdir(parents=True)
    file = folder / "axle.toml"
    file.write_text(FULL_PROJECT, encoding="utf-8")
    knuckle = cylinder([0.0, 560.0, 205.0], [0.0, 630.0, 205.0], 60.0)
    (folder / "parts" / "knuckle.stl").write_bytes(binary_stl(knuckle))
    tyre = tyre_ring(np.array([0.0, 640.0, 205.0]), np.array([0.0, 1.0, 0.0]), 260.0, 180.0, 165.0, segments=24)
    (folder / "parts" / "tyre.stl").write_bytes(binary_stl(tyre))
    return file
