"""The solver reaches what is published, says honestly how far it is off, and calls the result what it is."""

from __future__ import annotations

import pytest

from tests.acceptance.catalogue import CATALOGUE, KNOWN_FAILURES
from tests.acceptance.promises import PROMISES, owed


def owing(promise: str) -> list[object]:
    """The cases that owe this promise; known failures have to fail."""
    return [
        pytest.param(
            case,
            id=case.id,
            marks=pytest.mark.xfail(reason=KNOWN_FAILURES[case.id, promise], strict=True)
            if (case.id, promise) in KNOWN_FAILURES
            else (),
        )
        for case in CATALOGUE.values()
        if promise in owed(case)
    ]


@pytest.mark.parametrize("case", owing("value"))
def test_the_published_value_is_reached(case, outcome_of_case):
    assert PROMISES["value"](case, outcome_of_case(case)) == ""


@pytest.mark.parametrize("case", owing("error"))
def test_the_stated_error_bounds_the_true_one(case, outcome_of_case):
    assert PROMISES["error"](case, outcome_of_case(case)) == ""


@pytest.mark.parametrize("case", owing("verdict"))
def test_the_verdict_is_of_the_right_sort(case, outcome_of_case):
    assert PROMISES["verdict"](case, outcome_of_case(case)) == ""


@pytest.mark.parametrize("case", owing("figures"))
def test_the_curve_has_its_published_figures(case, outcome_of_case):
    assert PROMISES["figures"](case, outcome_of_case(case)) == ""
