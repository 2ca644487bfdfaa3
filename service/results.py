"""The result document of a run, or the fault that says why there is none."""

from __future__ import annotations

import json
from typing import Any

from service.errors import Fault
from service.run import Run
from service.store import Store


def result_text(run: Run, store: Store) -> bytes:
    """As it is stored: JSON in UTF-8."""
    if not run.state.ended:
        raise Fault("unfinished", f"The run is {run.state.value}: no result yet.", headers={"retry-after": "1"})
    text = store.result(run.id)
    if text is None:
        reason = f": {run.reason}" if run.reason else ""
        raise Fault("not-found", f"The run {run.state.value} and left no result{reason}.")
    return text


def result_of(run: Run, store: Store) -> dict[str, Any]:
    """The same, read."""
    result: dict[str, Any] = json.loads(result_text(run, store))
    return result


def shown_result(run: Run, store: Store) -> dict[str, Any]:
    """The result document of a run that has ended; where it left none, its problem and why."""
    text = store.result(run.id)
    result: dict[str, Any] = {} if text is None else json.loads(text)
    if text is None:
        result["problem"] = json.loads(store.document(run.id) or "{}")
        result["problem_hash"] = run.document_hash
        sentence = f"The run {run.state.value}" + (f": {run.reason}." if run.reason else ".")
        result["diagnosis"] = {"reason": run.state.value, "sentence": sentence, "findings": []}
    return {**result, "id": run.id, "state": run.state.value}
