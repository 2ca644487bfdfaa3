"""The problem document, format 1, as typed records.  What a member means is said in its description."""

from __future__ import annotations

from typing import Annotated, Any, Literal, Self

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, PrivateAttr, model_validator
from pydantic_core import PydanticCustomError, to_json

from service.canonical import fingerprint

LONGEST_FORMULA = 2_000
"""Characters of one formula."""

MOST_NAMES = 100
"""Entries of one table of names (constants, parameters, unknowns, abbreviations)."""

MOST_RELATIONS = 200
"""Entries of one list of relations."""

MOST_OBSERVATIONS = 20
"""Lists of observations."""

MOST_OBSERVED = 1_000
"""Points of one list of observations."""

MOST_POINTS = 5_000
"""Points of one guess."""

MOST_ROWS = 2_000
"""Rows of points of one table."""

MOST_SWEPT = 2_000
"""Values of one constant in a sweep."""

MOST_ARCS = 12
"""Arcs of one problem."""

Number = Annotated[float, Field(allow_inf_nan=False)]
Formula = Annotated[str, Field(min_length=1, max_length=LONGEST_FORMULA)]
Relations = Annotated[tuple[Formula, ...], Field(max_length=MOST_RELATIONS)]
UnitText = Annotated[str, Field(max_length=100, description="Unit such as `mm/s^2` or `kg*m/s^2`; empty: not checked")]
About = Annotated[str, Field(max_length=1_000, description="What it is, in words")]
Within = Annotated[
    tuple[Number | None, Number | None],
    Field(description="Lower and upper bound in the declared unit; null is open", examples=[[0, None], [-1.5, 1.5]]),
]
Points = Annotated[tuple[tuple[Number, Number], ...], Field(min_length=2, max_length=MOST_POINTS)]


class Part(BaseModel):
    """What all parts of a document have in common: they do not change, and unknown members are refused."""

    model_config = ConfigDict(frozen=True, extra="forbid", strict=True)


class IndependentPart(Part):
    """The independent variable and the two ends between which it runs."""

    name: str = Field(max_length=40, examples=["t", "x"])
    unit: UnitText = ""
    start: Number | Formula = Field(
        alias="from", description="First end: a number in `unit`, a formula of constants, or a parameter's name"
    )
    end: Number | Formula = Field(alias="to", description="Last end, likewise; a free end is a parameter")


class ParameterPart(Part):
    """An unknown number."""

    unit: UnitText = ""
    within: Within = (None, None)
    about: About = ""


class UnknownPart(Part):
    """An unknown function of the independent variable; the bounds are on the function itself."""

    unit: UnitText = ""
    within: Within = (None, None)
    about: About = ""


class TablePart(Part):
    """A measured function of one or two arguments, used as `n(r)` or `n(x, y)` in formulas."""

    of: dict[Annotated[str, Field(max_length=40)], UnitText] = Field(
        min_length=1, max_length=2, description="Name of each argument -> its unit", examples=[{"r": "mm"}]
    )
    unit: UnitText = ""
    points: tuple[Annotated[tuple[Number | None, ...], Field(min_length=1)], ...] = Field(
        min_length=2, max_length=MOST_ROWS,
        description="One argument: rows of argument and value. Two: a grid, whose first row is null and the places of "
        "the second argument, and whose other rows are a place of the first and the values there",
        examples=[[[0, 1.62], [1, 1.61], [2, 1.58]], [[None, 0, 1], [20, 4.1, 4.4], [40, 4.6, 5.0]]],
    )  # fmt: skip
    between: Literal["smooth", "monotone", "linear"] = Field(
        "smooth", description="smooth: two continuous derivatives; monotone: one, keeps the points' shape; linear"
    )
    outside: Literal["refuse", "hold", "extend"] = Field(
        "refuse", description="Beyond its range: arguments stay inside; the last value holds; its tangent goes on"
    )
    about: About = ""


