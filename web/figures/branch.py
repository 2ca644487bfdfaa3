"""The plot of a continuation: the value along a branch, leg by leg, and its folds."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from web.display import quantity
from web.figures.labels import bracketed
from web.figures.plot import Plot, Trace
from web.palette import LINES


def branch_plot(result: Mapping[str, Any]) -> Plot | None:
    """None where no branch of two points was followed."""
    branch = result.get("continuation")
    if not branch or len(branch["points"]) < 2:
        return None
    unit = str(result.get("value_unit") or "")
    way = sorted([*branch["points"], *branch["folds"]], key=lambda p: p["leg"])  # a fold ends the leg it is counted to
    numbers = np.array([(p["at"], p["value"]) for p in way], dtype=float)
    legs = np.array([p["leg"] for p in way])
    traces = []
    for leg in np.unique(legs)[: len(LINES) - 1]:
        own = numbers[legs == leg]
        if leg:  # begins at the fold before
            before = branch["folds"][leg - 1]
            own = np.vstack([[before["at"], before["value"]], own])
        traces.append(Trace(f"leg {leg + 1}", own[:, 0], own[:, 1], int(leg)))
    folds = np.array([(f["at"], f["value"]) for f in branch["folds"]], dtype=float).reshape(-1, 2)
    if len(folds):
        traces.append(Trace("fold", folds[:, 0], folds[:, 1], len(traces), marked=True, joined=False))
    across, up = bracketed(branch["constant"], branch["unit"]), bracketed("value", unit)
    shown = np.unique(np.linspace(0, len(numbers) - 1, min(len(numbers), 9)).round().astype(int))
    return Plot(
        key="continuation",
        heading=f"Branch of solutions over {branch['constant']}",
        finding=_finding(branch, unit),
        across=across,
        up=up,
        traces=tuple(traces),
        table=numbers[shown],
        table_headings=(across, up),
    )


def _finding(branch: Mapping[str, Any], unit: str) -> str:
    told = "; ".join(
        f"{branch['constant']} = {quantity(fold['at'], branch['unit'], 7)}, value {quantity(fold['value'], unit, 7)}"
        for fold in branch["folds"]
    )
    if not told:
        return f"No fold was met. {branch['end']}"
    return f"The branch folds at {told}: beyond it, two solutions have met and vanished. {branch['end']}"
