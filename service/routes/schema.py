"""The shapes of all documents at addresses that stay."""

from __future__ import annotations

import json
from typing import Any

from fastapi import APIRouter
from starlette.requests import Request
from starlette.responses import Response

from service import conditional
from web import links

SCHEMA_JSON = "application/schema+json"
OPENAPI_JSON = "application/vnd.oai.openapi+json;version=3.2"

router = APIRouter(tags=["schemas"], default_response_class=Response)
_SCHEMA: dict[int | str, dict[str, Any]] = {200: {"description": "The schema", "content": {SCHEMA_JSON: {}}}}


@router.get(links.PROBLEM_SCHEMA, summary="JSON Schema of the problem document", response_model=None, responses=_SCHEMA)
def read_problem_schema(request: Request) -> Response:
    """Draft 2020-12, with examples that validate."""
    from service.spec.schema import problem_schema

    return _schema(request, {**problem_schema(), "$id": links.PROBLEM_SCHEMA})


@router.get(links.RESULT_SCHEMA, summary="JSON Schema of the result document", response_model=None, responses=_SCHEMA)
def read_result_schema(request: Request) -> Response:
    """Draft 2020-12."""
    from service.schemas.parts import json_schema
    from service.schemas.result import ResultDocument

    return _schema(request, json_schema(ResultDocument, links.RESULT_SCHEMA))


@router.get(
    links.API_DESCRIPTION,
    summary="This interface as an OpenAPI document",
    response_model=None,
    responses={200: {"description": "The description", "content": {OPENAPI_JSON: {}}}},
)
def read_description(request: Request) -> Response:
    """OpenAPI 3.2."""
    return conditional.answer(request, _text(request.app.openapi()), OPENAPI_JSON)


def _schema(request: Request, schema: dict[str, Any]) -> Response:
    return conditional.answer(request, _text(schema), SCHEMA_JSON)


def _text(document: Any) -> bytes:
    return json.dumps(document, ensure_ascii=False, indent=1).encode()
