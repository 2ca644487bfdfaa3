"""How a problem was understood."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from service.schemas.parts import Part


class IndependentRead(Part):
    """The independent variable and its ends, as formulas."""

    name: str
    unit: str
    start: str = Field(alias="from")
    end: str = Field(alias="to")


class UnknownRead(Part):
    """What became of an unknown function."""

    name: str
    order: int = Field(description="highest derivative anywhere")
    unit: str
    role: Literal["state", "control"]
    free: bool = Field(description="nothing gives its highest derivative: it is chosen")
    sentence: str


class ConstantRead(Part):
    """A constant in its own unit."""

    name: str
    value: float
    unit: str
    tolerance: float | None


class ArcRead(Part):
    """An arc, and what happens where the next one begins."""

    name: str
    start: str = Field(alias="from")
    end: str = Field(alias="to")
    sentence: str


class ParameterRead(Part):
    """An unknown number."""

    name: str
    unit: str


class FunctionalRead(Part):
    """What is sought."""

    sentence: str
    mathml: str
    unit: str


class RelationRead(Part):
    """One relation as mathematics."""

    pointer: str
    kind: Literal["pointwise", "integral", "endpoint", "dynamics", "abbreviation", "parameter"]
    mathml: str
    unit: str


class NecessaryCondition(Part):
    """One condition that the optimum satisfies."""

    kind: Literal[
        "Lagrangian",
        "Hamiltonian",
        "Euler-Lagrange",
        "costate",
        "stationarity",
        "natural boundary",
        "corner",
        "first integral",
    ]
    subject: str = Field(alias="for")
    mathml: str
    text: str


class Freedom(Part):
    """How much there is to choose, and how much is fixed."""

    unknown_functions: int
    conditions: int
    sentence: str


class TableRead(Part):
    """A measured function."""

    name: str
    of: list[ParameterRead] = Field(description="its arguments")
    unit: str
    sentence: str = Field(description="how many points there are, and what holds between and beyond them")


class ReadingDocument(Part):
    """How the problem was understood."""

    independent: IndependentRead
    unknowns: list[UnknownRead]
    parameters: list[ParameterRead]
    constants: list[ConstantRead]
    tables: list[TableRead]
    arcs: list[ArcRead] = Field(description="empty where one set of laws holds from end to end")
    functional: FunctionalRead
    relations: list[RelationRead]
    necessary: list[NecessaryCondition] | None = Field(default=None, description="only where it was asked for")
    freedom: Freedom
    notes: list[str]
