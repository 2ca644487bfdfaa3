"""Why there is no full result, in the terms of the problem."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import replace

from solvers import checks
from solvers.minimise.elastic import broken
from solvers.search.record import End, Pursuit
from solvers.solution import Check, Diagnosis, Finding, Status

KEPT = "The best curve so far is kept"
NOTHING_KEPT = "No best curve had been found by then"

OUT_OF_TIME = f"The time limit was reached before the tolerance. {KEPT}."

BLOCKED = (
    f"A finer mesh could not be solved from the curve of the one before. {KEPT}. "
    "A guess nearer to the curve, bounds on the unknowns or a simpler version of the problem may help."
)

CUT_SHORT = (End.TIME.value, End.FAR.value, End.POINTS.value, End.STOPPED.value, End.FAILED.value)
COARSE = 0.1
"""Relative error of a mesh that has hardly anything of the curve."""
HARDLY = 1.5
"""How many times the error has to fall from mesh to mesh for more time to help."""
ASTRAY = 1e-6
"""How far, relative to the sizes of states, the dynamics may be missed."""
MOST_BROKEN = 3
"""Most conditions that the sentence names with how far they are broken."""
NAMED = 6
"""Most conditions of a conflict that the sentence names; the findings have all."""

_SENTENCES = {
    End.POINTS: f"The limit on points was reached before the tolerance. {KEPT}; the curve may "
    "have more corners or layers than `solve.points` allows.",
    End.FAR: "Finer meshes bring the curve nearer to the tolerance so slowly that the time limit would not suffice "
    f"many times over. {KEPT}.",
    End.FINEST: "Where the curve is not smooth the mesh is as fine as numbers can tell its breaks apart, and the "
    f"tolerance is not reached. {KEPT}, with the error of its value as it is stated.",
    End.STOPPED: f"The run was stopped. {KEPT}.",
    End.UNBOUNDED: "The value runs away: within the conditions it can be made better without limit, so there is no "
    "optimum. A bound on an unknown or one more condition may be missing.",
    End.TORN: "The curve degenerates: the better it gets, the nearer it comes to one that is no continuous function; "
    "the value is approached but not attained.",
    End.WIGGLES: "The value is approached but not attained: the faster a slope or a control changes to and fro between "
    "two values, the better. Shown is the curve that such curves tend to.",
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
        sentence = f"A formula has no value, or no finite derivatives, on any of the default guesses{named}."
        sentence += " A guess or a bound that avoids it helps."
    else:
        sentence = OUT_OF_TIME if pursuit.end is End.TIME else _SENTENCES[pursuit.end]
        if pursuit.end is End.FAILED and pursuit.blocked:
            sentence = BLOCKED
        if not pursuit.solved:
            sentence = sentence.replace(KEPT, NOTHING_KEPT)
        if pursuit.end in (End.TIME, End.FAR):
            sentence = f"{sentence} {_what_helps(pursuit)}"
        if not pursuit.solved and pursuit.last is not None and pursuit.end in (End.TIME, End.STOPPED):
            findings, astray = broken(pursuit.last[0], pursuit.last[1].z)
            sentence = f"{sentence} {_not_met(pursuit, findings, astray)}"
    return Diagnosis(pursuit.end.value, sentence, findings)


def _undefined(finding: Finding) -> str:
    """What has no value or no finite derivatives, and where."""
    place = "" if finding.place is None else f" at {finding.place:.6g}"
    return f"'{finding.label}'{place} ({finding.note})"


def with_feasibility(diagnosis: Diagnosis | None, made: Iterable[Check]) -> Diagnosis | None:
    """The diagnosis of a search that was cut short, with what its curve does not meet."""
    failed = [
        check.sentence
        for check in made
        if check.name in checks.FEASIBLE and check.status is Status.FAILED and check.figure is not None
    ]
    if diagnosis is None or diagnosis.reason not in CUT_SHORT or not failed:
        return diagnosis
    return replace(
        diagnosis, sentence=f"{diagnosis.sentence} The curve that is kept is not feasible yet: {' '.join(failed)}"
    )


def _what_helps(pursuit: Pursuit) -> str:
    """What would help a pursuit that had too little time, by what was seen of it."""
    errors = [step.error for step in pursuit.steps if step.error]
    if not pursuit.solved or not errors:
        begun = f" after {pursuit.iterations} iterations" if pursuit.iterations else ""
        return (f"The first mesh was not through{begun}: a `guess` near the curve, bounds on the unknowns or a simpler "
                "version of the problem help most, else a greater `solve.time_limit`.")  # fmt: skip
    if len(errors) == 1:
        return (f"One mesh was solved, in {pursuit.iterations} iterations, with a relative error of {errors[0]:.1e}: a "
                "`guess` near the curve shortens that; else raise `solve.time_limit`.")  # fmt: skip
    if errors[-1] > COARSE:
        return (f"The {len(errors)} meshes so far are too coarse for this curve (relative error {errors[-1]:.1e}): "
                "raise `solve.time_limit` several times, or try a shorter range first.")  # fmt: skip
    factor = (errors[0] / errors[-1]) ** (1 / (len(errors) - 1))
    if factor < HARDLY or pursuit.end is End.FAR:
        fallen = (
            "hardly fallen" if factor < HARDLY else f"fallen {factor:.2g} times from mesh to mesh at growing effort"
        )
        return (f"The relative error has {fallen} over {len(errors)} meshes ({errors[0]:.1e}, now "
                f"{errors[-1]:.1e}), so that more time alone may not do: loosen `solve.tolerance`, or look whether "
                "the curve has corners or layers that the problem could name as places, or a control that has to "
                "jump ever more often.")  # fmt: skip
    left = max(1, math.ceil(math.log(errors[-1] / pursuit.problem.options.tolerance) / math.log(factor)))
    meshes = f"{left} more mesh{'es' if left > 1 else ''}"
    return (f"The relative error fell {factor:.2g} times from mesh to mesh and is {errors[-1]:.1e} now: about {meshes} "
            f"would do, the last one took {pursuit.steps[-1].seconds:.2g} s. Raise `solve.time_limit`.")  # fmt: skip


def _not_met(pursuit: Pursuit, findings: tuple[Finding, ...], astray: float) -> str:
    """What the curve that was reached by then does not meet."""
    named = [_with_amount(pursuit, finding) for finding in findings[:MOST_BROKEN]]
    if astray > ASTRAY:
        named.append(f"the dynamics by {astray:.2g} of their size")
    if not named:
        return "What was reached by then meets all conditions, but is not the best yet."
    return f"What was reached by then is not feasible; it misses {'; '.join(named)}."


def _of_conflicts(pursuit: Pursuit) -> str:
    """Which conditions cannot hold together, or were not found to, and what is known of that."""
    proved = pursuit.end is End.INFEASIBLE
    begin = "No curve satisfies" if proved else "No curve was found, from several starts, that satisfies"
    sets = [_listed(conflict) for conflict in pursuit.conflicts]
    sentence = f"{begin} {sets[0]}." if sets else f"{begin} all conditions together."
    sentence += "".join(f" Nor {other}." for other in sets[1:])
    if any(len(conflict) > 1 for conflict in pursuit.conflicts):
        whose = "" if len(sets) == 1 else " of a conflict"
        sentence += (f" Without any one of them the others{whose} can be met; the amounts say how far each would have "
                     "to give alone.")  # fmt: skip
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
