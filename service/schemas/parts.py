"""What several answers have in common, and how a model becomes a JSON Schema."""

from __future__ import annotations

from typing import Any, Literal

from pydantic import BaseModel, ConfigDict, Field
from pydantic.json_schema import GenerateJsonSchema

DIALECT = "https://json-schema.org/draft/2020-12/schema"

RunState = Literal["waiting", "solving", "finished", "failed", "stopped"]
Verdict = Literal[
    "global minimum",
    "local minimum",
    "global maximum",
    "local maximum",
    "stationary",
    "not a minimum",
    "not a maximum",
    "not verified",
    "best found",
    "infeasible",
    "no optimum",
]
Pieces = list[list[float | None]]


class Part(BaseModel):
    """A part of an answer; further members may come with later versions."""

    model_config = ConfigDict(extra="allow")


class Where(Part):
    """A place on the independent variable and what it concerns."""

    place: float | None = Field(description="in the unit of the independent variable")
    subject: str = Field(description="the unknown or condition concerned; empty where there is none")


class Amount(Part):
    """A number with its unit."""

    value: float | None
    unit: str


class _Dialect(GenerateJsonSchema):
    schema_dialect = DIALECT


def json_schema(model: type[BaseModel], address: str) -> dict[str, Any]:
    """The model as a JSON Schema document of its own (2020-12)."""
    schema = model.model_json_schema(schema_generator=_Dialect)
    return {"$schema": DIALECT, "$id": address, **schema}
