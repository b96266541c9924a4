"""Where two triangles meet: a point of both, checked against a distance engine where they miss."""

from __future__ import annotations

import fcl
import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from knucklepath.kinematics.clearance.contact import barycentric, meeting_point, nearest_on_triangle

# to the micrometre: below that neither meshes nor the reference engine mean anything
coordinate = st.floats(-50.0, 50.0, allow_nan=False).map(lambda value: round(value, 3))
triangles = st.lists(coordinate, min_size=9, max_size=9).map(lambda values: np.array(values).reshape(3, 3))
shares = st.tuples(*[st.floats(0.05, 1.0)] * 3).map(lambda values: np.array(values) / sum(values))


def area(triangle: np.ndarray) -> float:
    return float(np.linalg.norm(np.cross(triangle[1] - triangle[0], triangle[2] - triangle[0])) / 2.0)


def off(point: np.ndarray, triangle: np.ndarray) -> float:
    return float(np.linalg.norm(nearest_on_triangle(point, triangle) - point))


def engine_distance(first: np.ndarray, second: np.ndarray) -> float:
    objects = []
    for triangle in (first, second):
        model = fcl.BVHModel()
        model.beginModel(3, 1)
        model.addSubModel(triangle, np.array([[0, 1, 2]]))
        model.endModel()
        objects.append(fcl.CollisionObject(model, fcl.Transform()))
    return float(fcl.distance(*objects, fcl.DistanceRequest(), fcl.DistanceResult()))


@settings(max_examples=200, deadline=None)
@given(triangles, triangles, shares, shares)
def test_triangles_that_cross_share_the_point(
    first: np.ndarray, second: np.ndarray, one: np.ndarray, two: np.ndarray
) -> None:
    assume(min(area(first), area(second)) > 1.0)
    second = second + (one @ first - two @ second)
    point = meeting_point(first, second)
    assert max(off(point, first), off(point, second)) < 1e-6


@settings(max_examples=200, deadline=None)
@given(triangles, triangles, st.floats(-80.0, 80.0))
def test_triangles_that_miss_are_halved_where_an_engine_finds_them_nearest(
    first: np.ndarray, second: np.ndarray, lift: float
) -> None:
    assume(min(area(first), area(second)) > 1.0)
    second = second + [0.0, 0.0, lift]
    apart = engine_distance(first, second)
    assume(apart > 1e-3)
    point = meeting_point(first, second)
    assert off(point, first) == pytest.approx(apart / 2.0, rel=1e-6)
    assert off(point, second) == pytest.approx(apart / 2.0, rel=1e-6)


@pytest.mark.parametrize(
    "second",
    [
        [[2, 2, 0], [12, 2, 0], [2, 12, 0]],
        [[10, 0, 0], [20, 0, 5], [20, 5, 5]],
        [[5, -3, 0], [5, 3, 0], [5, 0, 9]],
        [[0, 0, 0], [10, 0, 0], [0, -10, 0]],
        [[0, 0, 0], [10, 0, 0], [0, 10, 0]],
        [[3, 3, 0], [3, 3, 8], [4, 3, 8]],
        [[-5, 4, 0], [15, 4, 0], [5, 4, -6]],
    ],
    ids=[
        "in one plane",
        "corner on corner",
        "edge across edge",
        "shared edge",
        "the same",
        "corner on face",
        "edge over",
    ],
)
def test_triangles_that_only_touch_or_lie_in_one_plane(second: list[list[float]]) -> None:
    first = np.array([[0.0, 0.0, 0.0], [10.0, 0.0, 0.0], [0.0, 10.0, 0.0]])
    for a, b in ((first, np.array(second, dtype=float)), (np.array(second, dtype=float), first)):
        point = meeting_point(a, b)
        assert max(off(point, a), off(point, b)) < 1e-12


@settings(max_examples=100, deadline=None)
@given(triangles, st.tuples(coordinate, coordinate, coordinate).map(np.array))
def test_the_nearest_point_is_in_the_triangle_and_no_corner_or_middle_is_nearer(
    triangle: np.ndarray, point: np.ndarray
) -> None:
    assume(area(triangle) > 1.0)
    nearest = nearest_on_triangle(point, triangle)
    weights = barycentric(nearest, triangle)
    assert weights.min() > -1e-6
    np.testing.assert_allclose(weights @ triangle, nearest, atol=1e-6)
    rivals = np.concatenate((triangle, (triangle + np.roll(triangle, 1, axis=0)) / 2.0, [triangle.mean(axis=0)]))
    assert np.linalg.norm(nearest - point) <= np.linalg.norm(rivals - point, axis=1).min() + 1e-9
