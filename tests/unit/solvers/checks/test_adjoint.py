"""Costate equations integrated anew, against closed forms."""

import numpy as np
import pytest

from solvers.checks.adjoint import integrate, steps_through
from solvers.checks.sampling import HALVES

STEPS = steps_through(HALVES)
LENGTH = np.array([0.2, 0.4])


def stages():
    """The places of the stages of both intervals, each in a variable of its own (N x S)."""
    return LENGTH[:, None] * STEPS.stages


def from_the_right():
    """How far each edge is from the right end (N x E)."""
    return LENGTH[:, None] * (1 - STEPS.edges)


def test_without_states_in_the_rates_the_costate_is_an_integral():
    """p' = -cos t from p = 3 at the right end."""
    source = np.cos(stages())[:, :, None]
    found = integrate(STEPS, np.zeros((2, source.shape[1], 1, 1)), source, LENGTH, np.full((2, 1), 3.0))
    wanted = 3 + np.sin(LENGTH)[:, None] - np.sin(LENGTH[:, None] * STEPS.edges)
    assert found[:, :, 0] == pytest.approx(wanted, abs=1e-12)


def test_a_constant_rate_makes_an_exponential():
    """p' = -(a p + b) with a = 0.7 and b = 0.2, from p = 1 at the right end."""
    count = stages().shape[1]
    matrix, source = np.full((2, count, 1, 1), 0.7), np.full((2, count, 1), 0.2)
    found = integrate(STEPS, matrix, source, LENGTH, np.ones((2, 1)))
    wanted = (1 + 0.2 / 0.7) * np.exp(0.7 * from_the_right()) - 0.2 / 0.7
    assert found[:, :, 0] == pytest.approx(wanted, rel=1e-10)


def test_two_costates_turn_about_each_other():
    """The rates x' = w y, y' = -w x have p' = -(A' p): a rotation."""
    rate = 1.3
    matrix = np.broadcast_to([[0.0, rate], [-rate, 0.0]], (2, stages().shape[1], 2, 2))
    found = integrate(STEPS, matrix, np.zeros(matrix.shape[:3]), LENGTH, np.tile([1.0, 0.0], (2, 1)))
    angle = rate * from_the_right()
    assert found[:, :, 0] == pytest.approx(np.cos(angle), abs=1e-10)
    assert found[:, :, 1] == pytest.approx(np.sin(angle), abs=1e-10)


def test_the_steps_look_the_same_from_both_ends():
    """So an interval may be turned round."""
    assert STEPS.edges + STEPS.edges[::-1] == pytest.approx(np.ones(len(STEPS.edges)), abs=1e-15)
    assert STEPS.edges[STEPS.wanted] == pytest.approx(HALVES, abs=1e-15)
