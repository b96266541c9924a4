"""Distances whose exact values are known, against the meshes' stated chord error.

Closed forms: two skew cylinders, a torus and a ball, two boxes. Computed from elementary geometry; OpenCASCADE's
BRepExtrema_DistShapeShape gives the same values on the analytic solids (computed elsewhere, from memory).
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from knucklepath.kinematics.clearance.gap import Gap
from knucklepath.kinematics.clearance.pairs import Pair
from knucklepath.kinematics.clearance.primitives import Mesh, ball, cylinder, lathe
from knucklepath.kinematics.clearance.proved import proved_gaps
from knucklepath.kinematics.clearance.sampled import sampled_gaps
from knucklepath.kinematics.clearance.solids import Solid
from knucklepath.kinematics.motion import solve_motion
from knucklepath.kinematics.wheel import Corner, Wheel
from knucklepath.plugins.layouts.double_a_arm import LAYOUT

Engine = Callable[[Mesh, Mesh], Gap]


def _corner_and_pair(a: Mesh, b: Mesh) -> tuple[Corner, Pair]:
    corner = Corner(LAYOUT.mechanism(LAYOUT.example), Wheel(LAYOUT.example["wheel.centre"], 280.0))
    return corner, Pair(Solid("a", "chassis", *a), Solid("b", "knuckle", *b), 0.0)


def by_sampling(a: Mesh, b: Mesh) -> Gap:
    """The gap of two meshes that stand still, at the design position, by the sampled search."""
    corner, pair = _corner_and_pair(a, b)
    return sampled_gaps(solve_motion(corner, [[0.0]], [[0.0]]), [pair])[0]


def by_proof(a: Mesh, b: Mesh) -> Gap:
    """The same by the proof engine."""
    corner, pair = _corner_and_pair(a, b)
    return proved_gaps(corner, [pair], (0.0, 0.0))[0]


@pytest.fixture(params=[by_sampling, by_proof], ids=["sampled", "proof"])
def gap_between(request: pytest.FixtureRequest) -> Engine:
    """Both engines in turn."""
    return request.param


def fatness(radius: float, segments: int) -> float:
    """How much a polygon about a circle stands out at its corners."""
    return radius * (1.0 / np.cos(np.pi / segments) - 1.0)


def test_skew_cylinders_of_radius_10_and_12_with_axes_40_apart_are_18_apart(gap_between: Engine) -> None:
    a = cylinder((-60.0, 0.0, 0.0), (60.0, 0.0, 0.0), 10.0, 128)
    b = cylinder((0.0, -60.0, 40.0), (0.0, 60.0, 40.0), 12.0, 128)
    assert 18.0 - fatness(10.0, 128) - fatness(12.0, 128) - 1e-9 <= gap_between(a, b).gap_mm <= 18.0 + 1e-9


def test_torus_50_10_and_ball_of_5_at_100_0_30(gap_between: Engine) -> None:
    angles = np.linspace(0.0, 2.0 * np.pi, 128, endpoint=False)
    wide = 10.0 / np.cos(np.pi / 128)
    torus = lathe(
        (0, 0, 0), (0, 0, 1), np.column_stack((wide * np.sin(angles), 50.0 + wide * np.cos(angles))), 256, ring=True
    )
    exact = np.hypot(50.0, 30.0) - 15.0
    assert exact == pytest.approx(43.309518948453, abs=1e-12)
    slack = fatness(10.0, 128) + fatness(60.0, 256) + 2.0 * fatness(5.0, 96)
    assert exact - slack - 1e-9 <= gap_between(torus, ball((100.0, 0.0, 30.0), 5.0, 96)).gap_mm <= exact + 1e-9


def test_boxes_with_gaps_3_4_12_are_13_apart_exactly(gap_between: Engine) -> None:
    def box(shift: tuple[float, float, float]) -> Mesh:
        corners = np.array([[x, y, z] for x in (0, 10) for y in (0, 10) for z in (0, 10)], dtype=float)
        quads = [(0, 1, 3, 2), (4, 6, 7, 5), (0, 4, 5, 1), (2, 3, 7, 6), (0, 2, 6, 4), (1, 5, 7, 3)]
        faces = [t for a, b, c, d in quads for t in ((a, b, c), (a, c, d))]
        return corners + shift, np.array(faces, dtype=np.int32)

    gap = gap_between(box((0.0, 0.0, 0.0)), box((13.0, 14.0, 22.0)))
    assert gap.gap_mm == pytest.approx(13.0, abs=1e-12)
    np.testing.assert_allclose(gap.point_a_mm, [10.0, 10.0, 10.0], atol=1e-12)
    np.testing.assert_allclose(gap.point_b_mm, [13.0, 14.0, 22.0], atol=1e-12)
