"""Functions at many sets of inputs."""

import casadi as ca
import numpy as np
import pytest

from solvers.transcription.evaluation import CHUNK, Evaluation, mapped, whole_chunks


def _product() -> ca.Function:
    v, d = ca.SX.sym("v", 2), ca.SX.sym("d")
    return ca.Function("product", [v, d], [ca.vertcat(v[0] * v[1] + d, v[0] - d)])


@pytest.mark.parametrize("count", [1, 2, CHUNK - 1, CHUNK, CHUNK + 1, 3 * CHUNK])
def test_every_set_of_inputs_has_its_own_outputs(count):
    v, d = np.random.default_rng(1).normal(size=(count, 2)), np.arange(count, dtype=float)
    found = mapped(_product(), v, d[:, None])
    np.testing.assert_array_equal(found, np.stack([v[:, 0] * v[:, 1] + d, v[:, 0] - d], axis=1))


def test_a_function_without_outputs_makes_none():
    v = ca.SX.sym("v", 2)
    assert mapped(ca.Function("nothing", [v], [ca.SX(0, 1)]), np.zeros((3, 2))).shape == (3, 0)


def test_an_evaluation_reads_what_its_inputs_are_now():
    v, d = whole_chunks(np.ones((CHUNK + 3, 2))), np.zeros((2 * CHUNK, 1))
    made = np.zeros((2 * CHUNK, 2))
    evaluate = Evaluation(_product(), [v, d], made)
    evaluate()
    np.testing.assert_array_equal(made[:, 0], 1.0)
    v[CHUNK + 2] = 3.0, 4.0
    evaluate()
    np.testing.assert_array_equal(made[CHUNK + 2], [12.0, 3.0])


@pytest.mark.parametrize(("count", "filled"), [(1, 1), (2, CHUNK), (CHUNK, CHUNK), (CHUNK + 1, 2 * CHUNK)])
def test_chunks_are_filled_up_by_the_first_row(count, filled):
    rows = np.arange(count)[:, None] + 7
    np.testing.assert_array_equal(whole_chunks(rows)[:, 0], [*(7 + np.arange(count)), *[7] * (filled - count)])
