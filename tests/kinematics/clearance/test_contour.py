"""The contour closes for every pattern of points below and above, and lies where it must."""

from __future__ import annotations

import numpy as np
import pytest
import trimesh

from knucklepath.kinematics.clearance.contour import contour, cube_table
from knucklepath.kinematics.clearance.inside import winding_number


def walled(values: np.ndarray, wall: float) -> np.ndarray:
    out = np.full([n + 2 for n in values.shape], wall, dtype=np.float32)
    out[1:-1, 1:-1, 1:-1] = values
    return out


def test_every_case_has_triangles_on_the_edges_that_its_opposite_crosses_too() -> None:
    table = cube_table()
    counts = (table >= 0).sum(axis=1) // 3
    assert counts[0] == counts[255] == 0  # nothing or everything below: no surface
    assert counts[1:255].min() >= 1
    for case in range(256):
        assert set(table[case]) == set(table[255 - case]), case


@pytest.mark.parametrize("seed", range(8))
def test_noise_gives_a_surface_that_closes_and_is_wound_outward(seed: int) -> None:
    noise = np.random.default_rng(seed).normal(size=(12, 11, 10))
    vertices, faces = contour(walled(noise, 5.0), 0.0, np.zeros(3), 1.0)
    mesh = trimesh.Trimesh(vertices, faces, process=False)
    assert mesh.is_watertight
    assert mesh.is_winding_consistent
    for place in list(np.ndindex(noise.shape))[seed::7]:
        inside = winding_number(np.array(place) + 1.0, vertices, faces)
        assert inside == pytest.approx(float(noise[place] <= 0.0), abs=1e-6)


def test_a_plane_is_met_exactly() -> None:
    points = np.stack(np.meshgrid(*[np.arange(9.0)] * 3, indexing="ij"), axis=-1)
    normal = np.array([2.0, -1.0, 2.0]) / 3.0
    heights = points @ normal - 3.3
    vertices, _ = contour(walled(heights, 50.0), 0.0, np.full(3, -1.0), 1.0)
    inner = vertices[((vertices > 0.0) & (vertices < 8.0)).all(axis=1)]
    assert len(inner) > 50
    assert np.abs(inner @ normal - 3.3).max() < 1e-5
