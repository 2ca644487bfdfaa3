"""Figures of a result: each a still SVG, a specification for Plotly, a one-sentence finding and some of its values."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from markupsafe import Markup

from web.display import number
from web.figures.branch import branch_plot
from web.figures.plot import Plot, Trace
from web.figures.plots import plots
from web.figures.spec import data_block, spec
from web.figures.svg import svg
from web.figures.sweep import sweep_plots

__all__ = ["Figure", "Plot", "Trace", "branch_figure", "drawn", "figures", "plots", "spec", "svg", "sweep_figures"]


@dataclass(frozen=True, slots=True)
class Figure:
    """A plot ready for a page."""

    key: str
    heading: str
    finding: str
    still: Markup
    data: Markup
    headings: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]


def figures(result: Mapping[str, Any]) -> tuple[Figure, ...]:
    """All figures of a result document."""
    return tuple(drawn(plot) for plot in plots(result))


def sweep_figures(result: Mapping[str, Any]) -> tuple[Figure, ...]:
    """The figures of the sweep of a result document."""
    return tuple(drawn(plot) for plot in sweep_plots(result))


def branch_figure(result: Mapping[str, Any]) -> Figure | None:
    """The figure of the continuation of a result document."""
    plot = branch_plot(result)
    return None if plot is None else drawn(plot)


def drawn(plot: Plot) -> Figure:
    """A plot as picture, data block and short table."""
    return Figure(
        key=plot.key,
        heading=plot.heading,
        finding=plot.finding,
        still=Markup(svg(plot)),  # every text in it is escaped
        data=Markup(data_block(plot)),  # JSON without `<`, `>`, `&`
        headings=plot.table_headings,
        rows=tuple(tuple(number(value) for value in row) for row in plot.table.tolist()),
    )
