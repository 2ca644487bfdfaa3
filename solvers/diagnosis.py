"""Why there is no full result, in the terms of the problem."""

from __future__ import annotations

from solvers.search.record import End, Pursuit
from solvers.solution import Diagnosis, Finding

KEPT = "The best curve so far is kept"
NOTHING_KEPT = "No curve had been found by then"

MOST_BROKEN = 3
"""Most conditions that the sentence names with how far they are broken."""
NAMED = 6
"""Most conditions of a conflict that the sentence names; the findings have all."""

_SENTENCES = {
    End.TIME: f"The time limit was reached before the tolerance. {KEPT}; raise "
    "`solve.time_limit`, loosen `solve.tolerance` or give a guess.",
    End.POINTS: f"The limit on points was reached before the tolerance. {KEPT}; the curve may "
    "have more corners or layers than `solve.points` allows.",
    End.STOPPED: f"The run was stopped. {KEPT}.",
    End.UNBOUNDED: "The value runs away: within the conditions it can be made better without limit, so there is no "
    "optimum. A bound on an unknown or one more condition may be missing.",
    End.TORN: "The curve degenerates: the better it gets, the nearer it comes to one that is no continuous function; "
    "the value is approached but not attained.",
    End.AWAY: "The value is approached but not attained: it gets no worse the farther the curve goes, so there is no "
    "optimum. A bound or one more condition may be missing.",
    End.FAILED: "No further progress was possible from any of the default guesses. A guess of your own, bounds on the "
    "unknowns or a simpler version of the problem may help.",
}


def diagnose(pursuit: Pursuit) -> Diagnosis | None:
    """The diagnosis of a pursuit that ended early; None where it converged or settled."""
    if pursuit.end in (End.CONVERGED, End.SETTLED):
        return None
    findings = pursuit.findings
    if pursuit.end in (End.INFEASIBLE, End.NOWHERE):
        sentence = _of_conflicts(pursuit)
    elif pursuit.end is End.UNDEFINED:
        named = "".join(f": {_undefined(finding)}" for finding in findings[:1])
        sentence = f"A formula has no value, or no derivative, on any of the default guesses{named}."
        sentence += " A guess or a bound that avoids it helps."
    else:
        sentence = _SENTENCES[pursuit.end]
        if not pursuit.solved:
            sentence = sentence.replace(KEPT, NOTHING_KEPT)
    return Diagnosis(pursuit.end.value, sentence, findings)


def _undefined(finding: Finding) -> str:
    """What has no value or no derivative, and where."""
    place = "" if finding.place is None else f" at {finding.place:.6g}"
    return f"'{finding.label}'{place} ({finding.note})"


def _of_conflicts(pursuit: Pursuit) -> str:
    """Which conditions cannot hold together, or were not found to, and what is known of that."""
    proved = pursuit.end is End.INFEASIBLE
    begin = "No curve satisfies" if proved else "No curve was found, from several starts, that satisfies"
    sets = [_listed(conflict) for conflict in pursuit.conflicts]
    sentence = f"{begin} {sets[0]}." if sets else f"{begin} all conditions together."
    sentence += "".join(f" Nor {other}." for other in sets[1:])
    if any(len(conflict) > 1 for conflict in pursuit.conflicts):
        sentence += (
            " Without any one of them the others can be met; the amounts say how far each would have to give alone."
        )
    broken = "; ".join(_with_amount(pursuit, finding) for finding in pursuit.broken[:MOST_BROKEN])
    if broken and not (proved and sets):
        sentence += f" The least that has to give{'' if proved else ' near the best that was found'}: {broken}."
    return sentence if proved else f"{sentence} That there is none is not proved; one elsewhere is not excluded."


def _with_amount(pursuit: Pursuit, finding: Finding) -> str:
    """A condition and how far it is broken, in its unit."""
    problem = pursuit.problem
    units = {condition.pointer: condition.unit for condition in problem.conditions}
    units |= {f"/unknowns/{u.name}/within": u.unit for u in problem.unknowns}
    units |= {f"/parameters/{p.name}/within": p.unit for p in problem.parameters}
    unit = units.get(finding.pointer)
    if finding.amount is None or unit is None:
        return f"'{finding.label}'"
    return f"'{finding.label}' by {finding.amount / unit.factor:.3g}{' ' if unit.text else ''}{unit.text}"


def _listed(conflict: tuple[Finding, ...]) -> str:
    """The conditions of one conflict, in words."""
    labels = list(dict.fromkeys(f"'{finding.label}'" for finding in conflict))
    if len(labels) > NAMED:
        labels[NAMED - 1 :] = [f"{len(labels) - NAMED + 1} more conditions"]
    together = "both" if len(labels) == 2 else "all of"
    return labels[0] if len(labels) == 1 else f"{together} {', '.join(labels[:-1])} and {labels[-1]}"
