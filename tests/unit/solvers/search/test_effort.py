"""The minimiser on behalf of a pursuit: what is done where a search stalls."""

import numpy as np
import pytest

from solvers.deadline import FOREVER
from solvers.minimise.ipopt import Minimum, Outcome, Start
from solvers.search.effort import NEWTON_STEPS, UNHURRIED, Minimiser
from solvers.search.record import Pursuit
from tests.unit.solvers.problems import compiled, program_of, regulator

LONG, SOLVED, FAILED = Outcome.ITERATIONS, Outcome.SOLVED, Outcome.FAILED


class Scripted(Minimiser):
    """Ends as it is told, and remembers what it was asked for."""

    def __init__(self, outcomes):
        super().__init__(Pursuit(regulator(), compiled(regulator())), None, FOREVER)
        self.outcomes, self.asked = iter(outcomes), []

    def __call__(self, program, start, options=None):
        self.asked.append((start.multipliers is not None, (options or {}).get("ipopt.max_iter")))
        size = len(program.lower)
        return Minimum(next(self.outcomes), np.zeros(size), 0.0, np.zeros(size), np.zeros(program.rows.count),
                       0, 0.0, 0.0, "")  # fmt: skip


FIRST, NEAR, AFRESH = (False, UNHURRIED), (True, NEWTON_STEPS), (False, None)


@pytest.mark.parametrize(
    "outcomes, options, asked",
    [
        ([SOLVED], {}, [FIRST]),
        ([FAILED], {}, [FIRST]),
        ([LONG, SOLVED], {}, [FIRST, NEAR]),
        ([LONG, LONG, SOLVED], {}, [FIRST, NEAR, AFRESH]),
        ([LONG, FAILED, SOLVED], {}, [FIRST, NEAR, AFRESH]),
        ([LONG, LONG], {"ipopt.max_iter": 7}, [(False, 7), NEAR]),  # whoever sets a limit means it
    ],
)
def test_a_search_that_stalls_is_continued_by_newtons_steps_and_else_goes_on(outcomes, options, asked):
    program = program_of(regulator())
    minimiser = Scripted(outcomes)
    ended = minimiser.patiently(program, Start(np.zeros(len(program.lower))), options)
    assert minimiser.asked == asked
    assert ended.outcome is outcomes[-1]
