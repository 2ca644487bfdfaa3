"""Solves the catalogue, or a part of it, and prints one line per case.

    python -m tests.acceptance.report [ID or its beginning | TAG | SAMPLE | samples]... [--jobs 2] [--limit 90]

"true" is the true error in units of the tolerance, "stated" the stated error, "bound" whether it bounds the true one.
"""

from __future__ import annotations

import argparse
import sys
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

from service import samples
from solvers.solution import Verdict
from tests.acceptance.catalogue import CATALOGUE, KNOWN_FAILURES
from tests.acceptance.promises import PROMISES, owed
from tests.acceptance.records import TAGS, Case, Sort
from tests.acceptance.solving import Outcome, solve_document

COLUMNS = "{:<21} {:<14} {:>19} {:>8} {:>8} {:>5} {:>7} {:>5} {:>2}  {}"
SAMPLES = Path(samples.__file__).parent
GOOD = Sort.MINIMUM.value | Sort.MAXIMUM.value


def chosen(words: list[str]) -> list[Case]:
    """The cases that any of the words names: an id, the beginning of one, or a tag."""
    return [case for case in CATALOGUE.values() if any(word in case.tags or case.id.startswith(word) for word in words)]


def line(case: Case, outcome: Outcome) -> tuple[bool, str]:
    """Whether a case keeps all its promises, and its line."""
    broken = {name: complaint for name in owed(case) if (complaint := PROMISES[name](case, outcome))}
    distance = bound = ""
    if case.sort.attained and outcome.value is not None:
        distance = f"{abs(outcome.value - case.value) / case.allowed:.2g}"
        bound = "no" if "error" in broken else "yes"
    expected = all((case.id, name) in KNOWN_FAILURES for name in broken)
    known = "(known) " if broken and expected else ""
    why = "; ".join(f"{name}: {text}" for name, text in broken.items()) if outcome.value is not None else ""
    return not broken, formatted(case.id, outcome, distance, bound, known + (why or outcome.trouble) if broken else "")


def sample_line(name: str, outcome: Outcome) -> tuple[bool, str]:
    """A sample has no published value, but has to come out with a good verdict."""
    broken = "" if outcome.verdict in GOOD else f"failed checks: {', '.join(outcome.failed_checks)} {outcome.trouble}"
    return not broken, formatted(name, outcome, "", "", broken)


def formatted(name: str, outcome: Outcome, distance: str, bound: str, broken: str) -> str:
    """One line of the table."""
    verdict: Verdict | None = outcome.verdict
    return COLUMNS.format(
        name,
        verdict.value if verdict else "-",
        "-" if outcome.value is None else f"{outcome.value:.12g}",
        distance,
        "-" if outcome.value_error is None else f"{outcome.value_error:.1e}",
        bound,
        f"{outcome.seconds:.2f}",
        outcome.iterations,
        outcome.meshes,
        broken or "ok",
    )


def lines(words: list[str], jobs: int, limit: float) -> Iterator[tuple[bool, str]]:
    """One line after the other, in order, as soon as it is there."""
    cases = chosen(words) if words else list(CATALOGUE.values())
    names = [name for name in samples.names() if not words or "samples" in words or name in words]
    with ThreadPoolExecutor(jobs) as pool:
        solved = pool.map(lambda case: solve_document(case.document, case.figures, limit), cases)
        solved_samples = pool.map(lambda name: solve_document(SAMPLES / f"{name}.json", (), limit), names)
        yield from (line(case, outcome) for case, outcome in zip(cases, solved, strict=True))
        yield from (sample_line(name, outcome) for name, outcome in zip(names, solved_samples, strict=True))


def main() -> int:
    """Print the table; 0 where all promises are kept."""
    parser = argparse.ArgumentParser(description="Solve the catalogue of published problems and compare.")
    parser.add_argument("which", nargs="*", help=f"ids, samples ('samples': all), or tags: {', '.join(sorted(TAGS))}")
    parser.add_argument("--jobs", type=int, default=2)
    parser.add_argument(
        "--limit", type=float, default=90.0, help="seconds for one problem, its own time limit and a margin"
    )
    options = parser.parse_args()
    print(COLUMNS.format("id", "verdict", "value", "true", "stated", "bound", "s", "it", "m", "what is broken"))
    kept = total = 0
    for good, text in lines(options.which, options.jobs, options.limit):
        print(text, flush=True)
        kept, total = kept + good, total + 1
    print(f"{kept} of {total} keep all promises")
    return 0 if kept == total else 1


if __name__ == "__main__":
    sys.exit(main())
