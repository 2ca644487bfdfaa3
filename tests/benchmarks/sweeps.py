"""What a point of a sweep costs, as a share of a solve of its own: smooth problems, and some with many switches.

What the crucible's limits do to it changes with its distance: within the range here two switches go and come.
"""

from __future__ import annotations

import json
import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from types import MappingProxyType

import numpy as np

from service import samples
from service.assemble import assemble
from service.spec import read
from solvers.problem import Problem, Sweep
from solvers.solution import Solution, SweepPoint
from solvers.solve import solve
from tests.unit.solvers.problems import LEAST_TIME, stated

ALONE = 10
"""So many of the values are solved for by themselves, to compare."""
NOTHING: Mapping[str, str] = MappingProxyType({})


def _sample(name: str, constants: Mapping[str, str] = NOTHING, endpoints: Mapping[str, str] = NOTHING) -> Problem:
    """A sample with further constants, and some of its end conditions replaced."""
    document = samples.load(name)
    document["constants"] = document.get("constants", {}) | dict(constants)
    document["endpoints"] = [endpoints.get(condition, condition) for condition in document["endpoints"]]
    return assemble(read(json.dumps(document).encode()))


def _least_time() -> Problem:
    ends = ["x(0) = D", "x'(0) = 1", "x(T) = 0", "x'(T) = 0"]
    return stated(**LEAST_TIME | {"constants": {"D": 1}, "endpoints": ends})


CASES: dict[str, tuple[Callable[[], Problem], str, tuple[float, float]]] = {
    "hose": (lambda: _sample("hose"), "l", (3.5, 5.0)),
    "chute": (lambda: _sample("chute"), "v0", (0.2, 1.0)),
    "crucible": (lambda: _sample("crucible"), "D", (2.9, 3.05)),
    "scan stage": (lambda: _sample("scan-stage", {"D": "40 mm"}, {"p(T) = 40": "p(T) = D"}), "D", (0.03, 0.06)),
    "least time": (_least_time, "D", (0.5, 2.0)),
    "lines": (lambda: stated(constants={"D": 1}, endpoints=["x(0) = 0", "x(1) = D"]), "D", (1.0, 2.0)),
}


@dataclass(frozen=True)
class Swept:
    """Seconds for all points together and, on average, for one solved by itself; what came of those of both."""

    points: tuple[SweepPoint, ...]
    together: float
    single: float
    alone: tuple[tuple[SweepPoint, Solution], ...]

    @property
    def share(self) -> float:
        """What a point costs of a solve of its own."""
        return self.together / len(self.points) / self.single


def swept(name: str, count: int) -> Swept:
    """One case with so many values of its constant, in processor time."""
    make, constant, (low, high) = CASES[name]
    problem = make()
    problem = replace(problem, options=replace(problem.options, time_limit=600.0))
    values = np.linspace(low, high, count).tolist()
    solve(problem)  # what is loaded once
    single, alone = 0.0, []
    for value in values[:: count // ALONE]:
        constants = tuple(replace(c, value=value) if c.name == constant else c for c in problem.constants)
        began = time.process_time()
        alone.append(solve(replace(problem, constants=constants)))
        single += time.process_time() - began
    began = time.process_time()
    points = solve(replace(problem, sweeps=(Sweep(constant, tuple(values)),))).sweep
    together = time.process_time() - began
    return Swept(points, together, single / len(alone), tuple(zip(points[:: count // ALONE], alone, strict=True)))
