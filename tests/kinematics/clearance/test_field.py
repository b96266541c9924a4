"""A part's distance field: exact near the surface, never too large, negative inside closed parts only."""

from __future__ import annotations

import numpy as np
import pytest
import trimesh

from knucklepath.kinematics.clearance.field import distance_field
from knucklepath.kinematics.clearance.inside import winding_number
from knucklepath.kinematics.clearance.primitives import Mesh, ball, cylinder, merged, tyre_ring

CASES = {
    "tyre": tyre_ring((0.0, 600.0, 200.0), (0.1, 1.0, 0.05), 120.0, 70.0, 70.0, 32),
    "overlapping": merged([ball((5.0, 0.0, 0.0), 30.0), cylinder((0.0, 0.0, 0.0), (60.0, 20.0, 90.0), 9.0)]),
}


@pytest.mark.parametrize("mesh", CASES.values(), ids=CASES)
def test_distances_are_those_of_an_independent_engine(mesh: Mesh) -> None:
    step, band = 2.5, 9.0
    field = distance_field(*mesh, step, band)
    random = np.random.default_rng(5)
    index = np.column_stack([random.integers(0, n, 1500) for n in field.values.shape])
    points = field.origin + step * index
    oracle = trimesh.Trimesh(*mesh, process=False)
    _, away, _ = trimesh.proximity.closest_point(oracle, points)
    found = np.abs(field.values[tuple(index.T)])
    near = away <= band
    assert near.sum() > 100
    np.testing.assert_allclose(found[near], away[near], atol=1e-4)
    assert (found <= away + 1e-4).all()
    # a surface right beside a point hides on which side it lies
    sure = away > step
    winding = np.array([winding_number(point, *mesh) for point in points[sure]])
    assert (winding > 0.5).any()
    np.testing.assert_array_equal(field.values[tuple(index.T)][sure] < 0.0, winding > 0.5)


def test_an_open_part_has_no_inside() -> None:
    vertices, faces = cylinder((0.0, 0.0, 0.0), (0.0, 0.0, 50.0), 20.0)
    middle = vertices[faces].mean(axis=1)
    assert (distance_field(vertices, faces, 2.0, 6.0).values < 0.0).any()
    lidless = np.ascontiguousarray(faces[middle[:, 2] < 49.9])
    assert (distance_field(vertices, lidless, 2.0, 6.0).values >= 0.0).all()
