"""The OpenAPI document: what the routes say of themselves, with the problem document and the failures added."""

from __future__ import annotations

from typing import Any

from fastapi import FastAPI
from fastapi.openapi.utils import get_openapi

from service.errors import PROBLEM_JSON, TYPES

OPENAPI_VERSION = "3.2.0"
INTRODUCTION = (
    "Post a problem document, get a verified curve with its evidence, its tables and a permanent address. Every "
    "failure is a problem document (RFC 9457) that says what is wrong, where, and what would be right; the outcome of "
    "a solve, also an infeasible one, is never a failure of the request."
)
_REF = "#/components/schemas/"

PROBLEM_BODY: dict[str, Any] = {
    "requestBody": {
        "required": True,
        "description": "A problem document, format 1.",
        "content": {"application/json": {"schema": {"$ref": f"{_REF}Document"}}},
    }
}
"""`openapi_extra` of the operations that take a problem document."""


def shape(name: str, meaning: str = "Successful answer") -> dict[str, Any]:
    """One entry of `responses`: a JSON answer of the shape `name` of `service.schemas`.

    Only its name is kept: from a model the framework builds a validator at start, which costs a tenth of a second.
    """
    return {"description": meaning, "content": {"application/json": {"schema": {"$ref": f"{_REF}{name}"}}}}


def leading_on(response: dict[str, Any], *operations: str) -> dict[str, Any]:
    """The entry with links: the `id` of its answer is the parameter of these operations."""
    parameters = {"id": "$response.body#/id"}
    return {**response, "links": {name: {"operationId": name, "parameters": parameters} for name in operations}}


def failures(*names: str) -> dict[int | str, dict[str, Any]]:
    """`responses` for these problem types, in their order; those of one status are listed together."""
    found: dict[int | str, dict[str, Any]] = {}
    for name in names:
        kind = TYPES[name]
        if kind.status in found:
            found[kind.status]["description"] += f" {kind.title}."
        else:
            content = {PROBLEM_JSON: {"schema": {"$ref": f"{_REF}ProblemDetails"}}}
            found[kind.status] = {"description": f"{kind.title}.", "content": content}
    return found


REFUSALS = ("json", "too-large", "media-type", "schema", "names", "formulas", "units", "conditions", "size")


def describe(app: FastAPI) -> None:
    """Give `app` its OpenAPI document; made when it is first asked for."""

    def openapi() -> dict[str, Any]:
        if app.openapi_schema is None:
            app.openapi_schema = _description(app)
        return app.openapi_schema

    app.openapi = openapi  # type: ignore[method-assign]


def _description(app: FastAPI) -> dict[str, Any]:
    description = get_openapi(
        title=app.title,
        version=app.version,
        openapi_version=OPENAPI_VERSION,
        description=INTRODUCTION,
        routes=app.routes,
    )
    schemas = description.setdefault("components", {}).setdefault("schemas", {})
    schemas.update(_schemas())
    for name in ("HTTPValidationError", "ValidationError"):  # the framework's own, which is never answered
        schemas.pop(name, None)
    for methods in description["paths"].values():
        for operation in methods.values():
            if "422" in operation["responses"]:
                operation["responses"]["422"].update(failures("parameters")[422] if _bare(operation) else {})
    return description


def _schemas() -> dict[str, Any]:
    """Every document that goes in or comes out; loaded only for this."""
    from service.schemas import reading, result, runs
    from service.spec import Document
    from service.spec.schema import problem_schema

    found: dict[str, Any] = {}
    answers = (runs.Run, runs.RunPage, result.ResultDocument, runs.Readiness, runs.ProblemDetails)
    for model in (Document, reading.ReadingDocument, *answers):
        schema = model.model_json_schema(by_alias=True, ref_template=_REF + "{model}")
        found.update(schema.pop("$defs", {}))
        found[model.__name__] = schema
    found["Document"]["examples"] = problem_schema()["examples"]
    return found


def _bare(operation: dict[str, Any]) -> bool:
    """True where the framework put its own 422 in."""
    content = operation["responses"]["422"].get("content", {})
    return "HTTPValidationError" in str(content)
