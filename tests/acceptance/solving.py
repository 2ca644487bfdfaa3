"""Solves a problem document as a user's would be, in a process of its own with a time limit: a crash is an outcome."""

from __future__ import annotations

import multiprocessing
import os
import time
from collections.abc import Mapping
from dataclasses import dataclass, field
from math import nan
from multiprocessing.connection import Connection
from pathlib import Path
from random import Random

from service.threads import ONE_THREAD
from solvers.solution import Solution, Status, Verdict
from tests.acceptance.records import Figure
from tests.acceptance.restating import CHANGES, Restated

os.environ.update(ONE_THREAD)
PROCESSES = multiprocessing.get_context("forkserver")
PROCESSES.set_forkserver_preload(["service.assemble", "solvers.solve", __name__])

SHARES = (0.1, 0.35, 0.62, 0.9)
"""Where curves are compared, as shares of their range."""


@dataclass(frozen=True, slots=True)
class Outcome:
    """What came of one document, in its own units.  `figures` are in the order in which they were asked for."""

    verdict: Verdict | None = None
    value: float | None = None
    value_error: float | None = None
    figures: tuple[float | None, ...] = ()
    failed_checks: tuple[str, ...] = ()
    iterations: int = 0
    meshes: int = 0
    seconds: float = 0.0
    trouble: str = ""
    samples: Mapping[str, tuple[float, ...]] = field(default_factory=dict)
    """By unknown, its values (SI) at `SHARES` of the whole range; NaN where an arc lacks it."""


def solve_document(
    document: Path,
    figures: tuple[Figure, ...] = (),
    seconds: float = 240.0,
    change: str = "",
) -> Outcome:
    """Solve in a process of its own; end it after `seconds`.

    `change` states the problem in another way first (`restating.CHANGES`); what is told is of the problem as it stands.
    """
    began = time.perf_counter()
    receiver, sender = PROCESSES.Pipe(duplex=False)
    child = PROCESSES.Process(target=_send_outcome, args=(sender, document, figures, change), daemon=True)
    child.start()
    sender.close()
    try:
        if receiver.poll(seconds):
            return receiver.recv()
        trouble = f"no end after {seconds:g} s"
    except EOFError:
        child.join()
        trouble = f"the process died, exit {child.exitcode}"
    finally:
        child.kill()
        child.join()
    return Outcome(trouble=trouble, seconds=time.perf_counter() - began)


def _send_outcome(sender: Connection, document: Path, figures: tuple[Figure, ...], change: str) -> None:
    try:
        sender.send(outcome_of(document, figures, change))
    except Exception as error:  # whatever happens is an outcome of this document, not of the test run
        place = error.__traceback__
        while place and place.tb_next:
            place = place.tb_next
        where = f" ({Path(place.tb_frame.f_code.co_filename).name}:{place.tb_lineno})" if place else ""
        sender.send(Outcome(trouble=f"{type(error).__name__}: {error}{where}"))


def outcome_of(document: Path, figures: tuple[Figure, ...] = (), change: str = "") -> Outcome:
    """Read, assemble and solve in this process; raises what these raise."""
    from service.assemble import assemble
    from service.spec import read
    from solvers.solve import solve

    problem = assemble(read(document.read_bytes()))
    restated = CHANGES[change](problem, Random(document.stem + change)) if change else Restated(problem)
    began = time.perf_counter()
    solution = solve(restated.problem)
    seconds = time.perf_counter() - began

    factors = {unknown.name: unknown.unit.factor for unknown in problem.unknowns}
    parameter_factors = {parameter.name: parameter.unit.factor for parameter in problem.parameters}
    step = problem.independent_unit.factor

    def figure(asked: Figure) -> float | None:
        if asked.place is None:
            found = solution.parameters.get(asked.subject)
            return None if found is None else found / parameter_factors[asked.subject]
        curves = [solution.curve] if solution.curve is not None else [arc.curve for arc in solution.arcs]
        if not curves:
            return None
        place = curves[-1].breaks[-1] if asked.place == "end" else float(asked.place) * step
        rounding = 1e-9 * abs(curves[-1].breaks[-1] - curves[0].breaks[0])  # a junction that was found belongs to it
        curve = next(curve for curve in curves if place <= curve.breaks[-1] + rounding or curve is curves[-1])
        name = asked.subject.rstrip("'")
        primes = len(asked.subject) - len(name)
        known = asked.subject in curve.functions
        value = curve.evaluate(asked.subject if known else name, [place], 0 if known else primes)[0]
        return float(value) / factors[name] * step**primes

    def in_units(value: float | None) -> float | None:
        return None if value is None else float(value) / problem.value_unit.factor

    value, value_error = solution.value, solution.value_error
    return Outcome(
        verdict=solution.verdict,
        value=in_units(None if value is None else restated.value * value),
        value_error=in_units(None if value_error is None else abs(restated.value) * value_error),
        figures=tuple(figure(asked) for asked in figures),
        failed_checks=tuple(check.name for check in solution.checks if check.status is Status.FAILED),
        iterations=solution.iterations,
        meshes=len(solution.meshes),
        seconds=seconds,
        trouble=solution.diagnosis.sentence if solution.diagnosis else "",
        samples=_samples(solution, restated),
    )


def _samples(solution: Solution, restated: Restated) -> dict[str, tuple[float, ...]]:
    """The curve at shares of its range, in the variables of the problem as it was stated first."""
    curves = [solution.curve] if solution.curve is not None else [arc.curve for arc in solution.arcs]
    if not curves:
        return {}
    first, last = curves[0].breaks[0], curves[-1].breaks[-1]
    found = {}
    for unknown in restated.problem.unknowns:
        values = []
        for share in SHARES:
            place = first + (1 - share if restated.turned else share) * (last - first)
            curve = next((curve for curve in curves if place <= curve.breaks[-1]), curves[-1])
            known = unknown.name in curve.functions
            values.append(float(curve.evaluate(unknown.name, [place])[0]) if known else nan)
        found[unknown.name] = tuple(restated.sizes.get(unknown.name, 1.0) * value for value in values)
    return found
