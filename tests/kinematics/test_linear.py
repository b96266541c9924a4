"""Many small systems at once, against LAPACK one by one."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from knucklepath.kinematics.linear import pivot_order, solve_many


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


@settings(max_examples=30, deadline=None)
@given(st.integers(2, 7), st.integers(0, 2**32 - 1))
def test_the_sign_of_the_determinant_is_that_of_the_permutations(n: int, seed: int) -> None:
    """A permutation matrix has determinant +1 or −1, whatever order of elimination is asked for."""
    random = np.random.default_rng(seed)
    shuffled = np.eye(n)[random.permutation(n)]
    # an order found on a matrix whose greatest entries stand elsewhere
    order = pivot_order(random.normal(size=(n, n)) + 10.0 * shuffled)
    solution, determinant = solve_many(shuffled[..., None], np.eye(n)[..., None], order)
    np.testing.assert_allclose(determinant, np.linalg.det(shuffled))
    np.testing.assert_allclose(solution[..., 0], shuffled.T, atol=1e-15)


def test_the_order_takes_the_greatest_entry_first() -> None:
    order = pivot_order(np.array([[0.0, 3.0, 0.0], [0.0, 0.0, 7.0], [2.0, 0.0, 0.0]]))
    assert order.rows.tolist() == [1, 0, 2]
    assert order.columns.tolist() == [2, 1, 0]
    np.testing.assert_allclose(order.pivots, [7.0, 3.0, 2.0])


@pytest.mark.parametrize("where", [(0, 0), (0, 1), (1, 0), (1, 1)])
def test_a_system_that_is_not_a_number_leaves_the_others_alone(where: tuple[int, int]) -> None:
    matrix = np.repeat(np.diag([1.0, 2.0])[..., None], 2, axis=-1)
    matrix[(*where, 0)] = np.nan
    solution, determinant = solve_many(matrix, np.ones((2, 1, 2)), pivot_order(np.eye(2)))
    assert np.isnan(solution[:, 0, 0]).any()
    assert np.isnan(determinant[0])
    np.testing.assert_allclose(solution[:, 0, 1], [1.0, 0.5])


def test_matrix_and_right_side_are_left_as_they_were_and_the_work_space_is_used() -> None:
    random = np.random.default_rng(5)
    matrix, right = random.normal(size=(4, 4, 10)), random.normal(size=(4, 2, 10))
    before = matrix.copy(), right.copy()
    order, work = pivot_order(matrix[..., 0]), np.full((4, 9, 10), np.nan)
    given, anew = solve_many(matrix, right, order, work), solve_many(matrix, right, order)
    np.testing.assert_array_equal(given[0], anew[0])
    np.testing.assert_array_equal(given[1], anew[1])
    np.testing.assert_array_equal(matrix, before[0])
    np.testing.assert_array_equal(right, before[1])
    assert np.isfinite(work[:, :6]).all()


def test_no_systems_at_all_have_no_solutions() -> None:
    solution, determinant = solve_many(np.empty((3, 3, 0)), np.empty((3, 2, 0)), pivot_order(np.eye(3)))
    assert solution.shape == (3, 2, 0)
    assert determinant.shape == (0,)
