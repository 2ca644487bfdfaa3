"""A run as the interface shows it."""

from __future__ import annotations

from datetime import UTC, datetime
from typing import Any

from service.run import Run, State
from web import links


def resource(run: Run) -> dict[str, Any]:
    """The members of `schemas.Run`."""
    ended = run.state.ended
    addresses = {
        "self": links.api_run(run.id),
        "page": links.run(run.id),
        "problem": f"{links.api_run(run.id)}/problem",
        "events": links.events(run.id),
    }
    if has_result(run):
        addresses["result"] = links.result(run.id)
        addresses["table"] = links.table(run.id, "csv")
    if not ended:
        addresses["cancel"] = f"{links.api_run(run.id)}/cancel"
    return {
        "id": run.id,
        "state": run.state.value,
        "title": run.title,
        "problem_hash": run.document_hash,
        "created": moment(run.created),
        "finished": moment(run.updated) if ended else None,
        "seconds": run.seconds,
        "verdict": run.verdict,
        "value": run.value,
        "value_error": run.value_error,
        "value_unit": run.value_unit,
        "failure": run.reason if run.state is State.FAILED else None,
        "links": addresses,
    }


def has_result(run: Run) -> bool:
    """True where there is a result document: a finished run, or a stopped one that had something by then."""
    stopped_with_some = run.state is State.STOPPED and (run.verdict is not None or run.value is not None)
    return run.state is State.FINISHED or stopped_with_some


def moment(seconds: float) -> str:
    """Seconds since 1970 as RFC 3339 in UTC, to the millisecond."""
    return datetime.fromtimestamp(seconds, UTC).isoformat(timespec="milliseconds").replace("+00:00", "Z")
