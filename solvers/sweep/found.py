"""What a sweep takes from a single solve, and gives to it."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

from solvers.deadline import Deadline
from solvers.forms.gauge import Form, Gauged
from solvers.problem import Problem
from solvers.search.record import Pursuit
from solvers.solution import Check, Solution


@dataclass(frozen=True, slots=True)
class Found:
    """The pursuit of the form in which a problem was solved; `gauged` says how where that is parametric.

    `work` is the processor time in seconds that it took, where somebody needs to know.
    """

    pursuit: Pursuit
    gauged: Gauged | None
    work: float = float("inf")


@dataclass(frozen=True, slots=True)
class Tools:
    """What a sweep needs of a single solve: to solve a problem from the start, and to judge what was found."""

    alone: Callable[[Problem, Deadline], Found]
    judge: Callable[[Problem, Found, bool, Mapping[str, Check]], Solution]
    """With the curve where it is True, and with the checks that need not be made."""
    fits: Callable[[Problem, Found], bool]  # whether a point's form says the same as its problem
    form: Form  # the parametric one
