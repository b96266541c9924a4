"""Generated solids are closed, wound outward, and enclose the round things that they stand for."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from knucklepath.kinematics.clearance import primitives
from knucklepath.kinematics.clearance.inside import (
    is_closed,
    one_vertex_of_each_piece,
    wholly_inside,
    winding_number,
    without_repeats,
)
from knucklepath.kinematics.clearance.solids import RodStyle, generated_solids
from knucklepath.kinematics.mechanism import HingedBody, Layout, Mechanism, PointInput, Rod
from knucklepath.kinematics.wheel import Corner, Spring, Wheel
from knucklepath.plugins.layouts.semi_trailing_arm import LAYOUT as SEMI_TRAILING

HUB_WHEEL = Wheel(SEMI_TRAILING.example["wheel.centre"], 280.0, camber_deg=-2.0)

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


def volume_of(mesh: primitives.Mesh) -> float:
    return primitives.signed_volume(*mesh)


def test_a_tube_is_a_polygon_about_its_outside_and_one_within_its_bore() -> None:
    tube = primitives.tube((1.0, 2.0, 3.0), (1.0, 2.0, 103.0), 20.0, 12.0, 24)
    # areas of regular polygons: n r² tan(π/n) about a circle, n r² sin(π/n) cos(π/n) within it
    turn = np.pi / 24
    area = 24 * (20.0**2 * np.tan(turn) - 12.0**2 * np.sin(turn) * np.cos(turn))
    assert volume_of(tube) == pytest.approx(100.0 * area, rel=1e-9)


def test_volumes_come_near_those_of_the_round_solids() -> None:
    ball = 4.0 / 3.0 * np.pi * 30.0**3
    assert ball < volume_of(primitives.ball((5.0, -3.0, 2.0), 30.0, 24)) < 1.04 * ball
    # a coil is a bent bar: section times length of the centre line (Pappus), less than its polygons leave out
    coil = np.pi * 6.0**2 * np.hypot(2.0 * np.pi * 7.0 * 40.0, 188.0)
    assert 0.93 * coil < volume_of(primitives.coil(200.0, 40.0, 6.0)) < coil


def inside_by(points: np.ndarray, mesh: primitives.Mesh) -> np.ndarray:
    """Winding numbers of points that lie a hair within the round solid."""
    return np.array([winding_number(point, *mesh) for point in points])


def about_y(along: float, radius: float) -> np.ndarray:
    """Points (n, 3) around the y axis: over corners, sides and in between of a 72-sided polygon."""
    angles = np.linspace(0.0, 2.0 * np.pi / 72, 9)
    return np.column_stack((radius * np.cos(angles), np.full(9, along), radius * np.sin(angles)))


def test_a_tyre_encloses_its_round_shoulders_its_tread_and_its_bore() -> None:
    outer, width, inner, hair = 300.0, 200.0, 170.0, 1e-6
    tyre = primitives.tyre_ring((0.0, 0.0, 0.0), (0.0, 1.0, 0.0), outer, width, inner)
    shoulder = min(0.42 * (outer - inner), 0.36 * width / 2.0)
    for angle in np.radians(np.arange(0.0, 90.1, 2.5)):
        along = width / 2.0 - shoulder + (shoulder - hair) * np.cos(angle)
        radius = outer - shoulder + (shoulder - hair) * np.sin(angle)
        for side in (along, -along):
            assert inside_by(about_y(side, radius), tyre).min() == pytest.approx(1.0, abs=1e-6)
    assert inside_by(about_y(0.0, outer - hair), tyre).min() == pytest.approx(1.0, abs=1e-6)
    assert inside_by(about_y(0.0, inner + hair), tyre).min() == pytest.approx(1.0, abs=1e-6)


def test_a_bore_never_looks_wider_than_it_is() -> None:
    """What hangs inside a rim, a caliper say, must not be told more room than there is."""
    radius, width = 160.0, 180.0
    rim = primitives.rim_barrel((0.0, 0.0, 0.0), (0.0, 1.0, 0.0), radius, width)
    bore = radius - 1.6 * max(0.03 * radius, 4.0)
    assert inside_by(about_y(-60.0, bore + 1e-6), rim).min() == pytest.approx(1.0, abs=1e-6)
    assert inside_by(about_y(-60.0, bore * np.cos(np.pi / 72) - 1e-6), rim).max() == pytest.approx(0.0, abs=1e-6)
    tube = primitives.tube((0.0, 0.0, 0.0), (0.0, 100.0, 0.0), 60.0, 50.0, 72)
    assert inside_by(about_y(50.0, 50.0 + 1e-6), tube).min() == pytest.approx(1.0, abs=1e-6)
    assert inside_by(about_y(50.0, 60.0 - 1e-6), tube).min() == pytest.approx(1.0, abs=1e-6)


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


def reaches(mesh: primitives.Mesh, point: np.ndarray, within: float) -> bool:
    return bool(np.linalg.norm(mesh[0] - point, axis=1).min() < within)


def test_the_carrier_reaches_the_spring_that_stands_on_it(layout: Layout) -> None:
    mechanism = layout.mechanism(layout.example, steered=layout.steers)
    wheel = Wheel(layout.example["wheel.centre"], 280.0)
    moving = wheel.centre + [70.0, -120.0, 90.0]
    spring = Spring(moving + [0.0, -60.0, 250.0], moving, layout.carrier)
    bare, sprung = (
        next(
            solid
            for solid in generated_solids(Corner(mechanism, wheel, layout.carrier, spring=spring), RodStyle())
            if solid.name == layout.carrier
        )
        for spring in (None, spring)
    )
    assert reaches((sprung.vertices, sprung.faces), moving, 20.0)
    assert not reaches((bare.vertices, bare.faces), moving, 20.0)


def test_a_hinged_carrier_has_a_hub_on_the_spin_axis() -> None:
    arm = next(
        solid
        for solid in generated_solids(
            Corner(SEMI_TRAILING.mechanism(SEMI_TRAILING.example, steered=False), HUB_WHEEL, SEMI_TRAILING.carrier),
            RodStyle(20.0),
        )
        if solid.name == SEMI_TRAILING.carrier
    )
    end = HUB_WHEEL.centre + 7.5 * HUB_WHEEL.spin_axis
    assert winding_number(end, arm.vertices, arm.faces) > 0.5
    across = np.cross(HUB_WHEEL.spin_axis, [0.0, 0.0, 1.0])
    assert winding_number(end + 33.0 * across / np.linalg.norm(across), arm.vertices, arm.faces) > 0.5


def test_a_joint_in_the_very_place_of_a_hinge_point_is_no_trouble() -> None:
    """A plugin may hold a rod to an arm at the arm's own pivot: that leg has no length and is left out."""
    points = {
        "arm.front": np.array([100.0, 300.0, 100.0]),
        "arm.rear": np.array([-100.0, 300.0, 100.0]),
        "drop.top": np.array([100.0, 300.0, 100.0]),
        "drop.bottom": np.array([100.0, 200.0, -100.0]),
        "wheel.centre": np.array([0.0, 600.0, 200.0]),
    }
    mechanism = Mechanism(
        bodies=(HingedBody("arm", ("arm.front", "arm.rear")),),
        joints=(Rod("drop", "arm", "drop.top", "chassis", "drop.bottom"),),
        inputs=(PointInput("travel", "arm", "wheel.centre"),),
        points=points,
    )
    corner = Corner(mechanism, Wheel(points["wheel.centre"], 280.0), "arm")
    with np.errstate(all="raise"):
        solids = generated_solids(corner, RodStyle())
    arm = next(solid for solid in solids if solid.name == "arm")
    assert np.isfinite(arm.vertices).all()
    assert is_closed(arm.vertices, arm.faces)


