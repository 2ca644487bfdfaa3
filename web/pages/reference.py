"""The reference of the HTTP interface, made from its OpenAPI document alone."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any, ClassVar

from web.form.language import Example, language
from web.form.pretty import pretty
from web.pages.page import Page, told

_METHODS = ("get", "post", "put", "patch", "delete")


@dataclass(frozen=True, slots=True)
class Parameter:
    """One thing that can be set in the address or in a header."""

    name: str
    place: str
    kind: str
    required: bool
    meaning: str


@dataclass(frozen=True, slots=True)
class Answer:
    """One status with its meaning and media types."""

    status: str
    meaning: str
    media_types: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Operation:
    """One method of one address."""

    anchor: str
    method: str
    address: str
    summary: str
    paragraphs: tuple[str, ...]
    parameters: tuple[Parameter, ...]
    body: str
    answers: tuple[Answer, ...]


@dataclass(frozen=True, slots=True)
class Group:
    """Operations on the same thing."""

    title: str
    operations: tuple[Operation, ...]


@dataclass(frozen=True, slots=True)
class Member:
    """One member of a document."""

    name: str
    kind: str
    required: bool
    meaning: str


@dataclass(frozen=True, slots=True)
class Shape:
    """The members of a document or of a part of one."""

    name: str
    meaning: str
    members: tuple[Member, ...]


@dataclass(frozen=True, kw_only=True)
class ReferencePage(Page):
    """Everything that a program can ask for."""

    template: ClassVar[str] = "reference.html"
    here: ClassVar[str] = "reference"

    version: str = told("Version of the interface.")
    introduction: str = told("What holds for all operations.")
    groups: tuple[Group, ...] = told("The operations.")
    shapes: tuple[Shape, ...] = told("The documents that go in and come out, with their members.")
    example: str = told("A whole problem document as JSON, or empty.")
    language: tuple[Example, ...] = told("What may stand in a formula.")


def reference_page(description: Mapping[str, Any]) -> ReferencePage:
    """The page of an OpenAPI document."""
    groups: dict[str, list[Operation]] = {}
    for address, methods in description["paths"].items():
        for method in _METHODS:
            if method in methods:
                operation = methods[method]
                title = (operation.get("tags") or ["other"])[0]
                groups.setdefault(title, []).append(_operation(method, address, operation))
    schemas = description.get("components", {}).get("schemas", {})
    examples = schemas.get("Document", {}).get("examples") or [None]
    return ReferencePage(
        title="HTTP interface",
        version=description["info"]["version"],
        introduction=description["info"].get("description", ""),
        groups=tuple(Group(title.capitalize(), tuple(operations)) for title, operations in groups.items()),
        shapes=tuple(_shape(name, schema) for name, schema in schemas.items() if schema.get("properties")),
        example=pretty(examples[0]) if examples[0] else "",
        language=language(),
    )


def _operation(method: str, address: str, operation: Mapping[str, Any]) -> Operation:
    return Operation(
        anchor=operation["operationId"],
        method=method.upper(),
        address=address,
        summary=operation.get("summary", ""),
        paragraphs=tuple(part.replace("\n", " ") for part in operation.get("description", "").split("\n\n") if part),
        parameters=tuple(
            Parameter(
                name=parameter["name"],
                place=parameter["in"],
                kind=_kind(parameter.get("schema", {})),
                required=parameter.get("required", False),
                meaning=parameter.get("description", ""),
            )
            for parameter in operation.get("parameters", ())
        ),
        body=", ".join(operation.get("requestBody", {}).get("content", {})),
        answers=tuple(
            Answer(status, answer.get("description", ""), tuple(answer.get("content", ())))
            for status, answer in sorted(operation.get("responses", {}).items())
        ),
    )


def _shape(name: str, schema: Mapping[str, Any]) -> Shape:
    required = schema.get("required", ())
    members = tuple(
        Member(member, _kind(part), member in required, part.get("description", ""))
        for member, part in schema["properties"].items()
    )
    return Shape(name, schema.get("description", "").replace("\n", " "), members)


def _kind(schema: Mapping[str, Any]) -> str:
    """The sort of a value in a few words: `number or null`, `list of Complaint`."""
    return " or ".join(dict.fromkeys(_kinds(schema))) or "anything"


def _kinds(schema: Mapping[str, Any]) -> Iterator[str]:
    if "$ref" in schema:
        yield schema["$ref"].rpartition("/")[2]
    elif "const" in schema:
        yield json.dumps(schema["const"])
    elif "enum" in schema:
        yield from (json.dumps(word) for word in schema["enum"])
    elif choices := schema.get("anyOf") or schema.get("oneOf"):
        for choice in choices:
            yield from _kinds(choice)
    elif schema.get("type") == "array":
        yield f"list of {_kind(schema.get('items', {}))}"
    elif isinstance(schema.get("additionalProperties"), Mapping):
        yield f"object of {_kind(schema['additionalProperties'])}"
    elif "type" in schema:
        yield str(schema["type"])
