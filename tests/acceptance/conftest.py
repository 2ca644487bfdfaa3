"""One solve for each problem, shared by all promises."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator
from concurrent.futures import Future, ThreadPoolExecutor

import pytest

from tests.acceptance.records import Case
from tests.acceptance.solving import Outcome, solve_document


@pytest.fixture(scope="session")
def outcome_of_case(request: pytest.FixtureRequest) -> Iterator[Callable[[Case], Outcome]]:
    """The outcome of a case.  All cases that were selected are solved side by side, each in a process of its own."""
    selected = {
        item.callspec.params["case"].id: item.callspec.params["case"]
        for item in request.session.items
        if hasattr(item, "callspec") and isinstance(item.callspec.params.get("case"), Case)
    }
    with ThreadPoolExecutor(len(os.sched_getaffinity(0))) as pool:
        waiting: dict[str, Future[Outcome]] = {
            case.id: pool.submit(solve_document, case.document, case.figures) for case in selected.values()
        }
        yield lambda case: waiting[case.id].result()
        pool.shutdown(cancel_futures=True)