class ObservationPart(Part):
    """Measured values along the curve, to which unknowns and parameters are fitted by least squares."""

    of: Formula = Field(description="What was measured: a formula of what runs along the curve", examples=["y", "x*k"])
    unit: UnitText = ""
    sigma: Annotated[Number, Field(gt=0)] | None = Field(
        None, description="One standard deviation of each value, where a point does not give its own"
    )
    points: Annotated[
        tuple[Annotated[tuple[Number, ...], Field(min_length=2, max_length=3)], ...],
        Field(min_length=1, max_length=MOST_OBSERVED, description="[place, value] or [place, value, sigma]"),
    ]
    arc: str = Field(
        "",
        max_length=100,
        description="The arc on which all of this was measured; may be absent where the places say so",
    )
    about: About = ""


class FunctionalPart(Part):
    """What is sought: an extremum of the integral of `integrand` plus the `endpoint` term.

    Where something was observed both may be absent: then the squares of the misfits are all that is minimised.
    """

    seek: Literal["minimum", "maximum", "stationary"] = Field(description="The sort of extremum")
    integrand: Formula | None = Field(None, description="Formula under the integral", examples=["y*sqrt(1 + y'^2)"])
    endpoint: Formula | None = Field(
        None, description="Formula of values at places and parameters; `0` asks only for what satisfies the conditions",
        examples=["T", "x(T)^2"],
    )  # fmt: skip


class ArcPart(Part):
    """A stretch of the independent variable with laws of its own, beside those that hold on all arcs."""

    name: str = Field(min_length=1, max_length=40, examples=["burn"])
    start: Number | Formula = Field(alias="from", description="Where it begins: as the ends of `independent`")
    end: Number | Formula = Field(alias="to", description="Where it ends; there the next arc begins")
    where: Annotated[dict[str, Formula], Field(
        max_length=MOST_NAMES,
        description="Name -> formula on this arc; usable outside where every arc has that name")] = {}  # fmt: skip
    dynamics: Relations = Field((), description="Differential equations on this arc")
    constraints: Relations = Field((), description="Relations everywhere on this arc, and integrals over it")
    integrand: Formula | None = Field(None, description="Added to the integrand of `functional` on this arc")


class SweepPart(Part):
    """The values that one constant takes: `values`, or `count` of them evenly from `from` to `to`."""

    start: Number | None = Field(None, alias="from", description="First value, in the unit of the constant")
    end: Number | None = Field(None, alias="to", description="Last value")
    count: Annotated[int, Field(ge=2, le=MOST_SWEPT)] | None = Field(None, description="How many values, both included")
    values: Annotated[tuple[Number, ...], Field(min_length=1, max_length=MOST_SWEPT)] | None = Field(
        None, description="The values themselves, increasing", examples=[[1, 1.5, 2, 3]]
    )

    @model_validator(mode="after")
    def _one_of_both(self) -> Self:
        given = [part is not None for part in (self.start, self.end, self.count)]
        if any(given) if self.values is not None else not all(given):
            raise PydanticCustomError("no_sweep", "values, or from, to and count")
        return self


class ContinuationPart(Part):
    """A branch of solutions followed in one constant, from its own value and around folds."""

    constant: str = Field(max_length=40, description="Name of the constant")
    to: Number = Field(description="Value, in its unit, towards which the branch is followed")


class SolvePart(Part):
    """How far to go."""

    tolerance: Annotated[float, Field(ge=1e-12, le=0.1, description="Relative, of curve and value")] = 1e-6
    time_limit: Annotated[float, Field(gt=0, le=3_600, description="Seconds")] = 60.0
    starts: Annotated[int, Field(ge=1, le=100, description="How many different starts are tried")] = 1
    points: Annotated[int, Field(ge=50, le=200_000, description="Limit on the points of the mesh")] = 20_000


def _not_true(value: Any) -> Any:
    """Python takes true for 1; JSON does not."""
    if value is True:
        raise PydanticCustomError("literal_error", "expected 1", {"expected": "1"})
    return value


