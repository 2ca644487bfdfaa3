"""When refining is not worth its time any more."""

import numpy as np
import pytest

from solvers.search.record import Pursuit
from solvers.search.settling import out_of_reach
from solvers.solution import MeshStep
from tests.unit.solvers.problems import compiled, regulator, solved_on, stated


def refined(errors, efforts, value_error=1e-3, seconds=4.5):
    pursuit = Pursuit(stated(functional={"integrand": "u^2"}), compiled(regulator()), value_error=value_error)
    pursuit.paths.append(solved_on(regulator()))
    pursuit.steps += [
        MeshStep(8, 1, 4, 4, 1.0, error, effort, seconds) for error, effort in zip(errors, efforts, strict=True)
    ]
    return pursuit


SLOW, GROWING = [0.07, 0.04, 0.026, 0.015], [10, 30, 90, 270]
"""Each mesh leaves 0.6 of the error and takes three times as long: the 18 that the tolerance needs would take years."""


@pytest.mark.parametrize(
    ("errors", "efforts", "seconds", "left", "out"),
    [
        (SLOW, GROWING, 4.5, 50.0, True),
        (SLOW, GROWING, 4.5, 1e12, False),  # for those who have the time
        (SLOW, GROWING, 0.05, 59.0, False),  # hardly begun
        (SLOW, [90] * 4, 4.5, 50.0, False),  # more meshes cost no more
        ([0.07, 0.04, 0.05, 0.015], GROWING, 4.5, 50.0, False),  # no trend
        ([1e-2, 1e-3, 1e-4, 1e-5], GROWING, 4.5, 50.0, False),  # one or two more meshes
        ([7.0, 4.0, 2.6, 1.5], GROWING, 4.5, 50.0, False),  # nothing is seen of the curve yet
        (SLOW[1:], GROWING[1:], 9.0, 50.0, False),  # too few meshes to tell
    ],
)
def test_what_no_time_suffices_for_is_out_of_reach(errors, efforts, seconds, left, out):
    assert out_of_reach(refined(errors, efforts, seconds=seconds), left, 20) is out


def test_where_the_value_is_met_others_say_when_to_stop():
    assert not out_of_reach(refined(SLOW, GROWING, value_error=0.0), 50.0, 20)


def test_few_meshes_more_may_have_the_time():
    seconds = 4.5 * np.array([3.0, 9.0])  # of the next two
    assert out_of_reach(refined(SLOW, GROWING), seconds.sum() / 31, 2)
    assert not out_of_reach(refined(SLOW, GROWING), seconds.sum() / 29, 2)
