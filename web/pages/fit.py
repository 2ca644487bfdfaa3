"""A fit to observations as rows: the parameters with their sigmas, how well it fits, the files of the residuals."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from web import display, links
from web.tables import FILE_FORMATS

Rows = tuple[tuple[str, ...], ...]


@dataclass(frozen=True, slots=True)
class FitView:
    """`parameters`: name, value, one sigma, relative sigma.  `correlations`: a table with its names in `names`.

    `files` holds, for each list of observations, what was observed and (format, address) of its table.
    """

    sentence: str
    method: str
    parameters: Rows
    names: tuple[str, ...]
    correlations: Rows
    files: tuple[tuple[str, tuple[tuple[str, str], ...]], ...]


def fit_view(result: Mapping[str, Any], run_id: str) -> FitView | None:
    fit = result.get("observations")
    if not fit:
        return None
    names = tuple(fit["parameters"])
    functional = (result.get("problem") or {}).get("functional") or {}
    return FitView(
        sentence=_sentence(fit),
        method=_method(fit, any(functional.get(term) for term in ("integrand", "endpoint"))),
        parameters=tuple(_row(name, found) for name, found in fit["parameters"].items()),
        names=names if len(names) > 1 else (),
        correlations=_correlations(names, fit["covariance"]),
        files=tuple(
            (measured(found), tuple((f.name, links.observed(run_id, s, number)) for s, f in FILE_FORMATS.items()))
            for number, found in enumerate(fit["lists"], start=1)
        ),
    )


def measured(found: Mapping[str, Any]) -> str:
    """What a list of observations is of."""
    return f"{found['of']} on {found['arc']}" if found.get("arc") else str(found["of"])


def _sentence(fit: Mapping[str, Any]) -> str:
    unit = fit["unit"]
    squares = display.quantity(
        fit["sum_of_squares"], f"({unit})^2" if "/" in unit or "*" in unit else unit and f"{unit}^2"
    )
    if fit["degrees_of_freedom"] is None:
        return (
            f"{fit['points']} observations, sum of squares {squares}. They leave something open: no sigma can be given."
        )
    freedom = display.number(fit["degrees_of_freedom"], 4)
    spread = display.quantity(fit["spread"], unit, 4)
    if fit["sigmas_known"]:
        return (
            f"{fit['points']} observations, sum of squares {squares} over {freedom} degrees of freedom: "
            f"the residuals are {spread} times as large as the given sigmas let expect."
        )
    return (
        f"{fit['points']} observations, sum of squares {squares} over {freedom} degrees of freedom: "
        f"the residuals spread by {spread}."
    )


def _method(fit: Mapping[str, Any], more: bool) -> str:
    scale = "as the given sigmas are" if fit["sigmas_known"] else "as large as the spread of the residuals"
    kind = (
        "the second derivative of all that is minimised" if more else "the slopes of the residuals alone (Gauss-Newton)"
    )
    return f"One sigma each, from {kind} along the linearised conditions, with errors {scale}."


def _row(name: str, found: Mapping[str, Any]) -> tuple[str, ...]:
    value, sigma, unit = found["value"], found["sigma"], found["unit"]
    share = "—" if not sigma or not value else f"{display.number(100 * sigma / abs(value), 2)} %"
    return (
        name,
        display.quantity(value, unit, 9),
        display.quantity(sigma, unit, 4) if sigma is not None else "not known",
        share,
    )


def _correlations(names: tuple[str, ...], covariance: list[list[float | None]] | None) -> Rows:
    """Row by row; a parameter that stands on its bound has none."""
    if covariance is None or len(names) < 2:
        return ()

    def correlation(i: int, j: int) -> str:
        between, first, second = covariance[i][j], covariance[i][i], covariance[j][j]
        if not first or not second or between is None:
            return "—"
        return display.number(between / math.sqrt(first * second), 3)

    return tuple((names[i], *(correlation(i, j) for j in range(len(names)))) for i in range(len(names)))
