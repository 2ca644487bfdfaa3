"""`abs`, `max` and `min` in the integrand written exactly, where that is possible: by an unknown that bounds them.

The integral of |u| is least together with the integral of s over all s with s >= u and s >= -u.  That holds for terms
that are to be small: added to what is minimised with a positive weight, or subtracted from what is maximised.  Where a
term is to be large, the same holds for min(a, b) with s <= a and s <= b.  Elsewhere such functions are rounded.
"""

from __future__ import annotations

from dataclasses import replace

from solvers.formula.nodes import Call, Name, Negative, Node, Number, Product, Sum
from solvers.problem import Condition, Problem, Seek, Unknown
from solvers.transcription.functions import SMOOTHING

SLACK = "slack"
"""What the names of the added unknowns begin with; a blank follows, so that no user can write one."""


def with_slacks(problem: Problem) -> Problem:
    """The problem with such terms of its integrand in slack form; the same problem where there are none."""
    if problem.integrand is None or problem.seek is Seek.STATIONARY:
        return problem
    slacks = _Slacks(problem)
    integrand = slacks.exact(problem.integrand, problem.seek is Seek.MINIMUM)
    if not slacks.unknowns:
        return problem
    unknowns, constraints = (*problem.unknowns, *slacks.unknowns), (*problem.constraints, *slacks.constraints)
    return replace(problem, integrand=integrand, unknowns=unknowns, constraints=constraints)


class _Slacks:
    """The unknowns and constraints that stand for functions with kinks."""

    def __init__(self, problem: Problem) -> None:
        self.unknowns: list[Unknown] = []
        self.constraints: list[Condition] = []
        self._constants = {c.name: c.value for c in problem.constants}
        self._sizes = {use: width / SMOOTHING for use, width in problem.widths}

    def exact(self, tree: Node, least: bool) -> Node:
        """A part of the integrand with its kinks replaced; `least` says that what it is worth is to be small."""
        match tree:
            case Call(function="abs" | "max") if least:
                return self._slack(tree, above=True)
            case Call(function="min") if not least:
                return self._slack(tree, above=False)
            case Negative(operand=operand):
                return replace(tree, operand=self.exact(operand, not least))
            case Sum(terms=terms, minus=minus):
                parts = (self.exact(term, least is not negative) for term, negative in zip(terms, minus, strict=True))
                return replace(tree, terms=tuple(parts))
            case Product(factors=factors, over=over):
                given = [self._given(factor) for factor in factors]
                others = [k for k, value in enumerate(given) if value is None]
                if len(others) == 1 and not over[others[0]] and 0.0 not in given:
                    turned = sum(value < 0 for value in given if value is not None) % 2 == 1
                    part = self.exact(factors[others[0]], least is not turned)
                    return replace(tree, factors=(*factors[: others[0]], part, *factors[others[0] + 1 :]))
        return tree

    def _given(self, factor: Node) -> float | None:
        """The value of a factor that is a number, a constant or the opposite of one."""
        match factor:
            case Number(value=value):
                return value
            case Name(name=name):
                return self._constants.get(name)
            case Negative(operand=operand):
                opposite = self._given(operand)
                return None if opposite is None else -opposite
        return None

    def _slack(self, kink: Call, above: bool) -> Name:
        """The unknown that is nowhere below, or nowhere above, any branch of a kink."""
        slack = Name(f"{SLACK} {len(self.unknowns) + 1}")
        size = self._sizes.get(kink)
        guess = None if size is None else Number(size if above else -size, "")
        self.unknowns.append(Unknown(slack.name, 0, guess=guess))
        branches = [(argument, True) for argument in kink.arguments]
        if kink.function == "abs":
            branches.append((kink.arguments[0], False))
        zero = Number(0.0, "0")
        lower, upper, side = (zero, None, "above") if above else (None, zero, "below")
        for argument, subtracted in branches:
            body = Sum((slack, argument), (False, subtracted))
            self.constraints.append(Condition(body, lower, upper, f"{kink.function} from {side}", ""))
        return slack
