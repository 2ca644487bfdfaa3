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

HARD: dict[str, str] = {
    "B26": "singular arc in free time: whether the second variation is decided depends on the time left",
    "B34": "many switches around a singular arc",
    "C12": "the limit on curvature binds on arcs of the second derivative, which is free: the time is over first",
    "C15": "a narrow path over peaks: the time is over before the mesh is fine enough",
    "C16a": "many short arcs on which limits of controls and speeds bind in turn",
    "C19": "ten arcs of seven states beside each other: many variables on each mesh",
    "C16b": "without a cost of control most arcs are singular, between many limits that bind in turn",
}
"""Cases that take too long to promise a result on any machine -> why.  They get little time and owe only "honesty"."""

HARD_SECONDS = 15.0
"""The time limit of a hard case."""
