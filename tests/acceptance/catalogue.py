"""The catalogue of published problems: what the solver has to reach, each value with its source."""

from __future__ import annotations

from tests.acceptance import controls, hybrids, suites, variations
from tests.acceptance.records import Case

CATALOGUE: dict[str, Case] = {
    case.id: case for case in (*variations.CASES, *controls.CASES, *hybrids.CASES, *suites.CASES)
}
"""All cases by id, in order."""


KNOWN_FAILURES: dict[tuple[str, str], str] = {
    ("A56a", "verdict"): "the length of the fin may change freely to second order (the third derivative of the least "
    "volume by it is not zero, and beyond the best length only y >= 0 holds): no second variation can decide it",
}
"""Promises that are not kept yet: (case, promise) -> reason.  A promise is "value", "error", "verdict" or "figures"."""
