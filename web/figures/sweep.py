"""The plots of a sweep: the value over a constant, and the curves of some of its points together."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from typing import Any

import numpy as np

from solvers.curve import Array
from web.display import quantity
from web.figures import findings
from web.figures.labels import bracketed, identifier
from web.figures.plot import Plot, Trace
from web.figures.series import series
from web.palette import LINES
from web.trajectory import Trajectory, read_sweep

MOST_MARKED = 60
TABLE_ROWS = 9


def sweep_plots(result: Mapping[str, Any]) -> tuple[Plot, ...]:
    """All plots of the sweep of a result document; () where there is none."""
    sweep = result.get("sweep")
    if not sweep:
        return ()
    return (_values(sweep, str(result.get("value_unit") or "")), *_curves(result, sweep))


def _values(sweep: Mapping[str, Any], unit: str) -> Plot:
    """The value over the last constant; with two constants a line for some values of the first."""
    *outer, inner = sweep["constants"]
    places = np.array(inner["values"], dtype=float)
    values = np.array([point["value"] for point in sweep["points"]], dtype=float).reshape(-1, len(places))
    rows = _spread(len(values), len(LINES))
    labels = [_label(outer[0], outer[0]["values"][row]) for row in rows] if outer else ["value"]
    marked = len(places) <= MOST_MARKED
    shown = _spread(len(places), TABLE_ROWS)
    across, up = bracketed(inner["name"], inner["unit"]), bracketed("value", unit)
    return Plot(
        key="sweep-value",
        heading=f"Value over {inner['name']}",
        finding=_finding(sweep, values.ravel(), unit),
        across=across,
        up=up,
        traces=tuple(
            Trace(label, places, values[row], count, marked=marked)
            for count, (label, row) in enumerate(zip(labels, rows, strict=True))
        ),
        table=np.column_stack([places[shown], values[rows][:, shown].T]),
        table_headings=(across, *(labels if outer else (up,))),
    )


def _finding(sweep: Mapping[str, Any], values: Array, unit: str) -> str:
    """Where the value is least and greatest, and how many points have one."""
    there = np.flatnonzero(np.isfinite(values))
    if not len(there):
        return "No point has a value."
    least, greatest = there[values[there].argmin()], there[values[there].argmax()]
    told = [f"The value is least, {findings.amount(float(values[least]), unit)}, at {_at(sweep, int(least))}"]
    told.append(f"and greatest, {findings.amount(float(values[greatest]), unit)}, at {_at(sweep, int(greatest))}")
    missing = len(values) - len(there)
    return f"{' '.join(told)}." + (f" {missing} of {len(values)} points have no value." if missing else "")


def _curves(result: Mapping[str, Any], sweep: Mapping[str, Any]) -> Iterator[Plot]:
    """One plot for each unknown, with the curves of all points that have been kept."""
    curves = read_sweep(result)
    if len(curves) < 2:
        return
    first = curves[0][1]
    for name in first.names:
        traces, rows = [], []
        for count, (index, trajectory) in enumerate(curves[: len(LINES)]):
            if name not in trajectory.names:
                continue
            traces.append(Trace(_at(sweep, index), *series(trajectory, name), count))
            rows.append(_ends(trajectory, name, sweep["points"][index]["at"]))
        across = bracketed(first.independent, first.unit)
        unit = first.unit_of(name)
        swept = " and ".join(constant["name"] for constant in sweep["constants"])
        yield Plot(
            key=f"sweep-curve-{identifier(name)}",
            heading=f"{name} for values of {swept}",
            finding=f"{name} over {first.independent} for {len(traces)} points of the sweep.",
            across=across,
            up=bracketed(name, unit),
            traces=tuple(traces),
            table=np.array(rows),
            table_headings=(
                *(bracketed(constant["name"], constant["unit"]) for constant in sweep["constants"]),
                bracketed(f"lowest {name}", unit),
                bracketed(f"highest {name}", unit),
            ),
        )


def _ends(trajectory: Trajectory, name: str, at: Sequence[float]) -> list[float]:
    values = series(trajectory, name)[1]
    return [*at, float(np.nanmin(values)), float(np.nanmax(values))]


def _at(sweep: Mapping[str, Any], index: int) -> str:
    """`l = 4.2 m`: the constants of a point."""
    at = sweep["points"][index]["at"]
    return ", ".join(_label(constant, value) for constant, value in zip(sweep["constants"], at, strict=True))


def _label(constant: Mapping[str, Any], value: float) -> str:
    return f"{constant['name']} = {quantity(value, constant['unit'], 4)}"


def _spread(count: int, most: int) -> list[int]:
    """So many indices, evenly spread from first to last."""
    spread = np.linspace(0, count - 1, min(count, most)).round().astype(int)
    return [int(index) for index in np.unique(spread)]
