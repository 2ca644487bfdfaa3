"""Matrices as entries at places."""

import numpy as np

from solvers.checks.scattered import both_triangles, scattered

TWICE = scattered((2, 3), np.array([0, 1, 0]), np.array([2, 0, 2]), np.array([1.0, 4.0, 2.5]))


def test_entries_at_the_same_place_are_added():
    wanted = [[0.0, 0.0, 3.5], [4.0, 0.0, 0.0]]
    assert TWICE.dense().tolist() == TWICE.sparse().toarray().tolist() == wanted


def test_a_matrix_without_entries_is_zero():
    nothing = scattered((2, 2), np.zeros(0, int), np.zeros(0, int), np.zeros(0))
    assert nothing.dense().dtype == float
    assert not nothing.dense().any()


def test_an_undefined_entry_is_seen():
    assert TWICE.finite
    assert not scattered((1, 1), np.array([0]), np.array([0]), np.array([np.nan])).finite


def test_the_lower_triangle_mirrors_the_upper_one():
    upper = scattered((2, 2), np.array([0, 0]), np.array([0, 1]), np.array([1.0, 2.0]))
    assert both_triangles(upper).dense().tolist() == [[1.0, 2.0], [2.0, 0.0]]


def test_the_sum_is_that_of_the_full_matrices():
    other = scattered((2, 3), np.array([1, 0]), np.array([0, 1]), np.array([2.0, -1.0]))
    assert np.array_equal(TWICE.plus(other, 3.0).dense(), TWICE.dense() + 3.0 * other.dense())
