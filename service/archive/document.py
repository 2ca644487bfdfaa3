"""A solution as the document that is stored, answered and shown: JSON values only, in the user's units."""

from __future__ import annotations

from collections.abc import Mapping
from functools import cache
from importlib.metadata import PackageNotFoundError, version
from typing import Any

from service.archive.curves import costates_document, curve_document, parameters_document
from service.archive.evidence import (
    check_document,
    diagnosis_document,
    price_document,
    slope_document,
    stretch_document,
    undetermined_document,
)
from service.archive.families import band_document, branch_document, extremal_document, sweep_document
from service.archive.fits import fit_document
from service.archive.units import Units, finite, in_unit
from service.spec import Document
from solvers.problem import Problem
from solvers.solution import MeshStep, Solution
from solvers.units import Unit

FORMAT = 1
NUMERICAL_PARTS = ("curvewright", "casadi", "numpy", "scipy")


def result_document(
    document: Document,
    problem: Problem,
    solution: Solution,
    reading: Mapping[str, Any],
    times: Mapping[str, float],
    *,
    id: str | None = None,
    state: str = "finished",
) -> dict[str, Any]:
    """The result document of `DEVELOPERS.md`.

    `reading` says how the document was understood, `times` are seconds per stage outside the solver.  `id` is the
    run's, None for a solve without a server.
    """
    units = Units(problem)
    return {
        "format": FORMAT,
        "id": id,
        "state": state,
        "problem": document.source,
        "problem_hash": document.canonical_hash(),
        "verdict": solution.verdict.value if solution.verdict else None,
        "value": in_unit(solution.value, problem.value_unit),
        "value_error": in_unit(solution.value_error, problem.value_unit),
        "value_unit": problem.value_unit.text,
        "parameters": parameters_document(solution, units),
        "checks": [check_document(check, problem) for check in solution.checks],
        "curve": curve_document(solution, problem, units),
        "multipliers": {
            "costates": costates_document(solution, problem, units),
            "prices": [price_document(price, problem, units) for price in solution.prices],
        },
        "stretches": [stretch_document(stretch, problem) for stretch in solution.stretches],
        "observations": fit_document(solution, problem, units),
        "extremals": [extremal_document(extremal, problem, units) for extremal in solution.extremals],
        "slopes": [slope_document(slope, problem) for slope in solution.slopes],
        "band": band_document(solution, problem, units),
        "sweep": sweep_document(solution, problem, units),
        "continuation": branch_document(solution, problem),
        "diagnosis": diagnosis_document(solution.diagnosis, problem, units),
        "undetermined": [undetermined_document(one, problem) for one in solution.undetermined],
        "notes": list(solution.notes),
        "reading": dict(reading),
        "provenance": {
            "versions": dict(_versions(NUMERICAL_PARTS)),
            "options": {
                "tolerance": problem.options.tolerance,
                "time_limit": problem.options.time_limit,
                "starts": problem.options.starts,
                "points": problem.options.points,
            },
            "times": {stage: finite(seconds) for stage, seconds in {**times, **solution.times}.items()},
            "iterations": solution.iterations,
            "meshes": [_mesh(step, problem.value_unit) for step in solution.meshes],
        },
    }


def _mesh(step: MeshStep, value_unit: Unit) -> dict[str, Any]:
    return {
        "intervals": step.intervals,
        "points": step.points,
        "lowest_degree": step.lowest_degree,
        "highest_degree": step.highest_degree,
        "value": in_unit(step.value, value_unit),
        "error": finite(step.error),
        "iterations": step.iterations,
        "seconds": finite(step.seconds),
    }


@cache
def _versions(packages: tuple[str, ...]) -> Mapping[str, str]:
    """Read once: it takes longer than the rest of the document."""
    found: dict[str, str] = {}
    for package in packages:
        try:
            found[package] = version(package)
        except PackageNotFoundError:  # an unpacked tree that was never installed
            found[package] = "not installed"
    return found