def test_pieces_are_told_apart_and_each_can_lie_inside() -> None:
    outer = primitives.ball((0.0, 0.0, 0.0), 100.0)
    inner = primitives.ball((20.0, 0.0, 0.0), 10.0)
    beside = primitives.ball((300.0, 0.0, 0.0), 10.0)
    both = primitives.merged([beside, inner])
    assert len(one_vertex_of_each_piece(*both)) == 2
    assert wholly_inside(*both, *outer)
    assert not wholly_inside(*beside, *outer)
    assert not wholly_inside(*outer, *inner)


def test_being_inside_does_not_depend_on_the_winding_of_the_outer_mesh() -> None:
    vertices, faces = primitives.ball((0.0, 0.0, 0.0), 100.0)
    inner = primitives.ball((20.0, 0.0, 0.0), 10.0)
    assert wholly_inside(*inner, vertices, faces[:, ::-1])
    assert not wholly_inside(*primitives.ball((80.0, 80.0, 80.0), 10.0), vertices, faces[:, ::-1])


def test_triangles_listed_again_are_dropped_but_not_those_turned_round() -> None:
    vertices, faces = primitives.ball((0.0, 0.0, 0.0), 100.0)
    again = np.concatenate((faces, faces[:7][:, [1, 2, 0]]))
    assert not is_closed(vertices, again)
    np.testing.assert_array_equal(without_repeats(vertices, again), faces)
    turned = np.concatenate((faces, faces[:, ::-1]))
    assert len(without_repeats(vertices, turned)) == 2 * len(faces)


def test_an_open_mesh_is_known_as_open() -> None:
    vertices, faces = primitives.cylinder((0, 0, 0), (0, 0, 50), 10.0)
    assert is_closed(vertices, faces)
    assert not is_closed(vertices, faces[1:])
