"""Every answer that is an error: one record, one table of problem types, one way to answer (RFC 9457 or a page).

    Exception
      Fault          an expected failure with its problem type; raised by routes, answered here
      Refused        the document refuses (`service.complaints`); answered as the problem type of its stage
      HTTPException  the framework's own (no such address, method not allowed)
      anything else  a bug: logged with its traceback by the server, answered with 500

A solver outcome (infeasible, out of time) is none of these: it is a finished run with a verdict.
"""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass
from typing import Any

from fastapi import FastAPI
from fastapi.exceptions import RequestValidationError
from starlette.exceptions import HTTPException
from starlette.requests import Request
from starlette.responses import HTMLResponse, Response

from service.complaints import Refused
from service.methods import allowed
from service.negotiation import wants_page
from service.run import IdempotencyError, QueueFullError, StoreError, StoreFullError

PROBLEM_JSON = "application/problem+json"


@dataclass(frozen=True, slots=True)
class ProblemType:
    """What `/problems/{name}` explains."""

    name: str
    status: int
    title: str
    explanation: str


_TYPES = (
    ProblemType(
        "json",
        400,
        "The body is no strict JSON",
        "A problem document is one JSON object (RFC 8259) in UTF-8. NaN and infinite numbers, two members of the same "
        "name and anything after the object are refused. The complaint says at which line and column reading stopped.",
    ),
    ProblemType(
        "schema",
        422,
        "The document has not the shape of a problem",
        "Members are missing, unknown, or of the wrong sort. Each complaint points at the member and says what is "
        "expected there. The whole shape is the JSON Schema at /api/v1/schema/problem.json.",
    ),
    ProblemType(
        "names",
        422,
        "A name means nothing, or two things",
        "A formula uses a name that the document does not declare, or a name is declared twice or is taken already by "
        "a function or by pi. Every complaint points at the formula and marks the characters.",
    ),
    ProblemType(
        "formulas",
        422,
        "A formula cannot be read",
        "Formulas use + - * / ^, parentheses, primes for derivatives, values at a place such as y(0), integral(...), "
        "and the listed functions. There are no implicit products: write 2*x, not 2x.",
    ),
    ProblemType(
        "units",
        422,
        "Units do not fit",
        "Both sides of a relation, both ends of a range and all terms of a sum need units of the same kind. A bare "
        "number that stands alone on one side has the unit of the other side.",
    ),
    ProblemType(
        "conditions",
        422,
        "Too many, contradictory or impossible conditions",
        "More endpoint conditions than the dynamics leave freedom, two conditions that cannot both hold, bounds that "
        "exclude an endpoint, or an interval of no length. The complaints name the conditions.",
    ),
    ProblemType(
        "size",
        422,
        "The document is larger than the service takes",
        "The complaint names the limit and the figure: characters and nesting of a formula, number of unknowns, "
        "constants, conditions or points.",
    ),
    ProblemType(
        "parameters",
        422,
        "The query cannot be understood",
        "A parameter of the query or of the path is missing, unknown or out of its range. Each complaint names it.",
    ),
    ProblemType(
        "not-found", 404, "Nothing is here", "The address names nothing that this service has, or has any more."
    ),
    ProblemType(
        "method",
        405,
        "The address does not take this method",
        "The Allow header lists the methods that this address takes.",
    ),
    ProblemType(
        "not-acceptable",
        406,
        "No representation will do",
        "The Accept header excludes every form in which this address can be answered; the detail lists them.",
    ),
    ProblemType(
        "unfinished",
        409,
        "The run is not finished",
        "There is no result yet. Ask the run for its state, listen to its events, or come back after the time in "
        "Retry-After.",
    ),
    ProblemType(
        "no-curve",
        409,
        "The run has no curve",
        "The run ended without a curve, so there is no table of it. The result document says why.",
    ),
    ProblemType(
        "no-part",
        409,
        "The result has no such part",
        "The table asked for is of a part that this result does not have, such as the points of a sweep where no "
        "constant is swept. The result document says what there is.",
    ),
    ProblemType(
        "too-large", 413, "The body is too large", "The detail names the limit in bytes. Nothing of the body was kept."
    ),
    ProblemType(
        "media-type",
        415,
        "The body is of the wrong media type",
        "Problem documents are sent as application/json in UTF-8, without content coding.",
    ),
    ProblemType(
        "idempotency-key",
        422,
        "The key was used for another document",
        "An Idempotency-Key stands for one request. Send the same document again, or choose another key.",
    ),
    ProblemType(
        "foreign-request",
        403,
        "A foreign page may not change anything",
        "Browsers say which page a request comes from. Only this service's own pages may start, cancel or delete runs; "
        "programs that are no browser are not concerned.",
    ),
    ProblemType(
        "host",
        421,
        "Not the host name of this server",
        "A request has to name this server by an address that it knows, which protects it from foreign pages that "
        "give their own name to it. Further names are a setting of the server (CURVEWRIGHT_HOSTS).",
    ),
    ProblemType(
        "bad-request", 400, "The request cannot be understood", "The request itself is broken; the detail says where."
    ),
    ProblemType(
        "internal",
        500,
        "The service made a mistake",
        "This is a fault of the service, not of the request. It was logged; the same request may fail again.",
    ),
    ProblemType(
        "not-ready",
        503,
        "The service is not ready",
        "The database cannot be written, or no worker is up yet. The body says which.",
    ),
    ProblemType(
        "busy",
        503,
        "The service cannot take another run now",
        "The queue is full or the storage is. Nothing was lost, and nothing was accepted: try again after the time in "
        "Retry-After.",
    ),
)
TYPES: Mapping[str, ProblemType] = {kind.name: kind for kind in _TYPES}
_RETRY_AFTER = "5"
_KEEPING: tuple[tuple[type[Exception], str, str], ...] = (
    (IdempotencyError, "idempotency-key", "This Idempotency-Key came with another body before."),
    (QueueFullError, "busy", "Too many runs are waiting already."),
    (StoreFullError, "busy", "The disk of the server is full; an administrator has to make room."),
    (StoreError, "busy", "The database cannot be used now."),
)
"""What goes wrong with keeping runs -> problem type and sentence; the first that fits counts."""
_OF_STATUS = {400: "bad-request", 404: "not-found", 405: "method", 406: "not-acceptable", 413: "too-large"}


