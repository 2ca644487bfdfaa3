"""What every result of the catalogue has to keep.  Each promise answers "" or says in one sentence how it is broken."""

from __future__ import annotations

from collections.abc import Callable

from tests.acceptance.records import Case, Sort
from tests.acceptance.solving import Outcome


def value(case: Case, outcome: Outcome) -> str:
    """The published value is reached; where no curve attains it, nothing better than the infimum is claimed."""
    if not case.sort.attained:
        if case.value is None or outcome.value is None:
            return ""
        excess = outcome.value - case.value if case.sort is Sort.SUPREMUM else case.value - outcome.value
        return f"{outcome.value!r} is beyond the limit {case.value!r}" if excess > case.allowed else ""
    if outcome.value is None:
        return f"no value: {outcome.trouble}"
    difference = abs(outcome.value - case.value)
    if difference <= case.allowed:
        return ""
    return f"{outcome.value!r} instead of {case.value!r}: {difference / case.allowed:.3g} times the tolerance away"


def error(case: Case, outcome: Outcome) -> str:
    """The stated error bounds the true one, as far as the published value itself is known."""
    if outcome.value is None or outcome.value_error is None:
        return f"no stated error: {outcome.trouble}"
    difference = abs(outcome.value - case.value)
    rounding = 4e-16 * abs(case.value)
    if difference <= outcome.value_error + case.known_to + rounding:
        return ""
    return f"the true error {difference:.3g} is above the stated {outcome.value_error:.3g}"


def verdict(case: Case, outcome: Outcome) -> str:
    """The result is called what it is."""
    if outcome.verdict in case.sort.value:
        return ""
    right = ", ".join(sorted(verdict.value for verdict in case.sort.value))
    found = outcome.verdict.value if outcome.verdict else "none"
    failed = f" (failed checks: {', '.join(outcome.failed_checks)})" if outcome.failed_checks else ""
    return f"verdict {found} instead of {right}{failed}. {outcome.trouble}".strip()


def figures(case: Case, outcome: Outcome) -> str:
    """Parameters and curve have their published figures."""
    if not outcome.figures and case.figures:
        return f"no figures: {outcome.trouble}"
    wrong = [
        f"{figure.subject}{'' if figure.place is None else f'({figure.place})'} = {found!r} instead of {figure.value!r}"
        for figure, found in zip(case.figures, outcome.figures, strict=True)
        if found is None or not abs(found - figure.value) <= figure.tolerance
    ]
    return "; ".join(wrong)


PROMISES: dict[str, Callable[[Case, Outcome], str]] = {
    "value": value,
    "error": error,
    "verdict": verdict,
    "figures": figures,
}


def owed(case: Case) -> tuple[str, ...]:
    """The promises that make sense for a case."""
    names = ["value"] if case.value is not None else []
    names += ["error"] if case.sort.attained else []
    names += ["verdict"]
    names += ["figures"] if case.figures else []
    return tuple(names)
