"""What a sweep needs of a single solve."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

from solvers.deadline import Deadline
from solvers.forms.choice import Found
from solvers.forms.gauge import Form
from solvers.problem import Problem
from solvers.solution import Check, Solution


@dataclass(frozen=True, slots=True)
class Tools:
    """What a sweep needs of a single solve: to solve a problem from the start, and to judge what was found."""

    alone: Callable[[Problem, Deadline], Found]
    judge: Callable[[Problem, Found, bool, Mapping[str, Check]], Solution]
    """With the curve where it is True, and with the checks that need not be made."""
    fits: Callable[[Problem, Found], bool]  # whether a point's form says the same as its problem
    off_saddle: Callable[[Problem, Found, Solution, Deadline], Found | None]  # what lies beside it, if that is one
    form: Form  # the parametric one
