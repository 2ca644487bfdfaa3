"""`abs` and `max` in the integrand written exactly, where that is possible: by an unknown that bounds them from above.

The integral of |u| is least together with the integral of s over all s with s >= u and s >= -u.  That holds for terms
that are added with a positive weight to what is minimised (or subtracted from what is maximised); elsewhere such
functions are rounded instead.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

from solvers.formula.nodes import Call, Name, Node, Number, Product, Sum, walk
from solvers.observations import terminal
from solvers.problem import Condition, Problem, Seek, Unknown

SLACK = "slack"
"""What the names of the added unknowns begin with; a blank follows, so that no user can write one."""

ROUNDED = {"abs", "min", "max", "sign"}


def with_slacks(problem: Problem) -> Problem:
    """The problem with its positive terms of `abs` and `max` in slack form; the same problem where there are none."""
    if problem.integrand is None or problem.seek is Seek.STATIONARY:
        return problem
    values = {c.name: c.value for c in problem.constants}
    integrand = problem.integrand
    terms = integrand.terms if isinstance(integrand, Sum) else (integrand,)
    minus = integrand.minus if isinstance(integrand, Sum) else (False,)
    wanted = problem.seek is Seek.MAXIMUM  # the sign with which a term has to stand
    unknowns, constraints, changed = list(problem.unknowns), list(problem.constraints), []
    for term, negative in zip(terms, minus, strict=True):
        kink = _kink(term, values) if negative is wanted else None
        if kink is None:
            changed.append(term)
            continue
        slack = Name(f"{SLACK} {len(unknowns) - len(problem.unknowns) + 1}")
        unknowns.append(Unknown(slack.name, 0))
        constraints += _above(slack, kink)
        changed.append(_replaced(term, kink, slack))
    if len(unknowns) == len(problem.unknowns):
        return problem
    whole = Sum(tuple(changed), minus) if isinstance(integrand, Sum) else changed[0]
    return replace(problem, integrand=whole, unknowns=tuple(unknowns), constraints=tuple(constraints))


def _kink(term: Node, values: dict[str, float]) -> Call | None:
    """The one `abs` or `max` of a term whose other factors are positive numbers."""
    if isinstance(term, Call):
        return term if term.function in ("abs", "max") else None
    if not isinstance(term, Product):
        return None
    kinks = [factor for factor, over in zip(term.factors, term.over, strict=True) if _kink_alone(factor) and not over]
    others = [factor for factor in term.factors if not _kink_alone(factor)]
    positive = all(
        (isinstance(factor, Number) and factor.value > 0)
        or (isinstance(factor, Name) and values.get(factor.name, 0.0) > 0)
        for factor in others
    )
    kink = kinks[0] if len(kinks) == 1 and len(others) == len(term.factors) - 1 and positive else None
    return kink if isinstance(kink, Call) else None


def _kink_alone(factor: Node) -> bool:
    return isinstance(factor, Call) and factor.function in ("abs", "max")


def _above(slack: Name, kink: Call) -> Iterator[Condition]:
    """The slack is not below any branch."""
    zero = Number(0.0, "0")
    branches = [(argument, True) for argument in kink.arguments]
    if kink.function == "abs":
        branches.append((kink.arguments[0], False))
    for argument, subtracted in branches:
        yield Condition(Sum((slack, argument), (False, subtracted)), zero, None, f"{kink.function} from above", "")


def _replaced(term: Node, kink: Call, slack: Name) -> Node:
    if term is kink or not isinstance(term, Product):
        return slack
    return replace(term, factors=tuple(slack if factor is kink else factor for factor in term.factors))


def rounded_functions(problem: Problem) -> set[str]:
    """The functions with kinks that are left in the formulas of a problem and so are rounded."""
    trees = [tree for tree in (problem.integrand, terminal(problem)) if tree is not None]
    trees += [tree for _, tree in problem.where] + [c.body for c in problem.constraints]
    trees += [c.body for c in (*problem.endpoints, *problem.integrals)]
    trees += [side for equation in problem.dynamics for side in (equation.left, equation.right)]
    return {node.function for tree in trees for node in walk(tree) if isinstance(node, Call)} & ROUNDED
