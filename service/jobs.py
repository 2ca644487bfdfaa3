"""What a worker does with a run: read, assemble (where the server has not), solve, write the result document.

Imports the solver with CasADi: for workers and for `curvewright solve`, never for the web process.
"""

from __future__ import annotations

import math
import pickle
import time
import traceback
from collections.abc import Callable, Mapping
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from functools import cache
from typing import Any

from pydantic_core import to_json

from service.archive import result_document
from service.assemble import assemble
from service.engine.beside import Beside
from service.reading import read_back, with_necessary
from service.run import State
from service.spec import Document, read
from service.thinning import Report, thinned
from solvers.problem import Problem
from solvers.solution import Progress
from solvers.solve import solve as solve_problem
from solvers.starts.together import IN_TURN, Together

Stop = Callable[[], bool]

_BESIDE = ThreadPoolExecutor(1, "beside")
"""The thread for what is done beside a solve."""

_FIGURES = ("verdict", "value", "value_error", "value_unit")


def perform(
    document_text: str,
    report: Report,
    stop: Stop,
    *,
    id: str | None = None,
    longest: float = math.inf,
    together: Together = IN_TURN,
) -> dict[str, Any]:
    """Solve a problem document; the result document.

    `report` takes the progress events of the developers' guide, `stop()` is True once the solver shall stop with what
    it has.  `longest` bounds the document's own time limit, in seconds; `together` does the
    tasks of several starts.  Raises Refused.
    """
    began = time.perf_counter()
    document = read(document_text.encode())
    return _performed(document, assemble(document), report, stop, id, longest, began, together)


def _performed(
    document: Document,
    problem: Problem,
    report: Report,
    stop: Stop,
    id: str | None,
    longest: float,
    began: float,
    together: Together,
) -> dict[str, Any]:
    """The result document of an assembled problem; `began` is when reading it did."""
    limit = min(problem.options.time_limit, longest)
    problem = replace(problem, options=replace(problem.options, time_limit=limit))
    ready = time.perf_counter()

    # The reading is written while the optimiser computes, which leaves Python for most of its time; begun earlier, it
    # would only delay what is done in Python before.
    reading = cache(lambda: _BESIDE.submit(_reading, document, problem))
    told = False

    def watch(progress: Progress) -> bool:
        nonlocal told
        reading()
        report(progress_event(progress, problem))
        told = told or stop()
        return told

    solution = solve_problem(problem, watch, together)
    understood = reading().result()
    state = State.STOPPED if told else State.FINISHED
    times = {"read": ready - began}
    return result_document(document, problem, solution, understood, times, id=id, state=state.value)


def solve(head: Mapping[str, Any], body: bytes, report: Report, stop: Stop) -> tuple[Mapping[str, Any], bytes]:
    """`perform` as a slot's child calls it: the figures for the list of runs, and the result as JSON text.

    `body` is the document as text, or what came of it where the server has assembled it just now (`records.packed`).
    """
    began = time.perf_counter()
    if head.get("assembled"):
        document, problem = pickle.loads(body)
    else:
        document = read(body)
        problem = assemble(document)
    result = _performed(document, problem, thinned(report), stop, head["id"], head["time_limit"], began,
                        Beside(head.get("processes", 1)))  # fmt: skip
    figures = {name: result[name] for name in _FIGURES}
    stopped = result["state"] == State.STOPPED.value
    return {"figures": figures, "stopped": stopped}, to_json(result, inf_nan_mode="null")


def progress_event(progress: Progress, problem: Problem) -> dict[str, Any]:
    """A sign of life in the user's units, as JSON."""
    value = _number(progress.value, problem.value_unit.factor)
    if progress.point is not None:
        return {"kind": "point", "point": progress.point[0], "of": progress.point[1], "value": value}
    event: dict[str, Any] = {
        "kind": progress.kind,
        "start": progress.start,
        "mesh": progress.mesh,
        "intervals": progress.intervals,
        "points": progress.points,
        "value": value,
    }
    if progress.kind == "iteration":
        event |= {"iteration": progress.iteration, "infeasibility": _number(progress.infeasibility)}
    else:
        breaks = progress.breaks or ()
        event |= {
            "error": _number(progress.error),
            "breaks": [place / problem.independent_unit.factor for place in breaks],
        }
    return event


def _reading(document: Document, problem: Problem) -> dict[str, Any]:
    """How the document was understood, with its necessary conditions; these are not worth losing a solution."""
    reading = read_back(problem, document)
    try:
        return with_necessary(reading, problem)
    except Exception as error:
        traceback.print_exception(error)
        note = f"The necessary conditions are left out because of an error in their derivation ({error!r})."
        return {**reading, "notes": [*reading["notes"], note]}


def _number(value: float | None, unit: float = 1.0) -> float | None:
    """In units of `unit`; None for what JSON cannot say."""
    return None if value is None or not math.isfinite(value) else value / unit
