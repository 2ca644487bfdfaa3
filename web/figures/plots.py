"""The plots of a result: curve, path, derivatives, multipliers, mesh and error history."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import replace
from typing import Any

import numpy as np

from solvers.curve import Array
from web.display import number, quantity
from web.extremes import extremes_of
from web.figures import findings
from web.figures.labels import bracketed, identifier
from web.figures.observed import observed_plots
from web.figures.plot import Plot, Span, Trace
from web.figures.series import jumps, series
from web.figures.tabulated import tabulated
from web.palette import LINES
from web.trajectory import Trajectory, band, read_changes, read_costates, read_trajectory

LENGTHS = frozenset(("m", "mm", "cm", "km", "um", "µm", "μm", "nm", "dm", "in", "ft", "inch", "foot", "yd", "mi"))
TABLE_ROWS = 9
MOST_ALIKE = 5.0
"""One scale on both axes only where height and width differ by no more than this factor."""

_ORDINALS = ("", "First", "Second", "Third")


def plots(result: Mapping[str, Any]) -> tuple[Plot, ...]:
    """All plots that a result document allows, the most telling first; () where there is no curve and no mesh."""
    trajectory = read_trajectory(result)
    made: list[Plot] = []
    if trajectory is not None:
        made += _path(trajectory)
        made += _functions(trajectory, read_changes(result), result.get("stretches") or ())
        made += _derivatives(trajectory)
        costates = read_costates(result)
        if costates is not None:
            named = {name: f"costate of {name}" for name in trajectory.stored}
            made += _grouped(costates, costates.stored, 0, "costate", "Multipliers", named)
        made += observed_plots(result, trajectory)
    made += tabulated(result.get("problem") or {})
    made += _extremals(result)
    made += _history(result)
    if trajectory is not None:
        made += _mesh(trajectory)
    return tuple(made)


def _functions(
    trajectory: Trajectory, changes: Sequence[Trajectory], stretches: Iterable[Mapping[str, Any]]
) -> Iterable[Plot]:
    singular = [stretch for stretch in stretches if stretch["course"] == "singular"]
    for plot in _grouped(trajectory, trajectory.names, 0, "curve", "Curve"):
        yield _with_spans(_with_bands(plot, changes), singular, trajectory.unit)


def _with_spans(plot: Plot, singular: Sequence[Mapping[str, Any]], unit: str) -> Plot:
    """The plot with the stretches shaded along which one of its lines is a singular control."""
    numbers = {trace.label: trace.number for trace in plot.traces}
    own = [stretch for stretch in singular if stretch["of"] in numbers]
    if not own:
        return plot
    spans = tuple(Span(stretch["from"], stretch["to"], numbers[stretch["of"]]) for stretch in own)
    told = " and ".join(dict.fromkeys(str(stretch["of"]) for stretch in own))
    errors = [stretch[end] for stretch in own for end in ("from_error", "to_error") if stretch.get(end)]
    known = f" (its ends are known to {quantity(max(errors), unit, 2)})" if errors else ""
    return replace(plot, spans=spans, finding=f"{plot.finding} Shaded from top to bottom: {told} runs singular{known}.")


def _with_bands(plot: Plot, changes: Sequence[Trajectory]) -> Plot:
    """The plot with what the tolerances of the constants leave open shaded beside each line."""
    traces = tuple(replace(trace, band=band(changes, trace.label, 0, trace.places)) for trace in plot.traces)
    if all(trace.band is None for trace in traces):
        return plot
    told = f"{plot.finding} Shaded: one standard deviation from the tolerances of the constants."
    return replace(plot, traces=traces, finding=told)


def _derivatives(trajectory: Trajectory) -> Iterable[Plot]:
    """Each derivative that the result stores: what a limit or a smoothness condition may be on."""
    for order in (1, 2, 3):
        stored = [name for name in trajectory.names if name + "'" * order in trajectory.stored]
        yield from _grouped(trajectory, stored, order, f"derivative-{order}", f"{_ORDINALS[order]} derivative")


def _grouped(
    trajectory: Trajectory, names: Iterable[str], order: int, key: str, heading: str, labels: Mapping[str, str] = {}
) -> Iterable[Plot]:
    """One plot for each unit: what is measured alike is drawn together."""
    groups: dict[str, list[str]] = {}
    for name in names:
        groups.setdefault(trajectory.unit_of(name, order), []).append(name)
    for unit, group in groups.items():
        for start in range(0, len(group), len(LINES)):
            some = group[start : start + len(LINES)]
            yield _over_independent(trajectory, some, order, unit, f"{key}-{some[0]}", heading, labels)


def _over_independent(
    trajectory: Trajectory,
    names: list[str],
    order: int,
    unit: str,
    key: str,
    heading: str,
    labels: Mapping[str, str],
) -> Plot:
    traces, told = [], []
    independent = (trajectory.independent, trajectory.unit)
    for count, name in enumerate(names):
        label = labels.get(name, name) + "'" * order
        places, values = series(trajectory, name, order)
        traces.append(Trace(label, places, values, count))
        told.append(
            findings.course(
                label, unit, values, extremes_of(trajectory, name, order), independent, jumps(trajectory, name, order)
            )
        )
    together = ", ".join(trace.label for trace in traces)
    plot = Plot(
        key=identifier(key),
        heading=f"{heading}: {together}",
        finding=findings.sentence(told),
        across=bracketed(*independent),
        up=bracketed(together if len(together) < 30 else "value", unit),
        traces=tuple(traces),
        table=_some_rows(trajectory, [(name, order) for name in names]),
        table_headings=(bracketed(*independent), *(bracketed(trace.label, unit) for trace in traces)),
        equal=key.startswith("curve") and unit == trajectory.unit and unit in LENGTHS,
    )
    return _unless_thin(plot)


def _path(trajectory: Trajectory) -> Iterable[Plot]:
    """The way in the plane, where two unknowns are both lengths in the same unit and all else is not."""
    flat = [name for name in trajectory.names if trajectory.unit_of(name) in LENGTHS]
    if len(flat) != 2 or trajectory.unit in LENGTHS:
        return
    first, second = flat
    unit = trajectory.unit_of(first)
    if trajectory.unit_of(second) != unit or any(arc.coefficients(n) is None for arc in trajectory.arcs for n in flat):
        return
    every = np.union1d(series(trajectory, first)[0], series(trajectory, second)[0])
    shared = trajectory.by_arc(every)
    pair = [np.concatenate([arc.evaluate(name, 0, some) for arc, some in shared]) for name in flat]
    independent = (trajectory.independent, trajectory.unit)
    told = [
        findings.course(name, unit, values, extremes_of(trajectory, name, 0), independent)
        for name, values in zip(flat, pair, strict=True)
    ]
    plot = Plot(
        key="path",
        heading=f"Path: {second} over {first}",
        finding=findings.sentence(told),
        across=bracketed(first, unit),
        up=bracketed(second, unit),
        traces=(Trace(f"{second} over {first}", pair[0], pair[1]),),
        table=_some_rows(trajectory, [(first, 0), (second, 0)]),
        table_headings=(bracketed(*independent), bracketed(first, unit), bracketed(second, unit)),
        equal=True,
    )
    yield _unless_thin(plot)


def _extremals(result: Mapping[str, Any]) -> Iterable[Plot]:
    """Each unknown along all curves that several starts led to, one above the other."""
    found = [(n, e, read_trajectory(e)) for n, e in enumerate(result.get("extremals") or (), start=1)]
    shown = [(number, extremal, path) for number, extremal, path in found if path is not None][: len(LINES)]
    if len(shown) < 2:
        return
    first = shown[0][2]
    for name in first.names:
        traces = [
            Trace(f"{number}: {extremal['verdict'] or 'no verdict'}", *series(path, name), count)
            for count, (number, extremal, path) in enumerate(shown)
        ]
        shares = np.linspace(0, 1, TABLE_ROWS)
        columns = [_at_shares(path, name, shares) for _, _, path in shown]
        unit = first.unit_of(name)
        yield Plot(
            key=identifier(f"extremals-{name}"),
            heading=f"{name} on the curves found",
            finding=f"{name} along {len(shown)} of the {len(found)} curves found, in the order of the list.",
            across=bracketed(first.independent, first.unit),
            up=bracketed(name, unit),
            traces=tuple(traces),
            table=np.column_stack([shares, *columns]),
            table_headings=("share of the range", *(bracketed(trace.label, unit) for trace in traces)),
        )


def _at_shares(path: Trajectory, name: str, shares: Array) -> Array:
    """Values at shares of a curve's own range: free ends differ from curve to curve."""
    places = path.start + shares * (path.end - path.start)
    return np.concatenate([arc.evaluate(name, 0, some) for arc, some in path.by_arc(places)])


