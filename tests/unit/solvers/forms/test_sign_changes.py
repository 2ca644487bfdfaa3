"""Where functions of one variable change their sign, to the last digit."""

import math

import numpy as np
import pytest

from solvers.forms.sign_changes import UndefinedError, sign_changes

EPS = np.finfo(float).eps


@pytest.mark.parametrize(
    "function, roots",
    [
        (lambda t: t - 0.3, [0.3]),
        (lambda t: t - 0.5, [0.5]),  # on the grid
        (lambda t: t**3 - 0.01, [0.01 ** (1 / 3)]),
        (lambda t: np.sin(20 * np.pi * t), [k / 20 for k in range(1, 20)]),
        (lambda t: (t - 0.4) * (t - 0.400001), [0.4, 0.400001]),  # both within one step of the grid
        (lambda t: np.abs(t - 0.5) - 0.125, [0.375, 0.625]),
        (lambda t: np.where(t < math.pi / 10, -1.0, 2.0), [math.pi / 10]),  # a jump
    ],
)
def test_every_one_is_found_to_machine_accuracy(function, roots):
    found = [t for t in sign_changes(function, 0.0, 1.0) if 1e-12 < t < 1 - 1e-12]
    apart = [t for k, t in enumerate(found) if k == 0 or t - found[k - 1] > 1e-12]
    assert apart == pytest.approx(roots, abs=4 * EPS if len(roots) != 2 else 1e-13)


def test_zero_is_a_sign_of_its_own():
    """max(0, t - 1/4) is zero up to 1/4 and then positive."""
    (at,) = sign_changes(lambda t: np.maximum(t - 0.25, 0.0), 0.0, 1.0)
    assert at == pytest.approx(0.25, abs=EPS)


def test_where_it_only_touches_zero_nothing_changes():
    assert sign_changes(lambda t: (t - 0.3) ** 2 + 1e-12, 0.0, 1.0) == []


def test_a_function_without_a_value_is_said():
    with np.errstate(invalid="ignore"), pytest.raises(UndefinedError):
        sign_changes(lambda t: np.sqrt(t - 0.5), 0.0, 1.0)
