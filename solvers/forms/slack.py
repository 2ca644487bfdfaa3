"""`abs`, `max` and `min` in the integrand written exactly, where that is possible: by an unknown that bounds them.

The integral of |u| is least together with the integral of s over all s with s >= u and s >= -u.  That holds for terms
that are to be small: added to what is minimised with a positive weight, or subtracted from what is maximised.  Where a
term is to be large, the same holds for min(a, b) with s <= a and s <= b.  Elsewhere such functions are rounded.

The absolute value of a free slope that nothing else bends is the sum of its rise and of its fall, neither of which is
negative: where the sum is as small as can be one of them is zero, and they switch as controls with limits do.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from solvers.forms.affine import linear_by_parts
from solvers.forms.signs import interval
from solvers.formula.algebra import ZERO
from solvers.formula.nodes import Call, Name, Negative, Node, Number, Power, Product, Sum, walk
from solvers.problem import Condition, Equation, Problem, Seek, Unknown
from solvers.transcription.functions import ROUNDED, SMOOTHING
from solvers.transcription.lowering import primed, simple_bound

SLACK = "slack"
"""What the names of the added unknowns begin with; a blank follows, so that no user can write one."""


def with_slacks(problem: Problem, parted: bool = True) -> Problem:
    """The problem with such terms of its integrand in slack form; the same problem where there are none.

    `parted` says whether absolute values of slopes may be taken in two parts.
    """
    if problem.integrand is None or problem.seek is Seek.STATIONARY:
        return problem
    slacks = _Slacks(problem, parted)
    integrand = slacks.exact(problem.integrand, problem.seek is Seek.MINIMUM)
    if not slacks.unknowns:
        return problem
    return replace(
        problem,
        integrand=integrand,
        unknowns=(*problem.unknowns, *slacks.unknowns),
        constraints=(*problem.constraints, *slacks.constraints),
        dynamics=(*problem.dynamics, *slacks.dynamics),
    )


class _Slacks:
    """The unknowns and constraints that stand for functions with kinks."""

    def __init__(self, problem: Problem, parted: bool) -> None:
        self.unknowns: list[Unknown] = []
        self.constraints: list[Condition] = []
        self.dynamics: list[Equation] = []
        self._problem = problem
        free = {(u.name, u.order) for u in problem.unknowns if u.order or not np.isfinite([u.lower, u.upper]).any()}
        free -= {simple_bound(condition) for condition in problem.constraints}
        free -= {line.determines for line in problem.dynamics}
        self._slopes = {one for one in free if parted and linear_by_parts(problem.integrand or ZERO, problem, one)}
        self._sizes = {use: width / SMOOTHING for use, width in problem.widths}

    def exact(self, tree: Node, least: bool) -> Node:
        """A part of the integrand with its kinks replaced; `least` says that what it is worth is to be small."""
        match tree:
            case Call(function="abs", arguments=(Name(name=name, order=order),)) if (
                least and (name, order) in self._slopes
            ):
                return self._parts(name, order)
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
                kinked = [k for k, factor in enumerate(factors) if _has_kink(factor)]
                signs = [self._sign(factor) for k, factor in enumerate(factors) if k not in kinked]
                if len(kinked) == 1 and not over[kinked[0]] and 0 not in signs:
                    turned = sum(sign < 0 for sign in signs) % 2 == 1
                    part = self.exact(factors[kinked[0]], least is not turned)
                    return replace(tree, factors=(*factors[: kinked[0]], part, *factors[kinked[0] + 1 :]))
            case Power(base=Product() as base, exponent=Number(value=value)) if value > 0 and self._sign(base) > 0:
                return replace(tree, base=self.exact(base, least))
        return tree

    def _sign(self, factor: Node) -> int:
        """1 where a formula is proved to be nowhere negative, -1 where it is nowhere positive; 0 where neither, or
        where it is zero."""
        low, high = interval(factor, self._problem)
        return int(high > 0 and low >= 0) - int(low < 0 and high <= 0)

    def _parts(self, name: str, order: int) -> Sum:
        """The absolute value of a free slope as that of its rise and of its fall."""
        self._slopes.discard((name, order))
        first = len(self.unknowns) + 1
        rise, fall = (Name(f"{SLACK} {first + k}") for k in range(2))
        self.unknowns += [Unknown(part.name, 0, 0.0) for part in (rise, fall)]
        label = f"{primed((name, order))} up and down"
        self.dynamics.append(
            Equation(Name(name, order), Sum((rise, fall), (False, True)), (name, order) if order else None, label, "")
        )
        return Sum((rise, fall), (False, False))

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


def _has_kink(tree: Node) -> bool:
    return any(isinstance(node, Call) and node.function in ROUNDED for node in walk(tree))