def _history(result: Mapping[str, Any]) -> Iterable[Plot]:
    meshes = (result.get("provenance") or {}).get("meshes") or []
    told = [(count, mesh["error"]) for count, mesh in enumerate(meshes, start=1) if (mesh.get("error") or 0) > 0]
    if len(told) < 2:
        return
    table = np.array(told, dtype=float)
    first, last = table[0, 1], table[-1, 1]
    verb = "fell" if last < first else "did not fall: it went"
    yield Plot(
        key="error-history",
        heading="Error of each mesh",
        finding=(
            f"The relative error estimate {verb} from {number(first, 2)} to {number(last, 2)} "
            f"over {len(meshes)} meshes."
        ),
        across="mesh",
        up="relative error estimate",
        traces=(Trace("relative error estimate", table[:, 0], table[:, 1], 1, marked=True),),
        table=table,
        table_headings=("mesh", "relative error estimate"),
        logarithmic=True,
        whole_places=True,
    )


def _mesh(trajectory: Trajectory) -> Iterable[Plot]:
    """Where the intervals are short the curve was hard."""
    edges = np.concatenate([arc.breaks for arc in trajectory.arcs])
    widths = np.concatenate([np.diff(arc.breaks) for arc in trajectory.arcs])
    lefts = np.concatenate([arc.breaks[:-1] for arc in trajectory.arcs])
    if len(widths) < 2:
        return
    shown = np.unique(np.linspace(0, len(widths) - 1, min(len(widths), 1000)).astype(int))
    rows = np.unique(np.linspace(0, len(widths) - 1, min(len(widths), TABLE_ROWS)).astype(int))
    unit = trajectory.unit
    yield Plot(
        key="mesh",
        heading="Mesh",
        finding=_mesh_finding(trajectory, lefts, widths),
        across=bracketed(trajectory.independent, unit),
        up=bracketed("length of the interval", unit),
        traces=(
            Trace(
                "length of the interval",
                np.column_stack([lefts, lefts + widths])[shown].ravel(),
                np.repeat(widths[shown], 2),
            ),
        ),
        table=np.column_stack([lefts, widths])[rows],
        table_headings=(bracketed("interval begins at", unit), bracketed("length", unit)),
        logarithmic=float(widths.max() / widths.min()) > 20,
        from_zero=True,
        rug=edges if len(edges) <= 400 else edges[:: len(edges) // 400 + 1],
    )


def _mesh_finding(trajectory: Trajectory, lefts: Array, widths: Array) -> str:
    shortest, longest = (findings.amount(float(width), trajectory.unit) for width in (widths.min(), widths.max()))
    if shortest == longest:
        return f"{len(widths)} intervals, each {longest} long."
    begin = findings.amount(float(lefts[widths.argmin()]), trajectory.unit)
    return (
        f"{len(widths)} intervals; the shortest is {shortest} long and begins at {trajectory.independent} = {begin}, "
        f"the longest is {longest} long."
    )


def _some_rows(trajectory: Trajectory, columns: list[tuple[str, int]]) -> Array:
    """A few evenly spaced rows over all arcs; at a junction the arc that ends there speaks."""
    shared = trajectory.by_arc(np.linspace(trajectory.start, trajectory.end, TABLE_ROWS))
    return np.concatenate(
        [np.column_stack([some, *(arc.evaluate(name, order, some) for name, order in columns)]) for arc, some in shared]
    )


def _unless_thin(plot: Plot) -> Plot:
    """The same plot with free scales where one scale would squeeze it to a line."""
    if not plot.equal:
        return plot
    left, right, low, high = plot.extent()
    ratio = (high - low) / (right - left)
    if 1 / MOST_ALIKE <= ratio <= MOST_ALIKE:
        return plot
    return replace(plot, equal=False)
