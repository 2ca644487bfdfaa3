"""How long we take beside what else one could do, in processor time of one process; prints tables.

python -m tests.benchmarks.figures script|floor|growth|small|sweep [IDS]...
"""

from __future__ import annotations

import os
import re
import statistics
import sys
import time
from collections import Counter
from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass
from math import nan
from multiprocessing import get_context
from pathlib import Path
from typing import Any
from unittest import mock

from service.threads import ONE_THREAD

os.environ.update(ONE_THREAD)  # before NumPy is loaded: a second thread only waits, and doubles the processor time

import numpy as np

from service import samples
from service.assemble import assemble
from service.memory import keep_freed
from service.spec import read
from solvers.minimise.ipopt import Iterate, Minimum, Start, minimise
from solvers.search.attempt import SOLVED
from solvers.search.effort import Minimiser
from solvers.solution import Solution
from solvers.solve import solve
from solvers.starts.guess import first_guess
from solvers.transcription.functions import compile_problem
from solvers.transcription.layout import layout
from solvers.transcription.lowering import lower
from solvers.transcription.mesh import uniform
from solvers.transcription.program import Program, transcribe
from solvers.transcription.scaling import find_row_sizes, find_scales
from tests.acceptance.catalogue import CATALOGUE
from tests.benchmarks import scripted
from tests.benchmarks.scripts import SCRIPTS
from tests.benchmarks.sweeps import CASES, swept

TOLERANCE = 1e-6
"""Relative, of the value: that of our documents, and that to which the script's meshes agree."""
FINEST = 1e-9
"""The finest to which the script's meshes are asked to agree where they have to be as exact as ours states to be."""
BRIEF = 0.4
"""Seconds below which a timing is repeated."""
LONGEST = 5.0
"""Seconds of ours beyond which a problem has no part in the comparison with a bare call."""


def text(name: str) -> bytes:
    """A document of the catalogue, or a sample."""
    return CATALOGUE[name].document.read_bytes() if name in CATALOGUE else samples.text(name).encode()


def ours(name: str) -> Solution:
    """From the document to the solution with all its checks."""
    return solve(assemble(read(text(name))))


def timed(work: Callable[..., Any], *arguments: Any, **named: Any) -> tuple[float, Any]:
    """Processor time of one call, and what it returns."""
    began = time.process_time()
    result = work(*arguments, **named)
    return time.process_time() - began, result


def warm_up() -> None:
    """Load what a process loads once."""
    for name in ("A38b", "A02", "B02"):
        ours(name)


@dataclass(frozen=True)
class Beside:
    """Seconds of ours and of the other for one problem, and the relative errors of both values."""

    name: str
    ours: float
    other: float
    our_error: float = nan
    other_error: float = nan
    finished: bool = True
    note: str = ""
    as_exact: float = nan  # seconds of the other at our stated accuracy

    @property
    def ratio(self) -> float:
        """Our time over the other's."""
        return self.ours / self.other


def mean_ratio(rows: Iterable[Beside]) -> float:
    """The geometric mean."""
    return statistics.geometric_mean(row.ratio for row in rows)


def beside_script(name: str) -> Beside:
    """One problem by turns; the least of three times where these are short, as nothing makes a time too short."""
    case, script = CATALOGUE[name], SCRIPTS[name]
    our_laps, laps, exact_laps = [], [], []
    for _ in range(3):
        lap, solution = timed(ours, name)
        our_laps.append(lap)
        lap, found = timed(scripted.solve, script, TOLERANCE)
        laps.append(lap)
        stated = solution.value_error / (abs(solution.value) or 1.0)
        exact_laps.append(timed(scripted.solve, script, float(np.clip(stated, FINEST, TOLERANCE)))[0])
        if lap > BRIEF:
            break

    def error(value: float | None) -> float:
        return nan if value is None else abs(value - case.value) / (abs(case.value) or 1.0)

    value = -found.value if case.sort.name == "MAXIMUM" else found.value
    unit = assemble(read(text(name))).value_unit.factor
    return Beside(name, min(our_laps), min(laps), error(solution.value / unit), error(value), found.agreed,
                  f"{found.intervals}", min(exact_laps))  # fmt: skip


def last_program(name: str) -> Program:
    """The program of the mesh that a solution is from."""
    solved: list[Program] = []
    record = Minimiser.record

    def noted(self: Minimiser, program: Program, minimum: Minimum, *found: float) -> None:
        solved.append(program)
        record(self, program, minimum, *found)

    with mock.patch.object(Minimiser, "record", noted):
        ours(name)
    return solved[-1]


def from_first_guess(compiled, mesh) -> tuple[Program, Start]:
    """A program with the sizes and the start that our first guess gives on a mesh."""
    where = layout(compiled, mesh)
    guess = first_guess(compiled, mesh, where)
    scales = find_scales(compiled, where, guess.z)
    program = transcribe(compiled, mesh, where, scales, find_row_sizes(compiled, where, scales, guess.z))
    return program, Start(guess.z / program.scale)


def above_floor(name: str) -> Beside:
    """Ours beside one bare call of the minimiser on our last mesh from our first guess."""
    took, _ = timed(ours, name)
    if took > LONGEST:
        return Beside(name, took, nan, finished=False, note="too long")
    last = last_program(name)
    program, start = from_first_guess(last.compiled, last.mesh)
    bare, minimum = timed(minimise, program, start, options={"ipopt.max_cpu_time": LONGEST})
    if took < BRIEF:
        took = min(took, timed(ours, name)[0])
        bare = min(bare, timed(minimise, program, start)[0])
    return Beside(name, took, bare, finished=minimum.outcome in SOLVED, note=minimum.outcome.value)