class Fault(Exception):  # noqa: N818 (a fault is what it is)
    """An expected failure: its problem type, one sentence about this case, the complaints, further headers."""

    def __init__(
        self,
        kind: str,
        detail: str,
        *,
        complaints: Sequence[Mapping[str, Any]] = (),
        headers: Mapping[str, str] | None = None,
        members: Mapping[str, Any] | None = None,
    ) -> None:
        super().__init__(detail)
        self.kind = TYPES[kind]
        self.detail = detail
        self.complaints = tuple(complaints)
        self.headers = dict(headers or {})
        self.members = dict(members or {})

    def body(self) -> dict[str, Any]:
        """The problem document."""
        document: dict[str, Any] = {
            "type": f"/problems/{self.kind.name}",
            "title": self.kind.title,
            "status": self.kind.status,
            "detail": self.detail,
            **self.members,
        }
        if self.complaints:
            document["complaints"] = list(self.complaints)
        return document


def refusal(refused: Refused) -> Fault:
    """A refused document as a fault: the stage is its problem type."""
    complaints = [asdict(complaint) for complaint in refused.complaints]
    more = f" (and {len(complaints) - 1} more)" if len(complaints) > 1 else ""
    stage = refused.stage.value
    return Fault(stage, f"{complaints[0]['message']}{more}", complaints=complaints, members={"stage": stage})