class Document(Part):
    """A problem document, format 1: what one would write on paper, and nothing about the numerical method."""

    format: Annotated[Literal[1], BeforeValidator(_not_true)] = Field(description="The format of this document")
    title: str = Field("", max_length=200)
    notes: str = Field("", max_length=20_000)
    independent: IndependentPart
    constants: Annotated[dict[str, Number | Annotated[str, Field(min_length=1, max_length=200)]], Field(
        max_length=MOST_NAMES, description="Name -> number, `value unit`, or `value unit +/- tolerance`",
        examples=[{"g": "9.80665 m/s^2", "l": "0.80 m +/- 0.01 m", "n": 3}])] = {}  # fmt: skip
    parameters: Annotated[dict[str, ParameterPart], Field(max_length=MOST_NAMES)] = {}
    unknowns: Annotated[dict[str, UnknownPart], Field(min_length=1, max_length=MOST_NAMES)]
    tables: Annotated[dict[str, TablePart], Field(
        max_length=MOST_NAMES, description="Name -> measured function given by points")] = {}  # fmt: skip
    where: Annotated[dict[str, Formula], Field(
        max_length=MOST_NAMES, description="Name -> formula: abbreviations, usable everywhere")] = {}  # fmt: skip
    dynamics: Relations = Field((), description="Differential equations", examples=[["x'' = a", "m*v' + k*v = F"]])
    functional: FunctionalPart = FunctionalPart(seek="minimum")
    endpoints: Relations = Field(
        (),
        description="Relations between values at the ends or at places between",
        examples=[["y(0) = 0", "x(T) <= D"]],
    )
    constraints: Relations = Field(
        (),
        description="Relations that hold everywhere, and integral ones",
        examples=[["-2 <= u <= 2", "integral(sqrt(1 + y'^2)) = 4.2"]],
    )
    arcs: Annotated[tuple[ArcPart, ...], Field(
        max_length=MOST_ARCS,
        description="Stretches that follow each other; what has dynamics is continuous where they meet, unless "
        "`endpoints` has the value after a junction, as in `m(t1+) = m(t1-) - shell`")] = ()  # fmt: skip
    observations: Annotated[tuple[ObservationPart, ...], Field(
        max_length=MOST_OBSERVATIONS,
        description="Measured values: the squares of the misfits join the functional")] = ()  # fmt: skip
    guess: Annotated[dict[str, Number | Formula | Points], Field(
        max_length=MOST_NAMES,
        description="Name -> formula or points for an unknown, number for a parameter")] = {}  # fmt: skip
    sweep: Annotated[dict[str, SweepPart], Field(
        max_length=2, description="Constant -> the values for which the problem is solved too; two constants: a grid",
        examples=[{"D": {"from": 1, "to": 4, "count": 31}}])] = {}  # fmt: skip
    continuation: ContinuationPart | None = None
    solve: SolvePart = SolvePart()

    @model_validator(mode="after")
    def _something_sought(self) -> Self:
        functional = self.functional
        of_arcs = any(arc.integrand for arc in self.arcs)
        if functional.integrand is functional.endpoint is None and not (of_arcs or self.observations):
            raise PydanticCustomError("no_functional", "a functional or observations are needed")
        return self

    _source: dict[str, Any] = PrivateAttr(default_factory=dict)

    @classmethod
    def of(cls, source: dict[str, Any]) -> Document:
        """The record of a parsed document, which it keeps.  Raises pydantic's `ValidationError`."""
        document = cls.model_validate_json(to_json(source))  # only JSON turns into tuples under strict rules
        document._source = source
        return document

    @property
    def source(self) -> dict[str, Any]:
        """The document as it was sent."""
        return self._source

    def canonical_hash(self) -> str:
        """`sha256:…` over the canonical text: the same for documents that differ in spacing and order only."""
        return fingerprint(self._source)