@dataclass(frozen=True)
class Size:
    """What one mesh costs: seconds for each iteration, and megabytes at most beyond what was loaded before."""

    intervals: int
    unknowns: int
    iteration: float
    megabytes: float


ITERATIONS = 6
"""How many iterations are timed on each mesh."""


def growth(name: str = "C16a", counts: tuple[int, ...] = (30, 300, 3000)) -> Iterator[Size]:
    """The same few iterations on meshes of ten times as many intervals each, every one in a process of its own."""
    for count in counts:
        with ProcessPoolExecutor(1, get_context("spawn")) as pool:
            yield pool.submit(on_mesh, name, count).result()


def on_mesh(name: str, count: int) -> Size:
    """A few iterations on one uniform mesh."""
    keep_freed()
    compiled = compile_problem(lower(assemble(read(text(name)))))
    program, start = from_first_guess(compiled, uniform(1, 8, 4))
    minimise(program, start)
    before = _megabytes("VmRSS")
    Path("/proc/self/clear_refs").write_text("5")  # forget the peak so far
    laps = []
    for _ in range(3):
        program, start = from_first_guess(compiled, uniform(1, count, 4))
        reached: list[float] = []

        def stop(iterate: Iterate, reached: list[float] = reached) -> bool:
            reached.append(time.process_time())
            return iterate.number >= ITERATIONS

        minimise(program, start, watch=stop)
        laps.append((reached[-1] - reached[0]) / (len(reached) - 1))
    return Size(count, program.layout.size, min(laps), _megabytes("VmHWM") - before)


def _megabytes(line: str) -> float:
    """What the kernel tells of this process's memory."""
    return int(re.search(rf"^{line}:\s+(\d+) kB", Path("/proc/self/status").read_text(), re.M)[1]) / 1024


def _script_table(names: list[str]) -> None:
    print(f"{'problem':<8} {'ours ms':>8} {'script ms':>10} {'ratio':>6} {'as exact ms':>12} {'ratio':>6} "
          f"{'our error':>10} {'its error':>10}  intervals")  # fmt: skip
    rows = []
    for name in names or SCRIPTS:
        row = beside_script(name)
        rows.append(row)
        print(f"{row.name:<8} {1e3 * row.ours:8.0f} {1e3 * row.other:10.0f} {row.ratio:6.2f} "
              f"{1e3 * row.as_exact:12.0f} {row.ours / row.as_exact:6.2f} "
              f"{row.our_error:10.1e} {row.other_error:10.1e}  {row.note}"
              f"{'' if row.finished else ' (gave up)'}", flush=True)  # fmt: skip
    agreed = [row for row in rows if row.finished]
    exact = statistics.geometric_mean(row.ours / row.as_exact for row in rows)
    print(f"geometric mean {mean_ratio(rows):.2f} of {len(rows)}; {mean_ratio(agreed):.2f} of the {len(agreed)} where "
          f"the script came to an end; {exact:.2f} where it has to be as exact as ours states to be; "
          f"sum {sum(r.ours for r in rows) / sum(r.other for r in rows):.2f}; "
          f"worst {max(row.ratio for row in rows):.2f}")  # fmt: skip


def _floor_table(names: list[str]) -> None:
    print(f"{'problem':<8} {'ours ms':>8} {'bare ms':>8} {'ratio':>6}  the bare call")
    rows = []
    for name in names or CATALOGUE:
        try:
            row = above_floor(name)
        except IndexError:
            print(f"{name:<8} no mesh was solved")
            continue
        rows.append(row)
        print(f"{row.name:<8} {1e3 * row.ours:8.0f} {1e3 * row.other:8.0f} {row.ratio:6.2f}  {row.note}", flush=True)
    good = [row for row in rows if row.finished]
    print(f"geometric mean {mean_ratio(good):.2f} of {len(good)}")


def _growth_table(names: list[str]) -> None:
    print("intervals  unknowns  ms per iteration  MB")
    for size in growth(*names[:1]):
        print(f"{size.intervals:9}  {size.unknowns:8}  {1e3 * size.iteration:16.1f}  {size.megabytes:.0f}", flush=True)


SMALL = ("chute", "hose", "A38b")


def small(name: str, rounds: int = 5) -> float:
    """Seconds of processor time for a small problem in a warm process: the least of some rounds."""
    return min(timed(ours, name)[0] for _ in range(rounds))


def _small_table(names: list[str]) -> None:
    for name in names or SMALL:
        print(f"{name:<8} {1e3 * small(name):.0f} ms", flush=True)


POINTS = 1_000
"""How many values of a constant a sweep has here."""


def _sweep_table(names: list[str]) -> None:
    print(f"{'problem':<12} {'single ms':>9} {'point ms':>9} {'share':>6}  verdicts")
    for name in names or CASES:
        found = swept(name, POINTS)
        verdicts = Counter(point.verdict.value if point.verdict else "none" for point in found.points)
        print(f"{name:<12} {1e3 * found.single:9.1f} {1e3 * found.together / POINTS:9.1f} {found.share:6.3f}  "
              f"{dict(verdicts)}", flush=True)  # fmt: skip


TABLES = {"script": _script_table, "floor": _floor_table, "growth": _growth_table, "small": _small_table,
          "sweep": _sweep_table}  # fmt: skip

if __name__ == "__main__":
    warm_up()
    TABLES[sys.argv[1]](sys.argv[2:])
