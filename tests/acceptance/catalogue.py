"""The catalogue of published problems: what the solver has to reach, each value with its source."""

from __future__ import annotations

from tests.acceptance import controls, suites, variations
from tests.acceptance.records import Case

CATALOGUE: dict[str, Case] = {case.id: case for case in (*variations.CASES, *controls.CASES, *suites.CASES)}
"""All cases by id, in order."""

KNOWN_FAILURES: dict[tuple[str, str], str] = {}
"""Promises that are not kept yet: (case, promise) -> reason.  A promise is "value", "error", "verdict" or "figures"."""
