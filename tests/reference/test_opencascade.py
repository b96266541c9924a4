"""Distances of analytic solids by a CAD kernel, against the meshes that enclose them.

OpenCASCADE's BRepExtrema_DistShapeShape (package ``cadquery-ocp``, the extra "oracle"; collected only where that is
installed). A mesh lies outside its solid by at most its chord error, so its distance is smaller by at most that.
"""

from __future__ import annotations

import numpy as np
import pytest
from OCP.BRepExtrema import BRepExtrema_DistShapeShape
from OCP.BRepPrimAPI import BRepPrimAPI_MakeBox, BRepPrimAPI_MakeCylinder, BRepPrimAPI_MakeSphere, BRepPrimAPI_MakeTorus
from OCP.gp import gp_Ax2, gp_Dir, gp_Pnt

from knucklepath.kinematics.clearance.boxes import build_tree
from knucklepath.kinematics.clearance.primitives import Mesh, ball, cylinder, lathe
from knucklepath.kinematics.clearance.traverse import distance


def cad_distance(first: object, second: object) -> float:
    return float(BRepExtrema_DistShapeShape(first, second).Value())


def mesh_distance(first: Mesh, second: Mesh) -> float:
    return float(distance(build_tree(*first), build_tree(*second), np.eye(3), np.zeros(3), 1e300)[0])


def axis(at: np.ndarray, along: np.ndarray) -> gp_Ax2:
    return gp_Ax2(gp_Pnt(*map(float, at)), gp_Dir(*map(float, along)))


def chord(radius: float, segments: int) -> float:
    return float(radius * (1.0 / np.cos(np.pi / segments) - 1.0))


def test_the_kernel_confirms_the_closed_forms() -> None:
    skew = (
        BRepPrimAPI_MakeCylinder(axis(np.array([-60.0, 0, 0]), np.array([1.0, 0, 0])), 10.0, 120.0).Shape(),
        BRepPrimAPI_MakeCylinder(axis(np.array([0, -60.0, 40.0]), np.array([0, 1.0, 0])), 12.0, 120.0).Shape(),
    )
    assert cad_distance(*skew) == pytest.approx(18.0, abs=1e-9)
    torus = BRepPrimAPI_MakeTorus(50.0, 10.0).Shape()
    sphere = BRepPrimAPI_MakeSphere(gp_Pnt(100.0, 0.0, 30.0), 5.0).Shape()
    assert cad_distance(torus, sphere) == pytest.approx(43.309518948453, abs=1e-9)
    boxes = (
        BRepPrimAPI_MakeBox(gp_Pnt(0, 0, 0), gp_Pnt(10, 10, 10)).Shape(),
        BRepPrimAPI_MakeBox(gp_Pnt(13, 14, 22), gp_Pnt(23, 24, 32)).Shape(),
    )
    assert cad_distance(*boxes) == pytest.approx(13.0, abs=1e-9)


@pytest.mark.parametrize("seed", range(12))
def test_cylinders_balls_and_rings_keep_the_kernels_distance_within_their_chord_error(seed: int) -> None:
    random = np.random.default_rng(seed)
    start, along = random.uniform(-40.0, 40.0, 3), random.normal(size=3)
    along /= np.linalg.norm(along)
    radius, length = random.uniform(4.0, 20.0), random.uniform(30.0, 120.0)
    away = random.normal(size=3)
    centre = start + away / np.linalg.norm(away) * random.uniform(140.0, 260.0)
    size = random.uniform(5.0, 30.0)
    pin = BRepPrimAPI_MakeCylinder(axis(start, along), radius, length).Shape()
    globe = BRepPrimAPI_MakeSphere(gp_Pnt(*map(float, centre)), size).Shape()
    exact = cad_distance(pin, globe)
    found = mesh_distance(cylinder(start, start + along * length, radius, 128), ball(centre, size, 96))
    assert exact - chord(radius, 128) - 2.5 * chord(size, 96) - 1e-9 <= found <= exact + 1e-9
    ring = BRepPrimAPI_MakeTorus(axis(centre, along), 40.0, size / 3.0).Shape()
    angles = np.linspace(0.0, 2.0 * np.pi, 96, endpoint=False)
    wide = size / 3.0 / np.cos(np.pi / 96)
    profile = np.column_stack((wide * np.sin(angles), 40.0 + wide * np.cos(angles)))
    exact = cad_distance(pin, ring)
    found = mesh_distance(
        cylinder(start, start + along * length, radius, 128), lathe(centre, along, profile, 192, ring=True)
    )
    # the ring's inner half is a polygon about the axis as well, whose corners lie outside
    slack = chord(radius, 128) + chord(size / 3.0, 96) + chord(40.0 + size / 3.0, 192)
    assert exact - slack - 1e-9 <= found <= exact + slack + 1e-9
