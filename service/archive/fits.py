"""A fit to observations as JSON."""

from __future__ import annotations

from typing import Any

import numpy as np

from service.archive.units import Units, finite, in_unit, numbers
from solvers.curve import Array
from solvers.problem import Problem
from solvers.solution import Fitted, Solution
from solvers.units import PLAIN, Unit


def fit_document(solution: Solution, problem: Problem, units: Units) -> dict[str, Any] | None:
    """The fit to observations; a covariance is in the units of its two parameters."""
    fit = solution.fit
    if fit is None:
        return None
    first = fit.observations[0].unit
    own = PLAIN if fit.weighted else first
    names = [name for name in fit.names if name in solution.parameters]
    kept = [fit.names.index(name) for name in names]
    matrix = None
    if fit.covariance is not None:
        sizes = np.array([units.parameter(name).factor for name in names])
        matrix = fit.covariance[np.ix_(kept, kept)] / sizes[:, None] / sizes
    return {
        "points": fit.points,
        "sigmas_known": fit.weighted,
        "sum_of_squares": finite(fit.squares / own.factor**2),
        "degrees_of_freedom": finite(fit.freedom),
        "spread": in_unit(fit.spread, own),
        "unit": own.text,
        "parameters": {
            name: {
                "value": in_unit(solution.parameters[name], units.parameter(name)),
                "sigma": None if matrix is None else finite(float(np.sqrt(max(matrix[k, k], 0.0)))),
                "unit": units.parameter(name).text,
            }
            for k, name in enumerate(names)
        },
        "covariance": None if matrix is None else [[finite(float(v)) for v in row] for row in matrix],
        "lists": [_fitted(fitted, problem) for fitted in fit.observations],
    }


def _fitted(fitted: Fitted, problem: Problem) -> dict[str, Any]:
    unit = fitted.unit

    def column(values: Array | None, of: Unit = unit) -> list[float | None] | None:
        return None if values is None else numbers(values, of)

    return {
        "of": fitted.label,
        "arc": fitted.arc,
        "pointer": fitted.pointer,
        "unit": unit.text,
        "place": column(fitted.places, problem.independent_unit),
        "observed": column(fitted.observed),
        "fitted": column(fitted.fitted),
        "residual": column(fitted.observed - fitted.fitted),
        "sigma": column(fitted.sigma),
        "normalised": column(fitted.normalised, PLAIN),
        "fitted_sigma": column(fitted.fitted_sigma),
    }
