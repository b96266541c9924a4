"""Rotations and screws, against an independent library and by their definitions."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from knucklepath.kinematics.frames import (
    cross,
    quaternion_from_rotation,
    rotation_from_vector,
    rotation_vector,
    screw_axis,
    skew_matrix,
)
from knucklepath.kinematics.tree import cross_first, dot_first, exponential_first, multiply_first, rotate_first

component = st.floats(-3.1, 3.1, allow_nan=False)


@settings(max_examples=60, deadline=None)
@given(st.tuples(component, component, component))
def test_rotations_equal_an_independent_library(vector: tuple[float, float, float]) -> None:
    given_vector = np.array(vector)
    matrix = rotation_from_vector(given_vector)
    reference = Rotation.from_rotvec(given_vector)
    np.testing.assert_allclose(matrix, reference.as_matrix(), atol=1e-14)
    np.testing.assert_allclose(exponential_first(given_vector[:, None])[..., 0], matrix, atol=1e-14)
    np.testing.assert_allclose(rotation_from_vector(rotation_vector(matrix)), matrix, atol=1e-13)


@pytest.mark.parametrize("angle", [0.0, 1e-12, 1e-7, 3.0, np.pi - 1e-9, np.pi])
def test_rotation_vectors_keep_their_digits_at_small_and_half_turns(angle: float) -> None:
    vector = angle * np.array([0.6, -0.48, 0.64])
    back = rotation_vector(rotation_from_vector(vector))
    np.testing.assert_allclose(np.linalg.norm(back), angle, rtol=1e-9, atol=1e-15)


def test_a_pure_translation_has_no_axis_and_an_endless_pitch() -> None:
    screw = screw_axis(np.zeros(3), np.array([0.0, 0.0, 1.0]), np.array([1.0, 2.0, 3.0]))
    assert np.isnan(screw.direction).all()
    assert np.isnan(screw.point).all()
    assert screw.pitch_mm_per_rad == np.inf


def test_quaternions_are_those_of_an_independent_library_but_for_the_sign() -> None:
    reference = Rotation.from_quat(np.random.default_rng(1).normal(size=(50, 4)))
    ours = quaternion_from_rotation(reference.as_matrix())
    theirs = np.roll(reference.as_quat(), 1, axis=-1)
    np.testing.assert_allclose(np.abs((ours * theirs).sum(axis=-1)), 1.0, atol=1e-14)


@pytest.mark.parametrize("axis", [(1.0, 0.0, 0.0), (0.0, 1.0, 0.0), (0.0, 0.0, 1.0), (0.6, 0.0, -0.8)])
def test_a_half_turn_keeps_its_axis(axis: tuple[float, float, float]) -> None:
    back = rotation_vector(rotation_from_vector(np.pi * np.array(axis)))
    np.testing.assert_allclose(np.abs(back @ np.array(axis)), np.pi, rtol=1e-12)


def test_leading_axes_are_free() -> None:
    vectors = np.random.default_rng(2).normal(size=(4, 3, 3))
    turned = rotation_from_vector(vectors)
    assert turned.shape == (4, 3, 3, 3)
    np.testing.assert_array_equal(turned[2, 1], rotation_from_vector(vectors[2, 1]))
    np.testing.assert_array_equal(rotation_vector(turned)[2, 1], rotation_vector(turned[2, 1]))


def test_products_over_the_first_or_the_last_axis_are_the_usual_ones() -> None:
    random = np.random.default_rng(3)
    a, b = random.normal(size=(20, 3)), random.normal(size=(20, 3))
    r, s = random.normal(size=(20, 3, 3)), random.normal(size=(20, 3, 3))
    np.testing.assert_allclose(cross(a, b), np.cross(a, b), atol=1e-15)
    np.testing.assert_allclose(np.einsum("bij,bj->bi", skew_matrix(a), b), np.cross(a, b), atol=1e-15)
    np.testing.assert_allclose(cross_first(a.T, b.T).T, np.cross(a, b), atol=1e-15)
    np.testing.assert_allclose(cross_first(a.T, b.T[:, :1]).T, np.cross(a, b[0]), atol=1e-15)
    np.testing.assert_allclose(cross_first(a.T[:, :1], b.T).T, np.cross(a[0], b), atol=1e-15)
    np.testing.assert_allclose(dot_first(a.T, b.T), (a * b).sum(axis=-1), atol=1e-15)
    first = np.moveaxis(r, 0, -1)
    np.testing.assert_allclose(rotate_first(first, a.T).T, np.einsum("bij,bj->bi", r, a), atol=1e-14)
    product = multiply_first(first, np.moveaxis(s, 0, -1))
    np.testing.assert_allclose(np.moveaxis(product, -1, 0), r @ s, atol=1e-14)


def test_a_screw_is_found_again_from_the_motion_that_it_makes() -> None:
    """Chasles and Mozzi: turn by rate about a line, and advance along it by pitch."""
    random = np.random.default_rng(4)
    direction = random.normal(size=(30, 3))
    direction /= np.linalg.norm(direction, axis=-1, keepdims=True)
    through, at = random.normal(size=(30, 3)) * 100.0, random.normal(size=(30, 3)) * 100.0
    pitch, rate = random.normal(size=30) * 20.0, random.uniform(1e-6, 1.0, 30)
    angular = rate[:, None] * direction
    velocity = np.cross(angular, at - through) + pitch[:, None] * angular
    screw = screw_axis(angular, velocity, at)
    np.testing.assert_allclose(screw.direction, direction, atol=1e-12)
    np.testing.assert_allclose(screw.rate, rate, rtol=1e-12)
    np.testing.assert_allclose(screw.pitch_mm_per_rad, pitch, atol=1e-8)
    np.testing.assert_allclose(np.cross(screw.point - through, direction), 0.0, atol=1e-7)
    # the point is the one nearest to where the motion was given
    np.testing.assert_allclose(((screw.point - at) * direction).sum(axis=-1), 0.0, atol=1e-7)


def test_a_pure_rotation_has_no_pitch_and_an_unreached_pose_no_screw() -> None:
    screw = screw_axis(
        np.array([[0.0, 0.0, 2.0], [np.nan] * 3]), np.array([[0.0, 6.0, 0.0], [np.nan] * 3]), np.zeros(3)
    )
    assert screw.pitch_mm_per_rad[0] == 0.0
    np.testing.assert_allclose(screw.point[0], [-3.0, 0.0, 0.0])
    assert np.isnan(screw.pitch_mm_per_rad[1])
    assert np.isnan(screw.rate[1])
