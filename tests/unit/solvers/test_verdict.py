"""Verdicts: nothing is claimed that the checks do not show."""

import itertools

import pytest

from solvers import checks
from solvers.problem import Seek
from solvers.search.record import End
from solvers.solution import Check, Status, Verdict
from solvers.verdict import failures, judge

FIRST = ("motion", "limits", "conditions", "stationarity", "free ends", "first integral", "corners", "refinement")
P, F, N = Status.PASSED, Status.FAILED, Status.NOT_APPLICABLE


def found(**statuses):
    names = {name: Check(name, P, "") for name in checks.NAMES}
    names["convexity"] = Check("convexity", N, "")
    names["lower bound"] = Check("lower bound", N, "")
    for key, status in statuses.items():
        name = {"Legendre": "Legendre"}.get(key, key.replace("_", " "))
        assert name in names
        names[name] = Check(name, status, "")
    return tuple(names.values())


@pytest.mark.parametrize(
    ("seek", "statuses", "verdict"),
    [
        (Seek.MINIMUM, {}, Verdict.LOCAL_MINIMUM),
        (Seek.MAXIMUM, {}, Verdict.LOCAL_MAXIMUM),
        (Seek.STATIONARY, {}, Verdict.STATIONARY),
        (Seek.MINIMUM, {"convexity": P}, Verdict.GLOBAL_MINIMUM),
        (Seek.MAXIMUM, {"convexity": P}, Verdict.GLOBAL_MAXIMUM),
        (Seek.STATIONARY, {"convexity": P}, Verdict.STATIONARY),
        (Seek.MINIMUM, {"conjugate_points": N}, Verdict.STATIONARY),
        (Seek.MINIMUM, {"conjugate_points": N, "convexity": P}, Verdict.GLOBAL_MINIMUM),
        (Seek.MINIMUM, {"conjugate_points": F}, Verdict.NOT_A_MINIMUM),
        (Seek.MAXIMUM, {"conjugate_points": F}, Verdict.NOT_A_MAXIMUM),
        (Seek.MINIMUM, {"Legendre": F}, Verdict.NOT_A_MINIMUM),
        (Seek.MINIMUM, {"Legendre": N}, Verdict.LOCAL_MINIMUM),
        (Seek.STATIONARY, {"Legendre": F}, Verdict.STATIONARY),
        (Seek.MINIMUM, {"Weierstrass": F}, Verdict.NOT_A_MINIMUM),
        (Seek.MAXIMUM, {"Weierstrass": F}, Verdict.NOT_A_MAXIMUM),
        (Seek.MINIMUM, {"corners": F}, Verdict.NOT_VERIFIED),
        (Seek.MINIMUM, {"slope_growth": F}, Verdict.NOT_VERIFIED),
        (Seek.MINIMUM, {"slope_growth": F, "convexity": P}, Verdict.NOT_VERIFIED),
        (Seek.MINIMUM, {"lower_bound": P}, Verdict.GLOBAL_MINIMUM),
        (Seek.MAXIMUM, {"lower_bound": P, "refinement": F, "slope_growth": F}, Verdict.GLOBAL_MAXIMUM),
        (Seek.MINIMUM, {"lower_bound": P, "motion": F}, Verdict.NOT_VERIFIED),
    ],
)
def test_verdict_of_checks(seek, statuses, verdict):
    assert judge(seek, found(**statuses)) is verdict


@pytest.mark.parametrize("name", FIRST)
@pytest.mark.parametrize("seek", Seek)
def test_without_feasibility_or_first_order_nothing_is_verified(name, seek):
    statuses = {"convexity": P, name.replace(" ", "_"): F}
    assert judge(seek, found(**statuses)) is Verdict.NOT_VERIFIED


@pytest.mark.parametrize("name", FIRST)
def test_a_check_that_is_missing_counts_as_failed(name):
    rest = tuple(check for check in found(convexity=P) if check.name != name)
    assert judge(Seek.MINIMUM, rest) is Verdict.NOT_VERIFIED


def test_early_ends():
    assert judge(Seek.MINIMUM, (), End.INFEASIBLE) is Verdict.INFEASIBLE
    assert judge(Seek.MINIMUM, (), End.NOWHERE) is Verdict.NOT_VERIFIED
    assert judge(Seek.MINIMUM, (), End.UNBOUNDED) is Verdict.NO_OPTIMUM
    assert judge(Seek.MINIMUM, found(convexity=P, refinement=F), End.TORN) is Verdict.NO_OPTIMUM
    assert judge(Seek.MINIMUM, found(motion=F), End.TORN) is Verdict.NOT_VERIFIED
    assert judge(Seek.MINIMUM, found(refinement=F, stationarity=F), End.POINTS) is Verdict.BEST_FOUND
    assert judge(Seek.MINIMUM, found(limits=F), End.POINTS) is Verdict.NOT_VERIFIED


SECOND = ("Legendre", "Weierstrass", "conjugate points")
TRIED = ("motion", "stationarity", "refinement", *SECOND, "convexity", "lower bound", "slope growth")
"""The checks that count in different ways; all others count like one of these."""


def test_a_minimum_is_claimed_only_with_everything_that_it_needs():
    """All combinations of statuses: the promise as it stands in the problem format."""
    rest = {name: P for name in checks.NAMES if name not in TRIED}
    for statuses in itertools.product((P, F, N), repeat=len(TRIED)):
        by_name = rest | dict(zip(TRIED, statuses, strict=True))
        verdict = judge(Seek.MINIMUM, tuple(Check(name, status, "") for name, status in by_name.items()))
        bounded = by_name["lower bound"] is P
        if verdict in (Verdict.GLOBAL_MINIMUM, Verdict.LOCAL_MINIMUM):
            assert by_name["motion"] is not F
            assert bounded or all(by_name[name] is not F for name in ("stationarity", "refinement", *SECOND))
        if verdict is Verdict.GLOBAL_MINIMUM:
            assert bounded or by_name["convexity"] is P
        if verdict is Verdict.LOCAL_MINIMUM:
            assert by_name["conjugate points"] is P
            assert by_name["slope growth"] is not F
        if verdict is Verdict.NOT_A_MINIMUM:
            assert F in (by_name[name] for name in SECOND)


def test_failures_keep_their_order():
    named = failures(found(refinement=F, motion=F))
    assert [check.name for check in named] == ["motion", "refinement"]
