"""Many small systems at once, rotations and screws, against general-purpose references."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from knucklepath.kinematics.frames import rotation_from_vector, rotation_vector, screw_axis
from knucklepath.kinematics.linear import pivot_order, solve_many
from knucklepath.kinematics.tree import exponential_first


@settings(max_examples=30, deadline=None)
@given(st.integers(1, 9), st.integers(0, 2**32 - 1))
def test_solutions_and_determinants_equal_lapack(n: int, seed: int) -> None:
    random = np.random.default_rng(seed)
    matrix, right = random.normal(size=(n, n, 40)), random.normal(size=(n, 2, 40))
    order = pivot_order(matrix[..., 0])
    solution, determinant = solve_many(matrix, right, order)
    expected = np.linalg.solve(np.moveaxis(matrix, -1, 0), np.moveaxis(right, -1, 0))
    size = np.abs(expected).max(axis=(1, 2), keepdims=True)
    np.testing.assert_allclose(np.moveaxis(solution, -1, 0) / size, expected / size, atol=1e-6)
    np.testing.assert_allclose(determinant, np.linalg.det(np.moveaxis(matrix, -1, 0)), rtol=1e-6)


def test_a_singular_system_gives_nan_and_leaves_the_others_alone() -> None:
    matrix = np.stack((np.eye(3), np.zeros((3, 3)), 2.0 * np.eye(3)), axis=-1)
    solution, determinant = solve_many(matrix, np.ones((3, 1, 3)), pivot_order(np.eye(3)))
    assert np.isnan(solution[..., 1]).all()
    np.testing.assert_allclose(solution[..., 0], 1.0)
    np.testing.assert_allclose(solution[..., 2], 0.5)
    assert determinant[2] == pytest.approx(8.0)


def test_a_system_for_which_the_pivot_order_is_poor_is_still_solved() -> None:
    typical, awkward = np.diag([4.0, 1.0, 2.0]), np.array([[0.0, 1.0, 0.0], [0.0, 0.0, 1.0], [1.0, 0.0, 0.0]])
    matrix = np.stack((typical, awkward), axis=-1)
    right = np.arange(6.0).reshape(3, 1, 2)
    solution, determinant = solve_many(matrix, right, pivot_order(typical))
    np.testing.assert_allclose(awkward @ solution[:, 0, 1], right[:, 0, 1])
    assert determinant[1] == pytest.approx(1.0)


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
