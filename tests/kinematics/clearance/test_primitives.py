"""Generated solids are closed, wound outward, and enclose the round things that they stand for."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from knucklepath.kinematics.clearance import primitives
from knucklepath.kinematics.clearance.inside import is_closed, one_vertex_of_each_piece, wholly_inside, winding_number
from knucklepath.kinematics.clearance.solids import RodStyle, generated_solids
from knucklepath.kinematics.mechanism import Layout
from knucklepath.kinematics.wheel import Corner, Wheel

coordinate = st.floats(-200.0, 200.0, allow_nan=False)
point = st.tuples(coordinate, coordinate, coordinate).map(np.array)


@settings(max_examples=30, deadline=None)
@given(a=point, b=point, radius=st.floats(1.0, 40.0))
def test_a_cylinder_is_closed_and_its_volume_is_that_of_its_polygon(
    a: np.ndarray, b: np.ndarray, radius: float
) -> None:
    length = np.linalg.norm(b - a)
    if length < 1.0:
        b = a + np.array([1.0, 0.0, 0.0])
        length = 1.0
    vertices, faces = primitives.cylinder(a, b, radius, 24)
    assert is_closed(vertices, faces)
    # the area of a regular polygon about a circle is n r² tan(π/n)
    volume = 24 * radius**2 * np.tan(np.pi / 24) * length
    assert primitives.signed_volume(vertices, faces) == pytest.approx(volume, rel=1e-9)


def test_a_ball_encloses_the_round_ball() -> None:
    vertices, faces = primitives.ball((5.0, -3.0, 2.0), 30.0, 24)
    a, b, c = (vertices[faces[:, k]] for k in range(3))
    normal = np.cross(b - a, c - a)
    normal /= np.linalg.norm(normal, axis=1, keepdims=True)
    planes = np.einsum("ij,ij->i", normal, a - [5.0, -3.0, 2.0])
    assert planes.min() >= 30.0 - 1e-9
    assert np.linalg.norm(vertices - [5.0, -3.0, 2.0], axis=1).max() < 30.0 * 1.03


def test_a_tyre_keeps_its_outer_sizes_and_stays_within_the_stated_fatness() -> None:
    vertices, faces = primitives.tyre_ring((0.0, 0.0, 0.0), (0.0, 1.0, 0.0), 300.0, 200.0, 170.0)
    assert is_closed(vertices, faces)
    radius = np.hypot(vertices[:, 0], vertices[:, 2])
    assert 300.0 <= radius.max() <= 300.29
    assert np.ptp(vertices[:, 1]) == pytest.approx(200.0, abs=1e-9)
    middles = vertices[faces].mean(axis=1)
    assert winding_number(np.array([0.0, 0.0, 235.0]), vertices, faces) == pytest.approx(1.0)
    assert winding_number(np.array([0.0, 0.0, 0.0]), vertices, faces) == pytest.approx(0.0, abs=1e-9)
    assert len(middles) < 6000


@pytest.mark.parametrize("make", ["tube", "rim_barrel", "coil"])
def test_rings_and_coils_are_closed_and_wound_outward(make: str) -> None:
    meshes = {
        "tube": primitives.tube((0, 0, 0), (0, 0, 100), 20.0, 12.0),
        "rim_barrel": primitives.rim_barrel((0, 0, 0), (0, 1, 0), 160.0, 180.0),
        "coil": primitives.coil(200.0, 40.0, 6.0),
    }
    vertices, faces = meshes[make]
    assert is_closed(vertices, faces)
    assert primitives.signed_volume(vertices, faces) > 0.0


def test_every_layout_gets_closed_solids_for_all_that_moves(layout: Layout) -> None:
    mechanism = layout.mechanism(layout.example, steered=layout.steers)
    corner = Corner(mechanism, Wheel(layout.example["wheel.centre"], 280.0), layout.carrier, layout.steering_axis)
    solids = generated_solids(corner, RodStyle())
    names = {solid.name for solid in solids}
    assert names >= {*mechanism.body_names[1:], "tyre", "rim"}
    for solid in solids:
        assert is_closed(solid.vertices, solid.faces), solid.name
        assert primitives.signed_volume(solid.vertices, solid.faces) > 0.0, solid.name
        assert solid.body in (*mechanism.body_names, "wheel")


def test_a_rod_that_is_not_shown_is_not_made(layout: Layout) -> None:
    mechanism = layout.mechanism(layout.example, steered=layout.steers)
    corner = Corner(mechanism, Wheel(layout.example["wheel.centre"], 280.0), layout.carrier)
    hidden = mechanism.body_names[1]
    solids = generated_solids(corner, RodStyle(20.0, {hidden: None}))
    assert hidden not in {solid.name for solid in solids}


def test_pieces_are_told_apart_and_each_can_lie_inside() -> None:
    outer = primitives.ball((0.0, 0.0, 0.0), 100.0)
    inner = primitives.ball((20.0, 0.0, 0.0), 10.0)
    beside = primitives.ball((300.0, 0.0, 0.0), 10.0)
    both = primitives.merged([beside, inner])
    assert len(one_vertex_of_each_piece(*both)) == 2
    assert wholly_inside(*both, *outer)
    assert not wholly_inside(*beside, *outer)
    assert not wholly_inside(*outer, *inner)


def test_an_open_mesh_is_known_as_open() -> None:
    vertices, faces = primitives.cylinder((0, 0, 0), (0, 0, 50), 10.0)
    assert is_closed(vertices, faces)
    assert not is_closed(vertices, faces[1:])
