"""The swept volume: watertight, containing every pose in between too, and not much fatter than it must be."""

from __future__ import annotations

import numpy as np
import pytest
import trimesh

from knucklepath.kinematics.clearance.envelope import Envelope, swept_envelope
from knucklepath.kinematics.clearance.inside import is_closed
from knucklepath.kinematics.clearance.primitives import ball, cylinder, merged
from knucklepath.kinematics.clearance.solids import Solid
from knucklepath.kinematics.errors import ReachError
from knucklepath.kinematics.motion import solve_motion
from knucklepath.kinematics.wheel import Corner, Wheel
from knucklepath.plugins.layouts.double_a_arm import LAYOUT

TETRAHEDRON = np.array([[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]], dtype=np.int32)
TRAVEL, RACK = (-40.0, 45.0), (-20.0, 20.0)


@pytest.fixture(scope="module")
def corner() -> Corner:
    return Corner(LAYOUT.mechanism(LAYOUT.example), Wheel(LAYOUT.example["wheel.centre"], 280.0))


@pytest.fixture(scope="module")
def pin(corner: Corner) -> Solid:
    """A lollipop on the wheel, off its axis."""
    at = corner.wheel.centre + [150.0, 20.0, 60.0]
    return Solid("pin", "wheel", *merged([ball(at, 15.0, 12), cylinder(at, at + [0.0, 60.0, 10.0], 6.0, 10)]))


@pytest.fixture(scope="module")
def envelope(corner: Corner, pin: Solid) -> Envelope:
    return swept_envelope(corner, pin, TRAVEL, RACK, margin_mm=1.0)


def as_trimesh(envelope: Envelope) -> trimesh.Trimesh:
    return trimesh.Trimesh(envelope.vertices, envelope.faces, process=False)


def test_it_is_watertight_wound_outward_and_as_large_as_it_says(envelope: Envelope) -> None:
    mesh = as_trimesh(envelope)
    assert is_closed(envelope.vertices, envelope.faces)
    assert mesh.is_watertight
    assert mesh.is_winding_consistent
    assert envelope.volume_mm3 == pytest.approx(mesh.volume, rel=1e-6)
    np.testing.assert_allclose(mesh.bounds, [envelope.low, envelope.high], atol=1e-9)


def depths(corner: Corner, solid: Solid, envelope: Envelope, count: int) -> np.ndarray:
    """How deep vertices at random poses lie inside an envelope; negative outside. trimesh is the oracle."""
    random = np.random.default_rng(11)
    motion = solve_motion(corner, random.uniform(*TRAVEL, count), random.uniform(*RACK, count))
    vertices = solid.vertices[random.integers(0, len(solid.vertices), count)]
    points = np.einsum("nij,nj->ni", motion.rotation(solid.body), vertices) + motion.translation(solid.body)
    mesh = as_trimesh(envelope)
    # in portions: the oracle's memory grows with the square
    return np.concatenate(
        [trimesh.proximity.signed_distance(mesh, some) for some in np.array_split(points, count // 100)]
    )


def test_it_contains_ten_thousand_vertices_at_random_poses(corner: Corner, pin: Solid, envelope: Envelope) -> None:
    assert depths(corner, pin, envelope, 10_000).min() >= envelope.margin_mm


@pytest.mark.parametrize(("margin", "accuracy"), [(0.0, 2.0), (0.2, 9.0), (3.0, 9.0)])
def test_a_speck_is_contained_however_coarse_the_steps(corner: Corner, margin: float, accuracy: float) -> None:
    """Nothing is curved more than the distance from a point, and so nothing tries the level harder."""
    at = corner.wheel.centre + [260.0, 40.0, 30.0]
    speck = Solid("speck", "wheel", at + 0.05 * np.array([[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1.0]]), TETRAHEDRON)
    envelope = swept_envelope(corner, speck, TRAVEL, RACK, margin_mm=margin, accuracy_mm=accuracy)
    found = depths(corner, speck, envelope, 3000).min()
    assert margin <= found
    # the steps were coarse: a contour at the margin alone would have missed
    assert envelope.convex_fatness_mm > margin + 0.5


def test_a_bowl_is_swept_with_its_hollow_and_a_box_without_a_lid_like_a_sheet(corner: Corner) -> None:
    box = trimesh.creation.box((60.0, 50.0, 40.0))
    faces = np.asarray(box.faces)[box.face_normals[:, 2] < 0.5].astype(np.int32)
    lidless = Solid("lidless", "wheel", np.asarray(box.vertices) + corner.wheel.centre, faces)
    envelope = swept_envelope(corner, lidless, (0.0, 0.0), margin_mm=1.0)
    mesh = as_trimesh(envelope)
    assert mesh.is_watertight
    above = corner.wheel.centre + [[0.0, 0.0, 0.0], [0.0, 0.0, 15.0]]
    assert not mesh.contains(above).any()
    assert mesh.contains(lidless.vertices).all()
    closed = Solid("closed", "wheel", lidless.vertices, np.asarray(box.faces, dtype=np.int32))
    solid = as_trimesh(swept_envelope(corner, closed, (0.0, 0.0), margin_mm=1.0))
    assert solid.contains(above).all()
    assert solid.body_count == 1


def test_it_is_not_fatter_than_it_says(corner: Corner) -> None:
    """A ball's sweep is all that lies within its radius of its centre's path, which is known."""
    centre, radius = corner.wheel.centre + [150.0, 20.0, 60.0], 15.0
    envelope = swept_envelope(corner, Solid("ball", "wheel", *ball(centre, radius, 24)), TRAVEL, RACK, margin_mm=1.0)
    motion = solve_motion(corner, np.linspace(*TRAVEL, 241)[:, None], np.linspace(*RACK, 121)[None])
    path = motion.point("wheel", centre).reshape(-1, 3)
    some = envelope.vertices[:: max(len(envelope.vertices) // 800, 1)]
    apart = np.array([np.linalg.norm(path - point, axis=1).min() for point in some])
    polygon = radius * (1.0 / np.cos(np.pi / 24) ** 2 - 1.0)
    assert apart.min() >= radius + envelope.margin_mm - 1e-3
    assert apart.max() <= radius + polygon + envelope.fatness_mm + 0.1
    assert np.quantile(apart, 0.99) <= radius + polygon + envelope.convex_fatness_mm + 0.3
    assert envelope.convex_fatness_mm - envelope.margin_mm <= 3.0


def test_a_ball_that_hardly_moves_sweeps_hardly_more_than_itself(corner: Corner) -> None:
    still = Solid("still", "chassis", *ball((0.0, 500.0, 300.0), 25.0, 24))
    envelope = swept_envelope(corner, still, (0.0, 0.0), margin_mm=0.5)
    radius = np.linalg.norm(envelope.vertices - [0.0, 500.0, 300.0], axis=1)
    assert radius.min() >= 25.5 - 1e-6
    assert radius.max() <= 25.0 * 1.02 + envelope.fatness_mm


def test_seen_from_its_own_body_a_part_stands_still(corner: Corner, pin: Solid) -> None:
    envelope = swept_envelope(corner, pin, TRAVEL, RACK, on="knuckle", margin_mm=1.0)
    size = np.ptp(pin.vertices, axis=0)
    assert ((envelope.high - envelope.low) <= size + 2.0 * envelope.fatness_mm).all()


def test_a_motion_that_locks_is_refused(corner: Corner, pin: Solid) -> None:
    with pytest.raises(ReachError, match="locks"):
        swept_envelope(corner, pin, (-600.0, 0.0))
