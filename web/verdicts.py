"""What a verdict, a reason and a check mean, in sentences that claim no more than was shown."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

_MEANINGS = {
    "global minimum": "No admissible curve gives a smaller value: the problem is convex over the region of its bounds, "
    "or the value is the least that the integrand allows.",
    "local minimum": "No neighbouring curve gives a smaller value: the first- and second-order conditions hold. "
    "A better curve far from this one is not ruled out.",
    "global maximum": "No admissible curve gives a greater value: the problem is concave over the region of its "
    "bounds, or the value is the greatest that the integrand allows.",
    "local maximum": "No neighbouring curve gives a greater value: the first- and second-order conditions hold. "
    "A better curve far from this one is not ruled out.",
    "stationary": "To first order no small change of the curve changes the value. Whether the value is least, greatest "
    "or neither is not shown.",
    "not a minimum": "The curve is stationary, but a neighbouring curve gives a smaller value.",
    "not a maximum": "The curve is stationary, but a neighbouring curve gives a greater value.",
    "not verified": "The solver ended with this curve, but it did not stand up to its checks. Do not take it for an "
    "optimum.",
    "best found": "A limit was reached before the search ended. This is the best curve until then; nothing is claimed "
    "about how much better one could be.",
    "infeasible": "No curve meets all conditions at once: some of them contradict each other.",
    "no optimum": "As the mesh is refined the value runs away or the curve degenerates: as it is stated the problem "
    "has no optimum.",
}

VERDICTS = tuple(_MEANINGS)
"""All that a result may be called."""

_REASONS = {
    "infeasible": ("No curve meets all conditions", "Loosen or drop {one} and solve again."),
    "no curve found": (
        "No curve was found that meets all conditions",
        "Loosen or drop {one}, or give a guess that comes near to a curve, and solve again.",
    ),
    "undefined": ("A formula has no value or no finite derivatives where the search begins", ""),
    "out of time": ("The time limit ended the search", ""),
    "out of reach": ("Finer meshes hardly help", ""),
    "finest mesh": ("The mesh cannot get finer", ""),
    "stopped": ("Stopped before the end", "Edit the problem or solve it again as it is."),
    "unbounded": ("The value runs away", ""),
    "degenerates": (
        "The curve degenerates",
        "A limit on the slope, or a cost that grows faster with it, keeps it whole.",
    ),
    "wiggles": (
        "The curve would have to wiggle ever faster",
        "A cost on how fast it changes, or one that is convex in the slope, gives it rest.",
    ),
    "runs away": ("The curve runs away", "A bound, or one more condition, may be missing."),
    "no progress": ("The search got stuck", ""),
    "points limit": ("The mesh reached its limit before the tolerance", ""),
    "failed": (
        "The run failed",
        "Solve it again, perhaps with a looser tolerance or fewer points. If it fails again, the hash of the problem "
        "below says which problem it was.",
    ),
}
"""Reason -> heading, and advice where the sentence of the diagnosis gives none; `one` is what would have to give."""

_CHECKS = {
    "motion": "dynamics integrated again from the stored controls, interval by interval",
    "limits": "bounds and pointwise constraints between the nodes",
    "conditions": "endpoint, junction and integral conditions by independent quadrature",
    "stationarity": "Euler-Lagrange or costate equations off the nodes",
    "free ends": "transversality and natural boundary conditions",
    "first integral": "what must stay constant along the curve",
    "corners": "the Hamiltonian on both sides of every corner (Weierstrass, Erdmann)",
    "Weierstrass": "other values of the controls, however far (excess function)",
    "lower bound": "the best that the integrand can be, by interval arithmetic",
    "slope growth": "whether a slope grows without bound, where curves of bounded slope may miss the best value",
    "Legendre": "sign of the second derivative in the free controls",
    "conjugate points": "second variation over the whole curve",
    "convexity": "joint convexity over the region of the bounds",
    "refinement": "value and curve on successive meshes",
    "other starts": "what other starts found",
}


def verdict_sentence(verdict: str | None, checks: Sequence[Mapping[str, Any]]) -> str:
    """What the verdict means; the failed checks are named where they are the reason."""
    meaning = _MEANINGS.get(verdict or "", "There is no verdict: the run ended before anything could be shown.")
    failed = [str(check["name"]) for check in checks if check["status"] == "failed"]
    if failed and verdict in ("not verified", "not a minimum", "not a maximum"):
        meaning += f" Failed: {', '.join(failed)}."
    return meaning


def reason_heading(reason: str, conflicts: int = 1) -> tuple[str, str]:
    """Heading and advice for the reason of a diagnosis with so many conflicts; an unknown reason is said as it is."""
    heading, advice = _REASONS.get(reason, (f"No full result: {reason}" if reason else "No full result", ""))
    one = "one condition of each conflict" if conflicts > 1 else "one of these conditions"
    return heading, advice.format(one=one)


def check_method(name: str) -> str:
    """By what independent method a check works; "" for an unknown one."""
    return _CHECKS.get(name, "")


def tally(checks: Sequence[Mapping[str, Any]]) -> str:
    """`8 checks passed, 1 failed, 2 do not apply.`"""
    counts = {status: sum(check["status"] == status for check in checks) for status in ("passed", "failed")}
    rest = len(checks) - sum(counts.values())
    parts = [f"{counts['passed']} passed"]
    if counts["failed"]:
        parts.append(f"{counts['failed']} failed")
    if rest:
        parts.append(f"{rest} {'does' if rest == 1 else 'do'} not apply")
    return f"Of {len(checks)} checks {', '.join(parts)}."
