"""Observations over the curve that was fitted to them, and what is left between them."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

import numpy as np

from solvers.curve import Array
from web.display import number
from web.figures.findings import amount
from web.figures.labels import bracketed, identifier
from web.figures.plot import NOTHING, Plot, Trace
from web.figures.series import series
from web.trajectory import Trajectory

ROWS = 9
FAR = 3.0
"""A residual beyond so many sigmas is worth a word."""


def observed_plots(result: Mapping[str, Any], trajectory: Trajectory) -> Iterable[Plot]:
    """Two plots for each list of observations; none where there are none."""
    fit = result.get("observations") or {"lists": ()}
    for count, found in enumerate(fit["lists"], start=1):
        yield _over_curve(found, fit, trajectory, count)
        if found["normalised"] is not None:
            yield _residuals(found, fit, trajectory, count)


def _on(found: Mapping[str, Any]) -> str:
    """The arc of a list, where it has one."""
    return f" on {found['arc']}" if found.get("arc") else ""


def _over_curve(found: Mapping[str, Any], fit: Mapping[str, Any], trajectory: Trajectory, count: int) -> Plot:
    places, observed, fitted = (_array(found[name]) for name in ("place", "observed", "fitted"))
    of, unit = str(found["of"]), str(found["unit"])
    name = of.rstrip("'")
    if name in trajectory.names and trajectory.unit_of(name, len(of) - len(name)) == unit:
        curve = series(trajectory, name, len(of) - len(name))
    else:  # a formula: its values are known at the places only
        order = np.argsort(places, kind="stable")
        curve = places[order], fitted[order]
    errors = _errors(found, fit)
    rows = _some(len(places))
    bars = "" if not len(errors) else ", each with one sigma" if fit["sigmas_known"] else ", each with their spread"
    return Plot(
        key=identifier(f"observed-{count}"),
        heading=f"Observations of {of}{_on(found)}",
        finding=f"{len(places)} observed values{bars}, and the curve that was fitted to them.",
        across=bracketed(trajectory.independent, trajectory.unit),
        up=bracketed(of if len(of) < 30 else "value", unit),
        traces=(
            Trace(f"{of}, fitted", *curve),
            Trace(f"{of}, observed", places, observed, 1, marked=True, joined=False, errors=errors),
        ),
        table=np.column_stack([places, observed, fitted])[rows],
        table_headings=(
            bracketed(trajectory.independent, trajectory.unit),
            bracketed("observed", unit),
            bracketed("fitted", unit),
        ),
    )


def _residuals(found: Mapping[str, Any], fit: Mapping[str, Any], trajectory: Trajectory, count: int) -> Plot:
    places, normalised = _array(found["place"]), _array(found["normalised"])
    worst = int(np.argmax(np.abs(normalised)))
    what = "sigma" if fit["sigmas_known"] else "spread"
    far = int((np.abs(normalised) > FAR).sum())
    finding = (
        f"The largest residual is {number(normalised[worst], 3)} {what}s, at {trajectory.independent} = "
        f"{amount(float(places[worst]), trajectory.unit)}; {far or 'none'} of {len(places)} "
        f"{'is' if far == 1 else 'are'} beyond {FAR:g}."
    )
    rows = _some(len(places))
    ends = np.array([trajectory.start, trajectory.end])
    return Plot(
        key=identifier(f"observed-{count}-residuals"),
        heading=f"Residuals of {found['of']}{_on(found)}",
        finding=finding,
        across=bracketed(trajectory.independent, trajectory.unit),
        up=f"residual / {what}",
        traces=(
            Trace("none", ends, np.zeros(2)),
            Trace(f"observed less fitted, over the {what}", places, normalised, 1, marked=True, joined=False),
        ),
        table=np.column_stack([places, normalised])[rows],
        table_headings=(bracketed(trajectory.independent, trajectory.unit), f"residual / {what}"),
    )


def _errors(found: Mapping[str, Any], fit: Mapping[str, Any]) -> Array:
    """One sigma of each value: as given, else the spread of the residuals."""
    if found["sigma"] is not None:
        return _array(found["sigma"])
    return NOTHING if fit["spread"] is None else np.full(len(found["place"]), float(fit["spread"]))


def _array(values: list[float | None]) -> Array:
    return np.array(values, dtype=float)


def _some(count: int) -> Array:
    return np.unique(np.linspace(0, count - 1, min(count, ROWS)).astype(int))