def respond(request: Request, fault: Fault) -> Response:
    """Answer with the problem document, or with the page of the same where the caller is a browser."""
    headers = {"vary": "Accept", **fault.headers}
    if wants_page(request.headers.get("accept", "")):
        return HTMLResponse(_page(fault), fault.kind.status, headers)
    text = json.dumps(fault.body(), ensure_ascii=False, allow_nan=False).encode("utf-8", "backslashreplace")
    return Response(text, fault.kind.status, headers, media_type=PROBLEM_JSON)


def _page(fault: Fault) -> str:
    from web.pages.fault import fault_page
    from web.render import render

    return render(fault_page(fault.body()))


def install(app: FastAPI) -> None:
    """Make every failure of `app` answer as above."""

    def faulty(request: Request, error: Exception) -> Response:
        assert isinstance(error, Fault)
        return respond(request, error)

    def refused(request: Request, error: Exception) -> Response:
        assert isinstance(error, Refused)
        return respond(request, refusal(error))

    def misread(request: Request, error: Exception) -> Response:
        assert isinstance(error, RequestValidationError)
        return respond(request, _misread(error))

    def unavailable(request: Request, error: Exception) -> Response:
        detail, kind = next((detail, kind) for sort, kind, detail in _KEEPING if isinstance(error, sort))
        headers = {"retry-after": _RETRY_AFTER} if kind == "busy" else {}
        return respond(request, Fault(kind, detail, headers=headers))

    def framework(request: Request, error: Exception) -> Response:
        assert isinstance(error, HTTPException)
        if error.status_code == 405:
            methods = allowed(app, request.scope)
            headers = {"allow": ", ".join(methods)}
            if request.method == "OPTIONS":
                return Response(status_code=204, headers=headers)
            detail = f"{request.url.path} takes {', '.join(methods)}, not {request.method}."
            return respond(request, Fault("method", detail, headers=headers))
        if error.status_code == 404:
            return respond(request, Fault("not-found", f"There is nothing at {request.url.path}."))
        kind = _OF_STATUS.get(error.status_code, "bad-request" if error.status_code < 500 else "internal")
        return respond(request, Fault(kind, str(error.detail), headers=dict(error.headers or {})))

    def broken(request: Request, error: Exception) -> Response:
        return respond(request, Fault("internal", "An unexpected error occurred while answering this request."))

    app.add_exception_handler(Fault, faulty)
    app.add_exception_handler(Refused, refused)
    app.add_exception_handler(RequestValidationError, misread)
    for sort, _, _ in _KEEPING:
        app.add_exception_handler(sort, unavailable)
    app.add_exception_handler(HTTPException, framework)
    app.add_exception_handler(Exception, broken)


def _misread(error: RequestValidationError) -> Fault:
    """Complaints about path, query and headers; the values sent are not echoed."""
    complaints = [
        {
            "parameter": str(problem["loc"][-1]),
            "in": str(problem["loc"][0]),
            "code": str(problem["type"]).replace("_", "-"),
            "message": _MESSAGES.get(problem["type"], "{name}: {message}.").format(
                name=problem["loc"][-1], message=problem["msg"], **problem.get("ctx", {})
            ),
        }
        for problem in error.errors()
    ]
    detail = " ".join(str(complaint["message"]) for complaint in complaints)
    if all(complaint["in"] == "path" for complaint in complaints):
        return Fault("not-found", f"There is nothing at this address. {detail}")
    return Fault("parameters", detail, complaints=complaints)


_MESSAGES: Mapping[str, str] = {
    "extra_forbidden": "There is no parameter '{name}'.",
    "missing": "The parameter '{name}' is missing.",
    "literal_error": "{name} is one of {expected}.",
    "enum": "{name} is one of {expected}.",
    "int_parsing": "{name} has to be a whole number.",
    "int_parsing_size": "{name} has too many digits.",
    "int_from_float": "{name} has to be a whole number.",
    "float_parsing": "{name} has to be a number.",
    "bool_parsing": "{name} has to be true or false.",
    "greater_than_equal": "{name} has to be at least {ge}.",
    "less_than_equal": "{name} has to be at most {le}.",
    "string_too_long": "{name} has more than {max_length} characters.",
}
